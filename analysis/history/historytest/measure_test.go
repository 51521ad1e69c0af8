//go:build campaign && linux

package historytest

import (
	"flag"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/influxdata/line-protocol/v2/lineprotocol"

	"gaugelog/analysis"
	"gaugelog/analysis/history"
	"gaugelog/ingest/segment"
)

var (
	small   = flag.Int("small", 5_000_000, "readings of the run that is timed")
	large   = flag.Int("large", 0, "readings of a run of the same steps and duration for the comparison of memory; 0: none")
	repeat  = flag.Int("repeat", 5, "how often each is timed")
	memory  = flag.String("memory", "96MiB", "GOMEMLIMIT of what is measured")
	collect = flag.String("collect", "off", "GOGC of what is measured; `analyse` sets both itself")
	measure = os.Getenv("HISTORYTEST_MEASURE") // what a child process is to do
)

// kinds are what is timed, the first being what the others are compared with.
var kinds = []struct {
	name, folder, does string
	cores              int
}{
	{"library", "plain", "line-protocol/v2's decoder", 1},
	{"decode", "plain", "segment reader", 1},
	{"decode", "plain", "segment reader", 2},
	{"decode", "zst", "segment reader", 2},
	{"history", "plain", "history.Load", 2},
	{"history", "zst", "history.Load", 2},
	{"analyse", "plain", "analysis.Analyse", 2},
	{"analyse", "zst", "analysis.Analyse", 2},
}

func TestMain(m *testing.M) {
	flag.Parse()
	if measure != "" {
		kind, dir, _ := strings.Cut(measure, ":")
		begun := time.Now()
		n, err := do(kind, dir)
		if err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		fmt.Println(n, time.Since(begun).Seconds())
		os.Exit(0)
	}
	os.Exit(m.Run())
}

// do does one of the kinds once and returns how many readings it took.
func do(kind, dir string) (int64, error) {
	switch kind {
	case "library":
		return library(dir)
	case "decode":
		return decode(dir)
	case "history":
		h, err := history.Load(dir)
		if err != nil {
			return 0, err
		}
		return h.Readings, h.Close()
	case "analyse":
		r, err := analysis.Analyse(dir, analysis.Options{})
		if err != nil {
			return 0, err
		}
		return int64(r.Run.Readings), nil
	}
	return 0, fmt.Errorf("unknown kind %q", kind)
}

func library(dir string) (n int64, err error) {
	names, err := filepath.Glob(filepath.Join(dir, segment.ReadingsDir, "*.lp"))
	if err != nil {
		return 0, err
	}
	slices.Sort(names)
	sum := 0.0
	for _, name := range names {
		text, err := os.ReadFile(name)
		if err != nil {
			return 0, err
		}
		d := lineprotocol.NewDecoderWithBytes(text)
		for d.Next() {
			if _, err := d.Measurement(); err != nil {
				return 0, err
			}
			for {
				key, _, err := d.NextTag()
				if err != nil {
					return 0, err
				}
				if key == nil {
					break
				}
			}
			for {
				key, v, err := d.NextField()
				if err != nil {
					return 0, err
				}
				if key == nil {
					break
				}
				sum += v.FloatV()
			}
			if _, err := d.Time(lineprotocol.Nanosecond, time.Time{}); err != nil {
				return 0, err
			}
			n++
		}
	}
	if sum == 0 {
		return 0, fmt.Errorf("no values in %s", dir)
	}
	return n, nil
}

func decode(dir string) (n int64, err error) {
	root, err := os.OpenRoot(dir)
	if err != nil {
		return 0, err
	}
	defer root.Close()
	folder, err := segment.OpenFolder(segment.OSFS(root, segment.OSOptions{}))
	if err != nil {
		return 0, err
	}
	r := folder.Read(segment.ReadOptions{})
	defer r.Close()
	for {
		b, err := r.Next()
		if err == io.EOF {
			return n, nil
		}
		if err != nil {
			return 0, err
		}
		n += int64(b.Len())
	}
}

// figures are of one kind.
type figures struct {
	rate []float64 // readings a second
	busy []float64 // readings a second of processor time, which other work disturbs less
	peak int64     // bytes resident at most
}

func (f *figures) run(t *testing.T, kind, dir string, cores int, readings int64) {
	t.Helper()
	c := exec.Command(os.Args[0])
	c.Env = append(os.Environ(), "HISTORYTEST_MEASURE="+kind+":"+dir, "GOMEMLIMIT="+*memory, "GOGC="+*collect, "GOMAXPROCS="+strconv.Itoa(cores))
	c.Stderr = os.Stderr
	out, err := c.Output()
	if err != nil {
		t.Fatalf("%s: %v", kind, err)
	}
	var n int64
	var s float64
	if _, err := fmt.Sscan(string(out), &n, &s); err != nil || n != readings {
		t.Fatalf("%s: %d readings, want %d: %v", kind, n, readings, err)
	}
	f.rate = append(f.rate, float64(n)/s)
	f.busy = append(f.busy, float64(n)/(c.ProcessState.UserTime()+c.ProcessState.SystemTime()).Seconds())
	f.peak = max(f.peak, c.ProcessState.SysUsage().(*syscall.Rusage).Maxrss*1024)
}

func median(x []float64) float64 { return slices.Sorted(slices.Values(x))[len(x)/2] }

func last(x []float64) float64 { return x[len(x)-1] }

func lay(t *testing.T, readings int, packed bool) string {
	t.Helper()
	dir := t.TempDir()
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	r := Run{Gauges: 8, Readings: readings, Duration: 30 * 24 * time.Hour, Steps: 12, Compress: packed}
	if err := r.Write(segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})); err != nil {
		t.Fatal(err)
	}
	return dir
}

// TestMeasure prints how fast a run is read back, and in how much memory. Each
// round times every kind once (the whole analysis in the first only), so that
// ratios are of the same minutes. See
// bench.sh beside the package above.
func TestMeasure(t *testing.T) {
	rows := int64((*small + 7) / 8 * 8)
	dirs := map[string]string{"plain": lay(t, *small, false), "zst": lay(t, *small, true)}
	got := make([]figures, len(kinds))
	ratios, busy := make([][]float64, len(kinds)), make([][]float64, len(kinds))
	for round := range *repeat {
		for i, k := range kinds {
			if k.name == "analyse" && round > 0 {
				continue // most of it is not reading
			}
			got[i].run(t, k.name, dirs[k.folder], k.cores, rows)
			ratios[i] = append(ratios[i], last(got[i].rate)/last(got[0].rate))
			busy[i] = append(busy[i], last(got[i].busy)/last(got[0].busy))
		}
	}
	fmt.Printf("%d readings of 8 gauges in 30 days, 12 load changes, from the page cache; median of %d; load of the machine %s\n", rows, *repeat, load())
	fmt.Printf("%-26s %-5s %5s | %12s %6s %14s | %12s %6s %14s | %13s | %8s\n", "", "files", "cores", "M readings/s", "ratio", "(least, most)",
		"per CPU s", "ratio", "(least, most)", "best CPU s/M", "peak MiB")
	for i, k := range kinds {
		fmt.Printf("%-26s %-5s %5d | %12.2f %s | %12.2f %s | %13.4f | %8.1f\n", k.does, k.folder, k.cores,
			median(got[i].rate)/1e6, ratioText(ratios[i]), median(got[i].busy)/1e6, ratioText(busy[i]), 1e6/slices.Max(got[i].busy), float64(got[i].peak)/(1<<20))
	}
	if *large > 0 {
		compareMemory(t, got)
	}
}

// load is the machine's load average over the last minute.
func load() string {
	text, err := os.ReadFile("/proc/loadavg")
	if err != nil {
		return "unknown"
	}
	first, _, _ := strings.Cut(string(text), " ")
	return first
}

func ratioText(x []float64) string {
	return fmt.Sprintf("%6.2f %14s", median(x), fmt.Sprintf("(%.2f, %.2f)", slices.Min(x), slices.Max(x)))
}

// compareMemory measures a larger run of the same steps and duration.
func compareMemory(t *testing.T, less []figures) {
	rows := int64((*large + 7) / 8 * 8)
	fmt.Printf("%d readings of the same; peak against that of the smaller run\n", rows)
	for _, folder := range []string{"plain", "zst"} {
		dir := lay(t, *large, folder == "zst")
		for i, k := range kinds {
			if k.folder != folder || k.name != "history" && k.name != "analyse" {
				continue
			}
			var f figures
			f.run(t, k.name, dir, k.cores, rows)
			fmt.Printf("%-26s %-5s %5d | %12.2f | per CPU s %.2f | %8.1f %+.0f %%\n", k.does, k.folder, k.cores, median(f.rate)/1e6,
				median(f.busy)/1e6, float64(f.peak)/(1<<20), 100*(float64(f.peak)/float64(less[i].peak)-1))
		}
		if err := os.RemoveAll(dir); err != nil {
			t.Fatal(err)
		}
	}
}
