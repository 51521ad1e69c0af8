package forward

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"

	"gaugelog/ingest/segment"
)

// signature changes when the folder does.
func (f *Forwarder) signature() (string, error) {
	entries, err := f.o.FS.ReadDir(segment.ReadingsDir)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return "", err
	}
	sign := fmt.Sprint(len(entries))
	if n := len(entries); n > 0 {
		if info, err := entries[n-1].Info(); err == nil {
			sign += fmt.Sprint(" ", entries[n-1].Name(), info.Size())
		}
	}
	for _, name := range []string{segment.MarksFile, segment.EventsFile} {
		if file, err := f.o.FS.Open(name); err == nil {
			if info, err := file.Stat(); err == nil {
				sign += fmt.Sprint(" ", info.Size())
			}
			file.Close()
		}
	}
	return sign, nil
}

// pass sends what is new: the logs first, for they are small and say what the
// readings mean, then what was held back and is no more, then the readings,
// oldest first with a share for the newest.
func (f *Forwarder) pass(ctx context.Context) error {
	d, err := segment.OpenFolder(f.o.FS)
	if err != nil {
		return err
	}
	if err := f.logs(ctx, d); err != nil {
		return err
	}
	if err := f.held(ctx, d); err != nil {
		return err
	}
	names := d.Names()
	n := &newest{f: f}
	for i, name := range names {
		if f.whole[name] {
			continue
		}
		f.behind()
		n.instead = name
		err := f.file(ctx, d, name, n.share)
		if errors.Is(err, fs.ErrNotExist) { // it was compressed since the folder was opened
			if d, err = segment.OpenFolder(f.o.FS); err == nil {
				err = f.file(ctx, d, name, n.share)
			}
		}
		if err != nil {
			return err
		}
		// A segment is closed before the next begins.
		f.whole[name] = i < len(names)-1
	}
	f.board.change(func(s *State) { s.Segments = 0 })
	return nil
}

func (f *Forwarder) logs(ctx context.Context, d *segment.Folder) error {
	for _, name := range []string{segment.MarksFile, segment.EventsFile} {
		if err := f.file(ctx, d, name, nil); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	return nil
}

// newest sends of the newest segment while older ones are sent: a stretch of
// it for each of theirs, so that after weeks of absence both what is now and
// what was are there soon.
type newest struct {
	f       *Forwarder
	instead string // the segment being sent
	signed  string // all was sent when the folder looked like this
	folder  *segment.Folder
	opened  string // the folder looked like this when it was opened
}

// errEnough ends the sending of a file that has had its turn.
var errEnough = errors.New("enough for now")

// share is called after each stretch of an older segment.
func (n *newest) share(ctx context.Context) error {
	now, err := n.f.signature()
	if err != nil {
		return err
	}
	if now == n.signed {
		return nil // all of it was sent, and nothing has come since
	}
	if n.folder == nil || now != n.opened {
		if n.folder, err = segment.OpenFolder(n.f.o.FS); err != nil {
			return err
		}
		n.opened = now
		if err := n.f.logs(ctx, n.folder); err != nil {
			return err
		}
	}
	names := n.folder.Names()
	if last := names[len(names)-1]; last != n.instead {
		err = n.f.file(ctx, n.folder, last, func(context.Context) error { return errEnough })
	}
	switch {
	case errors.Is(err, errEnough):
		return nil
	case errors.Is(err, fs.ErrNotExist):
		n.folder = nil // it was compressed since
		return nil
	}
	n.signed = now
	return err
}

// file sends the rest of one file, and calls between, where it is not nil,
// after each stretch.
func (f *Forwarder) file(ctx context.Context, d *segment.Folder, name string, between func(context.Context) error) error {
	t, err := d.Tape(name, f.cursor.Offsets[name])
	if errors.Is(err, segment.ErrNoPlace) {
		f.tell(Notice{Again: name + ": " + err.Error() + ": it is sent again"})
		f.cursor.Offsets[name] = 0
		t, err = d.Tape(name, 0)
	}
	if err != nil {
		return err
	}
	defer t.Close()
	for {
		s, err := t.Next()
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return err
		}
		if err := f.take(ctx, t, name, s); err != nil {
			return err
		}
		if between != nil {
			if err := between(ctx); err != nil {
				return err
			}
		}
	}
}

// take sends a stretch, or notes that it is held back, and moves the cursor.
func (f *Forwarder) take(ctx context.Context, t *segment.Tape, name string, s segment.Stretch) error {
	from := f.cursor.Offsets[name]
	if s.Unset > 0 {
		f.count.Held += s.Unset
		f.cursor.hold(stretch{name, from, s.To})
	} else if err := f.stretch(ctx, s, t.Gauges()); err != nil {
		return err
	}
	f.cursor.Offsets[name] = s.To
	if err := syncRead(t); err != nil {
		return err
	}
	return f.cursor.save(f.state, f.name)
}

// stretch sends one stretch of a file.
func (f *Forwarder) stretch(ctx context.Context, s segment.Stretch, gauges []string) (err error) {
	f.lines, err = f.liner.batch(f.lines[:0], s.Batch, gauges, func(err error) error {
		return f.setAside([]byte("\n"), "a record of "+s.File+" cannot be sent: "+err.Error())
	})
	if err != nil {
		return err
	}
	if f.o.Brief != "" && !f.briefed && len(s.Time) > 0 {
		line, err := f.liner.encode("rig", nil, []segment.Field{{Key: "brief", Value: f.o.Brief}}, s.Time[len(s.Time)-1])
		if err == nil { // a rig file that no line can hold is no reason not to send readings
			f.lines = append(f.lines, line...)
		}
		f.briefed = true
	}
	if err := f.send(ctx, f.lines); err != nil {
		return err
	}
	f.board.change(func(b *State) {
		b.Count = f.count
		if n := len(s.Time); n > 0 {
			b.Newest = max(b.Newest, s.Time[n-1])
		}
	})
	return nil
}

// held sends what was held back where its clock is known now.
func (f *Forwarder) held(ctx context.Context, d *segment.Folder) error {
	for i := 0; i < len(f.cursor.Held); {
		h := &f.cursor.Held[i]
		done, err := f.heldOne(ctx, d, h)
		if err != nil {
			return err
		}
		if !done {
			i++
			continue
		}
		f.cursor.Held = append(f.cursor.Held[:i], f.cursor.Held[i+1:]...)
		if err := f.cursor.save(f.state, f.name); err != nil {
			return err
		}
	}
	return nil
}

// heldOne sends as much of a held stretch as can be; true when all is sent.
func (f *Forwarder) heldOne(ctx context.Context, d *segment.Folder, h *stretch) (bool, error) {
	t, err := d.Tape(h.File, h.From)
	if errors.Is(err, segment.ErrNoPlace) {
		return true, nil // it was written again elsewhere, and is held from there
	}
	if err != nil {
		return false, err
	}
	defer t.Close()
	for h.From < h.To {
		s, err := t.Next()
		if err == io.EOF {
			return true, nil
		}
		if err != nil || s.Unset > 0 {
			return false, err
		}
		if err := f.stretch(ctx, s, t.Gauges()); err != nil {
			return false, err
		}
		h.From = s.To
		if err := f.cursor.save(f.state, f.name); err != nil {
			return false, err
		}
	}
	return true, nil
}
