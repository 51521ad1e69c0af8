//go:build campaign && linux

package main

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"syscall"
	"testing"
	"time"

	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

var surviveEach = flag.Int("survive.each", 3, "meet only each n-th call in the fault injection on the built program (1: all)")

// traced is a recorder under strace, which makes calls fail, wait or kill.
type traced struct {
	t        *testing.T
	feeder   *feeder
	program  string
	rig, run string
	ports    string
	log      string
	process  *process
}

// trace starts a recorder whose calls on the run's files meet the fault, an
// expression of strace's -e inject. The recorder's writer is a thread of its
// own, and strace counts calls by thread.
func trace(t *testing.T, program, record, fault string) *traced {
	t.Helper()
	dir := t.TempDir()
	s := &traced{t: t, program: program, feeder: newFeeder(t, 2, 100), run: filepath.Join(dir, "run"), log: filepath.Join(dir, "strace.log")}
	s.rig, s.ports = s.feeder.write(t, dir, record)
	line := []string{"strace", "-D", "-f", "-y", "-qq", "-o", s.log, "-e", "inject=" + fault}
	for _, name := range s.files() {
		line = append(line, "-P", name)
	}
	// With -D the process started is the recorder itself, and strace its grandchild.
	s.process = start(t, append(line, s.command()...)...)
	return s
}

func (s *traced) command() []string {
	return []string{s.program, "record", s.rig, "--into", s.run, "--ports", s.ports, "--quiet"}
}

// files are the paths that faults meet: strace wants each by name.
func (s *traced) files() []string {
	names := []string{s.run, filepath.Join(s.run, segment.ReadingsDir)}
	for _, name := range []string{"rig.yaml", "rig.yaml.partial", "events.lp", "SHA256SUMS", "SHA256SUMS.partial", ".room"} {
		names = append(names, filepath.Join(s.run, name))
	}
	for n := 1; n <= 60; n++ {
		plain := filepath.Join(s.run, filepath.FromSlash(segment.SegmentName(segment.ReadingsDir, n)))
		names = append(names, plain, plain+".zst", filepath.Join(s.run, filepath.Base(plain)+".zst.partial"))
	}
	return names
}

// goesOn records once more on the same folder, without faults, and ends cleanly.
func (s *traced) goesOn(d time.Duration) {
	s.t.Helper()
	s.feeder.ready(s.t)
	p := start(s.t, s.command()...)
	p.says(s.t, "recording", 30*time.Second)
	time.Sleep(d)
	if err := p.end(s.t, syscall.SIGTERM); err != nil {
		s.t.Fatalf("going on without faults: %v\n%s", err, p.err.String())
	}
}

// begins waits until the recorder records. It says false where the fault met it
// while it laid out the run: then it must have ended and said what was wrong.
func (s *traced) begins() bool {
	s.t.Helper()
	for began := time.Now(); time.Since(began) < 30*time.Second; time.Sleep(5 * time.Millisecond) {
		if strings.Contains(s.process.out.String(), "recording") {
			return true
		}
		select {
		case <-s.process.ended:
			if text := s.process.err.String(); !strings.Contains(text, "gaugelog: ") || s.process.result == nil {
				s.t.Fatalf("it ended with %v before it recorded:\n%s", s.process.result, text)
			}
			s.goesOn(300 * time.Millisecond)
			s.t.Logf("a recording does not begin on a disk that fails; %d readings on the next try", s.onceEach(0, 20))
			return false
		default:
		}
	}
	s.t.Fatalf("it neither records nor ends:\n%s", s.process.err.String())
	return false
}

// meets waits until a call met the fault, which on a busy machine may be late,
// and lets the recorder go on for two seconds.
func (s *traced) meets() {
	for began := time.Now(); s.injected() == 0 && time.Since(began) < 15*time.Second; {
		time.Sleep(20 * time.Millisecond)
	}
	time.Sleep(2 * time.Second)
}

// injected counts the calls that met the fault.
func (s *traced) injected() int {
	text, err := os.ReadFile(s.log)
	if err != nil {
		s.t.Fatal(err)
	}
	return strings.Count(string(text), "(INJECTED)") + strings.Count(string(text), "(DELAYED)") + strings.Count(string(text), "killed by SIGKILL")
}

var (
	tracedCall    = regexp.MustCompile(`(write|fdatasync|fsync)\(\d+<([^>]+)>.*`)
	tracedRemoval = regexp.MustCompile(`unlinkat\(.*"(\d+\.lp)"`)
)

// leavesFailedAlone fails the test where the program wrote to a segment, or
// synced it, after a call on it had failed.
func (s *traced) leavesFailedAlone() {
	s.t.Helper()
	text, err := os.ReadFile(s.log)
	if err != nil {
		s.t.Fatal(err)
	}
	failed := map[string]string{}
	for line := range strings.Lines(string(text)) {
		if m := tracedRemoval.FindStringSubmatch(line); m != nil {
			// A segment that failed with nothing in it is removed, and its
			// name is free for another file.
			delete(failed, filepath.Join(s.run, segment.ReadingsDir, m[1]))
		}
		m := tracedCall.FindStringSubmatch(line)
		if m == nil || !strings.HasSuffix(m[2], ".lp") || strings.HasSuffix(m[2], segment.EventsFile) {
			continue
		}
		if earlier, bad := failed[m[2]]; bad {
			s.t.Errorf("%s was used again after it failed:\n%s%s", m[2], earlier, line)
		}
		if strings.Contains(line, "= -1 ") {
			failed[m[2]] = line
		}
	}
}

// stored reads the run back by the product's reader, which knows of segments
// that were written again, and gives the numbers of each gauge.
func stored(t *testing.T, run string) map[string][]int {
	t.Helper()
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		t.Fatal(err)
	}
	defer dir.Close()
	folder, err := segment.OpenFolder(dir.FS())
	if err != nil {
		t.Fatal(err)
	}
	r := folder.Read(segment.ReadOptions{})
	defer r.Close()
	out := map[string][]int{}
	for rec, err := range r.Records() {
		if err != nil {
			t.Fatal(err)
		}
		if rec.Kind == segment.Indication {
			out[rec.Name] = append(out[rec.Name], int(rec.MM*1000+0.5))
		}
	}
	return out
}

// onceEach wants every gauge's numbers without a gap or a repeat, but for as
// many gaps as there were restarts, and at least so many of them. It gives how
// many readings there are.
func (s *traced) onceEach(restarts, least int) (total int) {
	s.t.Helper()
	for g, numbers := range stored(s.t, s.run) {
		gaps := 0
		for i := 1; i < len(numbers); i++ {
			switch step := numbers[i] - numbers[i-1]; {
			case step < 1:
				s.t.Errorf("gauge %s: reading %d stands behind %d", g, numbers[i], numbers[i-1])
			case step > 1:
				gaps++
			}
		}
		if gaps > restarts {
			s.t.Errorf("gauge %s: %d gaps at %d restarts", g, gaps, restarts)
		}
		total += len(numbers)
	}
	if total < least {
		s.t.Errorf("%d readings stored, expected %d at least", total, least)
	}
	verified(s.t, s.run)
	decodeReadings(s.t, s.run, 1)
	allDecode(s.t, s.run)
	return total
}

// upTo wants the readings up to those that were sent when the recorder was told
// to end, but for half a second that may have been on its way.
func (s *traced) upTo(sent map[string]int) {
	s.t.Helper()
	for g, numbers := range stored(s.t, s.run) {
		if last := numbers[len(numbers)-1]; last < sent[g]-50 {
			s.t.Errorf("gauge %s: reading %d is the last stored, %d were sent\n%s\n%s", g, last, sent[g], s.process.err.String(), eventsText(s.t, s.run))
		}
	}
}

const quick = "{sampling: all, sync: 100 ms, roll: {size: 3 kB}}"

// TestSurviveFailingCalls lets the n-th sync or write of the recorder's writer
// fail, once: nothing is lost, because the lines are still in memory, and the
// file that failed is left alone.
func TestSurviveFailingCalls(t *testing.T) {
	needTool(t, "strace")
	program := buildProgram(t)
	for _, fault := range []string{"fdatasync:error=EIO", "write:error=ENOSPC", "write:error=EROFS"} {
		for n := 1; n <= 16; n += *surviveEach {
			t.Run(fmt.Sprintf("%s at %d", fault, n), func(t *testing.T) {
				t.Parallel()
				s := trace(t, program, quick, fmt.Sprintf("%s:when=%d", fault, n))
				if !s.begins() {
					return
				}
				s.meets()
				sent := s.feeder.sent()
				err := s.process.end(t, syscall.SIGTERM)
				hit := s.injected()
				if hit == 0 {
					t.Fatal("no call met the fault")
				}
				s.leavesFailedAlone()
				total := s.onceEach(0, 0)
				s.upTo(sent)
				// Where the fault meets the very end (the closing mark of the last
				// segment, its compression, the sums) nothing is lost, and the
				// command says which file it could not end.
				text := s.process.err.String()
				if err != nil && !strings.Contains(text, "compress") && !strings.Contains(text, "SHA256SUMS") && !strings.Contains(text, "gaugelog: readings/") {
					t.Errorf("%v\n%s", err, text)
				}
				s.goesOn(300 * time.Millisecond)
				if again := s.onceEach(1, total+10); again <= total {
					t.Errorf("%d readings after going on, %d before", again, total)
				}
				t.Logf("%d calls failed, %d readings, each once", hit, total)
			})
		}
	}
}

// TestSurviveADiskThatStaysBroken lets every sync, or every write, fail from
// the n-th on: the recorder keeps reading and says so, what was synced before
// stays, and a next recorder goes on.
func TestSurviveADiskThatStaysBroken(t *testing.T) {
	needTool(t, "strace")
	program := buildProgram(t)
	for _, fault := range []string{"fdatasync:error=EIO", "write:error=ENOSPC"} {
		for n := 5; n <= 14; n += *surviveEach {
			t.Run(fmt.Sprintf("%s from %d on", fault, n), func(t *testing.T) {
				t.Parallel()
				s := trace(t, program, quick, fmt.Sprintf("%s:when=%d+", fault, n))
				if !s.begins() {
					return
				}
				s.meets()
				sent := s.feeder.sent()
				err := s.process.end(t, syscall.SIGTERM)
				if s.injected() == 0 {
					t.Fatal("no call met the fault")
				}
				s.leavesFailedAlone()
				total := s.onceEach(0, 0)
				// strace counts by thread, so the last sync, made by another one,
				// may succeed: then everything must be there, and be told.
				if text := s.process.err.String(); !strings.Contains(text, "could not be saved") {
					s.upTo(sent)
				}
				s.goesOn(300 * time.Millisecond)
				s.onceEach(1, total+10)
				if !strings.Contains(eventsText(t, s.run), "kind=gap") {
					t.Error("the gap stands in no event")
				}
				t.Logf("%d calls failed; ending says %v; %d readings before going on", s.injected(), err, total)
			})
		}
	}
}

// TestSurviveASlowDisk lets syncs take seconds: reading goes on meanwhile.
func TestSurviveASlowDisk(t *testing.T) {
	needTool(t, "strace")
	s := trace(t, buildProgram(t), quick, "fdatasync:delay_enter=3000000:when=6")
	s.process.says(t, "recording", 30*time.Second)
	time.Sleep(6 * time.Second)
	if err := s.process.end(t, syscall.SIGTERM); err != nil {
		t.Errorf("%v\n%s", err, s.process.err.String())
	}
	total := s.onceEach(0, 900)
	events := eventsText(t, s.run)
	for _, want := range []string{"kind=disk-slow", "kind=disk-back"} {
		if !strings.Contains(events, want) {
			t.Errorf("no event %s:\n%s", want, events)
		}
	}
	t.Logf("%d readings through a sync of 3 s, each once", total)
}

// TestSurviveKillAtEachCall kills the recorder at its n-th write, sync, rename
// or removal: every file is whole to its last checkpoint, a next recorder goes
// on and seals what was left.
func TestSurviveKillAtEachCall(t *testing.T) {
	needTool(t, "strace")
	program := buildProgram(t)
	most := map[string]int{"write": 16, "fdatasync": 16, "fsync": 12, "renameat": 5, "unlinkat": 5}
	for call, to := range most {
		for n := 1; n <= to; n += *surviveEach {
			t.Run(fmt.Sprintf("%s %d", call, n), func(t *testing.T) {
				t.Parallel()
				s := trace(t, program, quick, fmt.Sprintf("/%s2?$:signal=SIGKILL:when=%d", call, n))
				select {
				case <-s.process.ended:
				case <-time.After(5 * time.Second):
					t.Logf("the recorder made no %d. %s in one thread within 5 s", n, call)
					s.process.end(t, syscall.SIGTERM)
				}
				killed := s.injected() > 0
				before := 0
				if _, err := os.Stat(filepath.Join(s.run, "events.lp")); err == nil {
					before = s.onceEach(0, 0)
				}
				s.goesOn(400 * time.Millisecond)
				total := s.onceEach(1, before+20)
				t.Logf("killed %v; %d readings before, %d after going on", killed, before, total)
			})
		}
	}
}
