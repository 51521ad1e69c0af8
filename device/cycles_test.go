//go:build unix

package device_test

import (
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"syscall"
	"testing"
	"testing/synctest"
	"time"

	"go.uber.org/goleak"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/devicetest"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// Row 23: ten thousand losses and returns leave no goroutine behind, and each
// is told once.
func TestTenThousandReplugs(t *testing.T) {
	times := 10_000
	if testing.Short() {
		times = 300
	}
	synctest.Test(t, func(t *testing.T) {
		var o devicetest.Opener
		var l log
		w := o.Plug("p0")
		b := start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Stamper: bubble{}, Sink: &l})
		synctest.Wait()
		before := runtime.NumGoroutine()
		for range times {
			w.Send([]byte("+001.000\r\n"))
			synctest.Wait()
			o.Unplug("p0")
			synctest.Wait()
			w = o.Plug("p0")
			time.Sleep(15 * time.Second)
		}
		w.Send([]byte("+001.000\r\n"))
		synctest.Wait()
		if after := runtime.NumGoroutine(); after > before {
			t.Errorf("%d goroutines before, %d after", before, after)
		}
		if lost, back, n := len(l.of(device.PortLost)), len(l.of(device.PortBack)), len(l.of(device.Indication)); lost != times || back != times || n != times+1 {
			t.Errorf("%d lost, %d back, %d readings", lost, back, n)
		}
		if n := b.Stats()[0].Reconnects; n != int64(times) {
			t.Errorf("%d reconnects", n)
		}
	})
}

// Reading and handing over a frame allocates nothing, from the port to the sink.
func TestPumpAllocatesNothing(t *testing.T) {
	var o devicetest.Opener
	var sink count
	w := o.Plug("p0")
	b := start(t, device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Sink: &sink})
	batch := []byte(strings.Repeat("+001.000\r\n", 64))
	sent := int64(0)
	send := func() {
		w.Send(batch)
		sent += int64(len(batch))
		for b.Consumed("p0") < sent {
			runtime.Gosched()
		}
	}
	send()
	// The fake's Read makes a timer for each call; a frame must add nothing.
	if a := testing.AllocsPerRun(100, send) / 64; a > 0.2 {
		t.Errorf("%.2f allocations a frame", a)
	}
	if sink.n != sent/10 {
		t.Errorf("%d readings of %d frames", sink.n, sent/10)
	}
}

// count is a Sink that keeps nothing.
type count struct{ n int64 }

func (c *count) Take(device.Reading) { c.n++ }

// processorTime is what this process has used so far.
func processorTime(t testing.TB) time.Duration {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		t.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

// descriptors counts the open files of this process.
func descriptors(t testing.TB) int {
	entries, err := os.ReadDir("/proc/self/fd")
	if err != nil {
		t.Skip("needs /proc:", err)
	}
	return len(entries)
}

// The same over pseudo-terminals, with descriptors counted: 100 times here,
// ten thousand with -tags campaign.
func TestReplugsOverPTY(t *testing.T) {
	replugs := replugs
	if testing.Short() {
		replugs = 20
	}
	dir := t.TempDir()
	link := filepath.Join(dir, "gauge")
	r := rig(1, signed)
	r.Gauges[0].Port = link
	var l log
	master, path := openPTY(t)
	os.Symlink(path, link)
	b := start(t, device.Options{Rigs: []*config.Rig{r}, Opener: device.SystemOpener{LockDir: dir}, Sink: &l,
		Backoff: device.Backoff{First: time.Millisecond, Longest: 2 * time.Millisecond}})
	before := descriptors(t)
	for i := range replugs {
		master.WriteString("+001.000\r\n")
		wait(t, b, link, int64(i+1)*10)
		os.Remove(link)
		master.Close()
		for b.Stats()[0].Open {
			time.Sleep(100 * time.Microsecond)
		}
		master, path = openPTY(t)
		os.Symlink(path, link)
	}
	master.WriteString("+001.000\r\n")
	wait(t, b, link, int64(replugs+1)*10)
	if after := descriptors(t); after > before+2 {
		t.Errorf("%d descriptors before, %d after %d replugs", before, after, replugs)
	}
	if lost, back := len(l.of(device.PortLost)), len(l.of(device.PortBack)); lost != replugs || back != replugs {
		t.Errorf("%d lost, %d back of %d", lost, back, replugs)
	}
}

// Row 1: while unplugged, eight ports cost under 5 % of a core.
func TestUnpluggedCostsLittle(t *testing.T) {
	if testing.Short() {
		t.Skip("measures the processor, which an emulator or a race detector distorts")
	}
	r := rig(8, signed)
	for i := range r.Gauges {
		r.Gauges[i].Port = filepath.Join(t.TempDir(), "gone")
	}
	start(t, device.Options{Rigs: []*config.Rig{r}, Opener: opener(t), Sink: &log{}})
	began, used := time.Now(), processorTime(t)
	time.Sleep(time.Second)
	share := float64(processorTime(t)-used) / float64(time.Since(began))
	t.Logf("%.2f %% of a core for 8 unplugged ports", 100*share)
	if share > 0.05 {
		t.Errorf("%.1f %% of a core while unplugged", 100*share)
	}
}

// BenchmarkBatch hands over batches of 32 frames on one in-memory port.
func BenchmarkBatch(b *testing.B) {
	var o devicetest.Opener
	var sink count
	w := o.Plug("p0")
	bank, err := device.Open(device.Options{Rigs: []*config.Rig{rig(1, signed)}, Opener: &o, Sink: &sink})
	if err != nil {
		b.Fatal(err)
	}
	ended := make(chan error)
	go func() { ended <- bank.Run(b.Context()) }()
	<-bank.Tried()
	batch := []byte(strings.Repeat("+001.000\r\n", 32))
	sent := int64(0)
	b.ReportAllocs()
	for b.Loop() {
		w.Send(batch)
		sent += int64(len(batch))
		if err := bank.WaitConsumed(b.Context(), "p0", sent); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.N)*32/b.Elapsed().Seconds(), "frames/s")
	bank.Close()
	<-ended
}
