package terminal

import (
	"context"
	"errors"
	"io"
	"reflect"
	"strings"
	"sync"

	tea "charm.land/bubbletea/v2"
)

// framesASecond bounds how often the screen is drawn.
const framesASecond = 10

// Options is what Show needs.
type Options struct {
	// In and Out are the terminal; Environ its environment, from which the
	// number of colours and NO_COLOR are taken.
	In      io.Reader
	Out     io.Writer
	Environ []string
	// By is who marks alarms as seen; it may be empty.
	By string
	// ASCII keeps to the letters that every terminal has.
	ASCII bool
}

// UTF8 says whether the environment's terminal shows more than ASCII, by the
// locale that counts (POSIX: LC_ALL before LC_CTYPE before LANG). Where none is
// set, as on Windows, it is taken to.
func UTF8(environ []string) bool {
	for _, name := range []string{"LC_ALL", "LC_CTYPE", "LANG"} {
		for _, e := range environ {
			if v, ok := strings.CutPrefix(e, name+"="); ok && v != "" {
				v = strings.ToLower(v)
				return strings.Contains(v, "utf-8") || strings.Contains(v, "utf8")
			}
		}
	}
	return true
}

// Show fills a terminal with a source's frames until a person quits, the
// context ends or the source does. It returns the source's error.
func Show(ctx context.Context, s Source, o Options) error {
	outer := ctx
	ctx, stop := context.WithCancel(ctx)
	m := newModel(ctx, s, o)
	// The program is asked to quit and not killed by a context: only so does it
	// wait for its reader of keys.
	p := tea.NewProgram(m, tea.WithInput(o.In), tea.WithOutput(o.Out), tea.WithEnvironment(o.Environ),
		tea.WithFPS(framesASecond), tea.WithoutSignalHandler())
	var beside sync.WaitGroup
	beside.Go(func() {
		if err := s.Run(ctx, func(f Frame) { p.Send(frameMsg(cleaned(f))) }); ctx.Err() == nil {
			p.Send(endMsg{err})
		}
	})
	beside.Go(func() {
		<-ctx.Done()
		p.Quit()
	})
	_, err := p.Run()
	stop()
	beside.Wait()
	switch {
	case m.failed != nil:
		return m.failed
	case outer.Err() != nil, errors.Is(err, tea.ErrInterrupted):
		return nil
	}
	return err
}

// cleaned is a frame without anything that could steer a terminal.
func cleaned(f Frame) Frame {
	cleanAll(reflect.ValueOf(&f).Elem())
	return f
}

// cleanAll cleans every text in a value, so that none is forgotten.
func cleanAll(v reflect.Value) {
	switch v.Kind() {
	case reflect.String:
		if was := v.String(); v.CanSet() {
			if is := clean(was); is != was {
				v.SetString(is)
			}
		}
	case reflect.Struct:
		for i := range v.NumField() {
			cleanAll(v.Field(i))
		}
	case reflect.Slice:
		if v.Type().Elem().Kind() == reflect.Array {
			return // points
		}
		for i := range v.Len() {
			cleanAll(v.Index(i))
		}
	}
}
