package live

import (
	"context"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/cdp"
	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/chromedp"

	"gaugelog/ingest"
	"gaugelog/ingest/desk"
	"gaugelog/ingest/desk/desktest"
)

// The test in a browser takes a minute; it runs where it is asked for, and
// always in the continuous integration:
//
//	go test ./ingest/live -run TestInABrowser -browser [-shots FOLDER]
var (
	inBrowser = flag.Bool("browser", false, "run the test in a real browser")
	shots     = flag.String("shots", "", "folder to put screenshots of the page into")
)

const testToken = "a-token-for-tests-only"

// served is a world with its page.
type served struct {
	*desktest.World
	*Server
	// leave ends the page, not the recording.
	leave func()
}

// serve puts a page before a world, until the test ends.
func serve(t testing.TB, w *desktest.World, open bool) served {
	t.Helper()
	return serveAt(t, w, "127.0.0.1:0", open)
}

func serveAt(t testing.TB, w *desktest.World, address string, open bool) served {
	t.Helper()
	s, err := Listen(Options{Desks: []*desk.Desk{w.Desk}, Address: address, Token: testToken, Open: open})
	for range 100 { // the port may still be held by the page before
		if err == nil {
			break
		}
		time.Sleep(20 * time.Millisecond)
		s, err = Listen(Options{Desks: []*desk.Desk{w.Desk}, Address: address, Token: testToken, Open: open})
	}
	if err != nil {
		t.Fatal(err)
	}
	ctx, stop := context.WithCancel(context.Background())
	ended := make(chan error, 1)
	go func() { ended <- s.Run(ctx) }()
	leave := sync.OnceFunc(func() {
		stop()
		if err := <-ended; err != nil {
			t.Errorf("the page: %v", err)
		}
	})
	t.Cleanup(leave)
	return served{w, s, leave}
}

// outlookOf is an analysis's answer about the test world.
func outlookOf(w *desktest.World) *desk.Outlook {
	f := func(v float64) *float64 { return &v }
	now := time.Now()
	o := &desk.Outlook{At: now.Add(-8 * time.Second).UnixNano(), Gauge: "mid", Step: "l1", Rate: f(0.0131), RateU: f(0.0008), Stage: "primary",
		Sag: []desk.NetSag{{Gauge: "mid", MM: 4.853, U: f(0.004)}, {Gauge: "quarter", MM: 3.342, U: f(0.004)}}}
	if !w.Loaded.IsZero() {
		o.StepFull = w.Loaded.UnixNano()
		o.Forecasts = []desk.Forecast{
			{After: "30 d", At: w.Loaded.Add(30 * 24 * time.Hour).UnixNano(), MM: 5.012, Lo: f(4.995), Hi: f(5.031), Label: "plain"},
			{After: "1 a", At: w.Loaded.Add(8766 * time.Hour).UnixNano(), MM: 5.387, Lo: f(5.29), Hi: f(5.49), Label: "informative"},
		}
		o.MayStop = []desk.MayStop{{WidthMM: 0.2}, {More: 7 * 24 * time.Hour, WidthMM: 0.16}}
		o.Disturbances = []desk.Disturbance{{Kind: "bench-knock", Gauges: []string{"mid", "quarter"}, From: now.Add(-5 * time.Hour).UnixNano(), Size: f(-0.012), Treated: "taken out as an offset"}}
	}
	return o
}

// browser starts Debian's chromium, or skips the test where there is none.
func browser(t *testing.T) context.Context {
	t.Helper()
	must := os.Getenv("GAUGELOG_CI") == "1"
	if !*inBrowser && !must {
		t.Skip("not asked for; see -browser")
	}
	path, err := exec.LookPath("chromium")
	if err != nil {
		if must {
			t.Fatal("chromium is not installed, and the continuous integration must have it")
		}
		t.Skip("chromium is not installed")
	}
	options := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.ExecPath(path), chromedp.NoSandbox, chromedp.DisableGPU,
		chromedp.Flag("disable-dev-shm-usage", true), chromedp.UserDataDir(t.TempDir()))
	alloc, stopAlloc := chromedp.NewExecAllocator(context.Background(), options...)
	ctx, stop := chromedp.NewContext(alloc)
	t.Cleanup(func() {
		stop()
		stopAlloc()
	})
	return ctx
}

// screen is a size of display.
type screen struct {
	name          string
	width, height int64
	mobile        bool
}

var (
	phone  = screen{"phone", 390, 844, true}
	laptop = screen{"laptop", 1366, 768, false}
)

// step is one thing done in the browser.
type step = chromedp.Action[chromedp.Void]

func (s screen) set() step {
	if s.mobile {
		return chromedp.EmulateViewport(s.width, s.height, chromedp.EmulateMobile)
	}
	return chromedp.EmulateViewport(s.width, s.height)
}

func shade(dark bool) step {
	value := "light"
	if dark {
		value = "dark"
	}
	return chromedp.Func(func(ctx context.Context, t *chromedp.Target) error {
		_, err := cdp.Call(ctx, t, emulation.SetEmulatedMedia, emulation.SetEmulatedMediaParams{
			Features: []*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: value}},
		})
		return err
	})
}

// shoot keeps a picture of the whole page where -shots asks for it.
func shoot(name string) step {
	return chromedp.Func(func(ctx context.Context, t *chromedp.Target) error {
		if *shots == "" {
			return nil
		}
		b, err := chromedp.FullScreenshot(100)(ctx, t)
		if err != nil {
			return err
		}
		return keepShot(name, b)
	})
}

func keepShot(name string, b []byte) error {
	if err := os.MkdirAll(*shots, 0o755); err != nil {
		return err
	}
	return os.WriteFile(filepath.Join(*shots, name+".png"), b, 0o644)
}

// shootTop keeps a picture of what is on the display at first.
func shootTop(name string) step {
	return chromedp.Func(func(ctx context.Context, t *chromedp.Target) error {
		if *shots == "" {
			return nil
		}
		b, err := chromedp.CaptureScreenshot()(ctx, t)
		if err != nil {
			return err
		}
		return keepShot(name, b)
	})
}

// wide fails where the page is wider than the display, so that a phone would
// have to scroll sideways.
func wide(s screen) step {
	return chromedp.Func(func(ctx context.Context, t *chromedp.Target) error {
		width, err := chromedp.Evaluate[float64](`document.documentElement.scrollWidth`)(ctx, t)
		if err == nil && int64(width) > s.width {
			err = fmt.Errorf("the page is %g wide, the display %d", width, s.width)
		}
		return err
	})
}

// until waits until a section's text holds what is wanted.
func until(id, want string) step { return untilText(id, want, 15*time.Second) }

// untilText waits for so long; an id with ":hidden" is waited for to be hidden.
func untilText(id, want string, within time.Duration) step {
	return chromedp.Func(func(ctx context.Context, t *chromedp.Target) error {
		ask := `document.getElementById("` + id + `")?.textContent ?? ""`
		if name, hidden := strings.CutSuffix(id, ":hidden"); hidden {
			ask, want = `document.getElementById("`+name+`").hidden ? "hidden" : "shown"`, "hidden"
		}
		text := ""
		for began := time.Now(); time.Since(began) < within; time.Sleep(100 * time.Millisecond) {
			var err error
			if text, err = chromedp.Evaluate[string](ask)(ctx, t); err != nil {
				return err
			}
			if strings.Contains(text, want) {
				return nil
			}
		}
		return fmt.Errorf("section %s never said %q; it says: %s", id, want, text)
	})
}

// script runs a script that gives nothing.
func script(text string) step {
	return chromedp.Func(func(ctx context.Context, t *chromedp.Target) error {
		_, err := chromedp.Evaluate[bool](text+"; true")(ctx, t)
		return err
	})
}

// press clicks a button as a finger would.
func press(selector string) step {
	return chromedp.Steps(chromedp.ScrollIntoView(selector), chromedp.Click(selector, chromedp.NodeVisible))
}

// A person opens the page on a phone and on a laptop: values move, a mark is
// entered and withdrawn, an alarm comes and is seen.
func TestInABrowser(t *testing.T) {
	for _, s := range []screen{phone, laptop} {
		t.Run(s.name, func(t *testing.T) {
			ctx := browser(t)
			w := serve(t, desktest.New(t, desktest.Options{Past: 12 * 24 * time.Hour, Every: 2 * time.Minute, Outlook: outlookOf}), false)
			run := func(steps ...step) {
				t.Helper()
				within, stop := context.WithTimeout(ctx, 60*time.Second)
				defer stop()
				for i, s := range steps {
					if err := chromedp.Do(within, s); err != nil {
						t.Fatalf("step %d: %v", i+1, err)
					}
				}
			}
			if err := chromedp.Do(ctx, s.set()); err != nil {
				t.Fatal(err)
			}
			run(s.set(), shade(false), chromedp.Navigate(w.URL()),
				until("alive", "Yes: 4 of 4"), until("knocked", "the bench was knocked"), until("yesterday", "in 24 h"), until("speed", "No: "),
				until("outlook", "5.012"), until("plots", "Sag against log time"), until("plots", "4 d"), wide(s), shoot(s.name+"-light"), shootTop(s.name+"-top"),
				shade(true), shoot(s.name+"-dark"), shade(false))

			before, err := chromedp.Run(ctx, chromedp.Evaluate[string](`document.querySelector('[data-gauge="mid"]').textContent`))
			if err != nil {
				t.Fatal(err)
			}
			w.Move("mid", 0.25)
			shown, err := strconv.ParseFloat(before, 64)
			if err != nil {
				t.Fatal(err)
			}
			run(until("gauges", strconv.FormatFloat(shown+0.25, 'f', 3, 64)[:4]))

			run(chromedp.SetValue(`#token input[name=token]`, testToken), press(`#token button`), chromedp.WaitVisible(`#enter`),
				wide(s), shoot(s.name+"-token"),
				press(`#steps form:nth-of-type(3) button`), chromedp.WaitVisible(`.sure button`), shoot(s.name+"-confirm"), wide(s),
				press(`.sure button`), chromedp.WaitVisible(`.done`), until("load", "Step bare"), until("marks", "m2"))
			marks, err := ingest.ListMarks(w.Dir.FS())
			if err != nil || len(marks) != 2 || marks[1].Step != "bare" || len(marks[1].Loads) != 1 || marks[1].Loads[0].Newton != 0 {
				t.Fatalf("on disk stand %+v, %v", marks, err)
			}
			run(press(`#marks li:first-child summary`), chromedp.SetValue(`#marks li:first-child input[name=why]`, "pressed by mistake"), shoot(s.name+"-withdraw"),
				press(`#marks li:first-child button`), chromedp.WaitVisible(`.sure button`), press(`.sure button`), until("marks", "pressed by mistake"), until("load", "Step l1"))
			marks, err = ingest.ListMarks(w.Dir.FS())
			if gone := ingest.Withdrawn(marks); err != nil || gone["m2"] != "pressed by mistake" {
				t.Fatalf("withdrawn are %v, %v", gone, err)
			}

			w.Hush("quarter", true)
			run(until("banner", "quarter: nothing has come"), until("alarms", "Not seen yet"), shoot(s.name+"-alarm"))
			run(script(`for (const c of document.querySelectorAll('#alarms .card')) if (c.textContent.includes('silent')) { c.querySelector('input[name=by]').value = 'mo'; c.querySelector('button').click() }`),
				chromedp.WaitVisible(`.done`), until("alarms", "by mo"), wide(s))

			if s.mobile { // once is enough
				address := strings.TrimSuffix(strings.TrimPrefix(w.URL(), "http://"), "/")
				w.leave()
				run(untilText("link", "No connection to the recorder", 40*time.Second), shoot(s.name+"-lost"))
				w = serveAt(t, w.World, address, false)
				run(untilText("link:hidden", "", 40*time.Second))
				w.Move("mid", 0.5)
				run(until("gauges", strconv.FormatFloat(shown+0.75, 'f', 3, 64)[:4]))
			}

			w.World.Stop()
			run(until("alive", "the recording has ended"), shoot(s.name+"-ended"))
		})
	}
}

// A test that has just begun, with a gauge that never spoke: nothing is made up,
// and nothing sticks out.
func TestFreshInABrowser(t *testing.T) {
	ctx := browser(t)
	world := desktest.New(t, desktest.Options{Title: "Fresh test, ten readings"})
	world.Hush("quarter", true)
	w := serve(t, world, false)
	if err := chromedp.Do(ctx, phone.set()); err != nil {
		t.Fatal(err)
	}
	within, stop := context.WithTimeout(ctx, 90*time.Second)
	defer stop()
	for i, s := range []step{phone.set(), chromedp.Navigate(w.URL()), until("alive", "3 of 4 instruments"), until("alive", "quarter"),
		until("yesterday", "No load is entered yet"), until("speed", "Too early to say"), wide(phone), shoot("fresh-phone"),
		laptop.set(), wide(laptop), shade(true), shoot("fresh-laptop-dark")} {
		if err := chromedp.Do(within, s); err != nil {
			t.Fatalf("step %d: %v", i+1, err)
		}
	}
}
