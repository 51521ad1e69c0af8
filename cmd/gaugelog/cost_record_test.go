//go:build campaign && linux

package main

import (
	"bufio"
	"flag"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"go.bug.st/serial"
)

// What recording costs, with real pseudo-terminals. The gauges speak in
// processes of their own, so that theirs is not counted; beside the program a
// bare loop of the serial library's reads takes the same bytes in the same run:
//
//	go test -tags campaign -run CostOfRecording -v -timeout 20m ./cmd/gaugelog -cost.for 60s
var costFor = flag.Duration("cost.for", 20*time.Second, "how long the cost of recording is measured, at each rate")

// costRole makes a helper process of this test binary.
const costRole = "GAUGELOG_COST_ROLE"

func init() {
	role := strings.Fields(os.Getenv(costRole))
	if len(role) == 0 {
		return
	}
	var err error
	switch role[0] {
	case "feed":
		err = costFeed(role[1], role[2])
	case "bare":
		err = costBare(role[1])
	default:
		err = fmt.Errorf("unknown role %q", role)
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	os.Exit(0)
}

// costRecord has every reading stored and segments closed and compressed about
// every 13 s at the high rate.
const costRecord = "{sampling: all, sync: 10 s, roll: {size: 1 MB}}"

const costGauges = 16

// costFeed plays the gauges and answers each line it gets with the number of
// frames sent by all of them; behind "stop" it sends none.
func costFeed(dir, rate string) error {
	n, err := strconv.Atoi(rate)
	if err != nil {
		return err
	}
	f, err := openFeeder(costGauges, n, 0)
	if err != nil {
		return err
	}
	if _, _, err := f.lay(dir, costRecord); err != nil {
		return err
	}
	fmt.Println("ready")
	stopped := false
	for in := bufio.NewScanner(os.Stdin); in.Scan(); {
		if in.Text() == "stop" && !stopped {
			close(f.stop)
			f.done.Wait()
			stopped = true
		}
		sum := 0
		for _, s := range f.sent() {
			sum += s
		}
		fmt.Println(sum)
	}
	return nil
}

// costBare reads the ports of a list with the serial library and does nothing
// with what it reads but count it; it answers each line it gets with the bytes.
func costBare(list string) error {
	text, err := os.ReadFile(list)
	if err != nil {
		return err
	}
	var n atomic.Int64
	for line := range strings.Lines(string(text)) {
		port, err := serial.Open(strings.Fields(line)[1], &serial.Mode{BaudRate: 115200, DataBits: 8})
		if err != nil {
			return err
		}
		if err := port.SetReadTimeout(200 * time.Millisecond); err != nil {
			return err
		}
		go func() {
			buf := make([]byte, 4096)
			for {
				k, err := port.Read(buf)
				if err != nil {
					return
				}
				n.Add(int64(k))
			}
		}()
	}
	fmt.Println("ready")
	for in := bufio.NewScanner(os.Stdin); in.Scan(); {
		fmt.Println(n.Load())
	}
	return nil
}

// costHelper is a helper process that answers lines.
type costHelper struct {
	cmd *exec.Cmd
	in  io.WriteCloser
	out *bufio.Scanner
	mu  sync.Mutex
}

func startHelper(t *testing.T, role string) *costHelper {
	t.Helper()
	h := &costHelper{cmd: exec.Command(os.Args[0])}
	h.cmd.Env = append(os.Environ(), costRole+"="+role)
	h.cmd.Stderr = os.Stderr
	var err error
	if h.in, err = h.cmd.StdinPipe(); err != nil {
		t.Fatal(err)
	}
	out, err := h.cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	h.out = bufio.NewScanner(out)
	if err := h.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		h.in.Close()
		h.cmd.Wait()
	})
	if !h.out.Scan() || h.out.Text() != "ready" {
		t.Fatalf("%s: %q", role, h.out.Text())
	}
	return h
}

// count asks for the helper's number.
func (h *costHelper) count(t *testing.T, line string) int {
	t.Helper()
	h.mu.Lock()
	defer h.mu.Unlock()
	fmt.Fprintln(h.in, line)
	if !h.out.Scan() {
		t.Fatal("a helper has ended")
	}
	n, err := strconv.Atoi(h.out.Text())
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// cpuOf is the processor time that the threads of a process have used.
func cpuOf(t *testing.T, pid int) time.Duration {
	t.Helper()
	names, err := filepath.Glob(fmt.Sprintf("/proc/%d/task/*/schedstat", pid))
	if err != nil || len(names) == 0 {
		t.Fatalf("no threads of process %d: %v", pid, err)
	}
	sum := int64(0)
	for _, name := range names {
		text, err := os.ReadFile(name)
		if err != nil {
			continue // a thread that has just ended
		}
		ns, err := strconv.ParseInt(strings.Fields(string(text))[0], 10, 64)
		if err != nil {
			t.Fatal(err)
		}
		sum += ns
	}
	return time.Duration(sum)
}

// costs is what one rate cost.
type costs struct {
	rate           int
	bare, recorder time.Duration // processor time of each in the time measured
	each           time.Duration // recorder's, a reading
	ratio          float64       // recorder's over the bare loop's, a byte
	share          float64       // recorder's, of one core
	sent, stored   int
	packed         int
	peak           int64 // bytes resident at most, segments closed meanwhile
}

// TestCostOfRecording measures 16 gauges of 100 readings a second and of 10.
func TestCostOfRecording(t *testing.T) {
	bin := buildProgram(t)
	fast, slow := costAt(t, bin, 100), costAt(t, bin, 10)
	fmt.Printf("%d gauges for %v each; load of the machine %.1f\n", costGauges, *costFor, loadOf(t))
	fmt.Printf("%12s %10s %14s %14s %8s %12s %12s %10s %8s\n", "readings/s", "sent", "stored", "bare, CPU s", "record", "times", "us/reading", "% of core", "peak MiB")
	for _, c := range []costs{fast, slow} {
		fmt.Printf("%12d %10d %14d %14.2f %8.2f %12.2f %12.1f %10.2f %8.1f\n", c.rate*costGauges, c.sent, c.stored,
			c.bare.Seconds(), c.recorder.Seconds(), c.ratio, float64(c.each.Nanoseconds())/1e3, 100*c.share, float64(c.peak)/(1<<20))
	}
	if fast.ratio > 2 {
		t.Errorf("recording takes %.2f times the processor time of bare reads", fast.ratio)
	}
	// Where others keep the processors busy a reading costs several times as much;
	// the bare loop beside it, which is judged above, says how many.
	if busy := loadOf(t); slow.share > 0.03 && busy < float64(runtime.NumCPU()) {
		t.Errorf("%.1f %% of a core for %d readings a second", 100*slow.share, costGauges*10)
	}
	if fast.packed == 0 && *costFor >= 20*time.Second {
		t.Error("no segment was closed meanwhile")
	}
	if fast.peak > 64<<20 || slow.peak > 48<<20 {
		t.Errorf("%d and %d bytes resident", fast.peak, slow.peak)
	}
}

// costAt records gauges of so many readings a second each, beside bare reads.
func costAt(t *testing.T, bin string, rate int) costs {
	dirs := []string{t.TempDir(), t.TempDir()}
	feeds := make([]*costHelper, 2)
	for i, dir := range dirs {
		feeds[i] = startHelper(t, fmt.Sprint("feed ", dir, " ", rate))
	}
	run := filepath.Join(dirs[0], "run")
	record := start(t, bin, "record", filepath.Join(dirs[0], "rig.yaml"), "--ports", filepath.Join(dirs[0], "ports.txt"), "--into", run)
	bare := startHelper(t, "bare "+filepath.Join(dirs[1], "ports.txt"))
	record.says(t, "recording", time.Minute)
	time.Sleep(3 * time.Second) // of greater cost than the steady state

	c := costs{rate: rate}
	frames, bytes := feeds[0].count(t, "sent"), bare.count(t, "read")
	usedR, usedB := cpuOf(t, record.Process.Pid), cpuOf(t, bare.cmd.Process.Pid)
	began := time.Now()
	time.Sleep(*costFor)
	c.recorder, c.bare = cpuOf(t, record.Process.Pid)-usedR, cpuOf(t, bare.cmd.Process.Pid)-usedB
	took := time.Since(began)
	frames, bytes = feeds[0].count(t, "sent")-frames, bare.count(t, "read")-bytes
	c.each = c.recorder / time.Duration(max(frames, 1))
	c.ratio = float64(c.recorder) / float64(frames*feederFrame) / (float64(c.bare) / float64(bytes))
	c.share = c.recorder.Seconds() / took.Seconds()

	feeds[0].count(t, "stop")
	time.Sleep(time.Second)
	c.sent = feeds[0].count(t, "sent")
	if err := record.end(t, syscall.SIGTERM); err != nil {
		t.Fatalf("%v\n%s", err, record.err.String())
	}
	c.peak = record.ProcessState.SysUsage().(*syscall.Rusage).Maxrss * 1024
	f := decodeReadings(t, run, 1)
	c.packed = f.packed
	for gauge, numbers := range f.numbers {
		c.stored += len(numbers)
		if err := consecutive(numbers); err != nil {
			t.Errorf("%s: %v", gauge, err)
		}
		if missing := c.sent/costGauges - numbers[len(numbers)-1]; missing > 1 || missing < -1 {
			t.Errorf("%s: the last %d readings are missing", gauge, missing)
		}
	}
	if len(f.numbers) != costGauges {
		t.Errorf("%d gauges stored", len(f.numbers))
	}
	return c
}

// feederFrame is the length of a frame of the feeder, in bytes.
const feederFrame = len("+0000.000\r\n")

func loadOf(t *testing.T) float64 {
	t.Helper()
	text, err := os.ReadFile("/proc/loadavg")
	if err != nil {
		t.Fatal(err)
	}
	load, err := strconv.ParseFloat(strings.Fields(string(text))[0], 64)
	if err != nil {
		t.Fatal(err)
	}
	return load
}
