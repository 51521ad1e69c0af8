//go:build campaign && linux

package main

import (
	"bytes"
	"flag"
	"fmt"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"sync"
	"syscall"
	"testing"
	"time"

	"gaugelog/ingest/segment"
)

var (
	surviveKills = flag.Int("survive.kills", 200, "how many recorders are killed by SIGKILL")
	surviveSide  = flag.Int("survive.side", 4, "how many recorders run side by side")
)

// killCount sums up what a campaign met.
type killCount struct {
	mu                               sync.Mutex
	kills, recording, tails, packed  int
	readings, acked, marks, cutMarks int
}

func (c *killCount) add(f func()) {
	c.mu.Lock()
	defer c.mu.Unlock()
	f()
}

// TestSurviveKills kills recorders at random instants of their lives while
// gauges send at full rate and marks are entered from other processes, some of
// which are killed as well. After each: what a checkpoint covered before is
// there, each reading once and none left out between two of one life; marks
// that were acknowledged are there once; every file is line protocol to the
// library's decoder. At the end of each folder a clean recording closes it, and
// everything is counted again.
//
//	go test -tags campaign -run SurviveKills -timeout 20m ./cmd/gaugelog -survive.kills 2000
func TestSurviveKills(t *testing.T) {
	program := buildProgram(t)
	count := &killCount{}
	var side sync.WaitGroup
	for i := range *surviveSide {
		k := &killer{t: t, program: program, count: count, feeder: newFeeder(t, 4, 100),
			rng: rand.New(rand.NewPCG(*surviveSeed, uint64(i)))}
		kills := *surviveKills / *surviveSide
		if i < *surviveKills%*surviveSide {
			kills++
		}
		dir := t.TempDir()
		side.Go(func() { k.campaign(dir, kills) })
	}
	side.Wait()
	if t.Failed() {
		return
	}
	if count.recording == 0 || count.acked == 0 || count.marks == 0 {
		t.Fatalf("the campaign met nothing: %+v", count)
	}
	t.Logf("%d kills, %d of them while readings were being stored; %d readings stored, %d of them covered by a checkpoint before the kill; "+
		"%d marks acknowledged, %d mark commands killed; %d unfinished tails, %d segments compressed",
		count.kills, count.recording, count.readings, count.acked, count.marks, count.cutMarks, count.tails, count.packed)
	t.Logf("no failure in %d kills: with 95 %% confidence a kill loses something synced in less than %.2g of all cases (3/n)", count.kills, 3/float64(count.kills))
}

// killer owns one run folder after the other.
type killer struct {
	t       *testing.T
	program string
	feeder  *feeder
	rng     *rand.Rand
	count   *killCount

	rig, ports, run string
	seen            map[string]int // the last reading of each gauge in earlier lives
	stored          int
	marks           map[string]bool // by text: acknowledged, or possibly entered
	made            int
}

// eachFolder is how many lives a folder sees.
const eachFolder = 25

func (k *killer) campaign(dir string, kills int) {
	k.rig, k.ports = k.feeder.write(k.t, dir, "{sampling: all, sync: 100 ms, roll: {size: 40 kB}}")
	for done := 0; done < kills && !k.t.Failed(); {
		k.run = filepath.Join(dir, fmt.Sprintf("run%d", done))
		k.seen, k.marks, k.stored = map[string]int{}, map[string]bool{}, 0
		for range min(eachFolder, kills-done) {
			k.life()
			done++
		}
		k.closing()
		if err := os.RemoveAll(k.run); err != nil {
			k.t.Error(err)
		}
	}
}

func (k *killer) record(more ...string) *process {
	k.feeder.ready(k.t)
	return start(k.t, append([]string{k.program, "record", k.rig, "--into", k.run, "--ports", k.ports, "--quiet"}, more...)...)
}

// life runs one recorder, kills it, and checks what it left.
func (k *killer) life() {
	first := 1
	if numbers := segmentNumbers(k.t, k.run); len(numbers) > 0 {
		first = numbers[len(numbers)-1] + 1
	}
	p := k.record()
	if k.rng.IntN(4) > 0 {
		k.waitForReadings(p, first)
	}
	deadline := time.Now().Add(time.Duration(k.rng.IntN(500)) * time.Millisecond)
	var marking sync.WaitGroup
	if k.rng.IntN(3) == 0 {
		marking.Go(func() { k.mark() })
	}
	time.Sleep(time.Until(deadline) - 30*time.Millisecond)
	acked := decodeReadings(k.t, k.run, first)
	time.Sleep(time.Until(deadline))
	select {
	case <-p.ended:
		k.t.Errorf("the recorder ended by itself: %v\n%s", p.result, p.err.String())
		return
	default:
	}
	p.end(k.t, syscall.SIGKILL)
	marking.Wait()
	left := decodeReadings(k.t, k.run, first)
	k.check(acked, left)
}

// waitForReadings waits until the first checkpoint of this life covers readings,
// so that most kills meet a recording and only the others its beginning.
func (k *killer) waitForReadings(p *process, first int) {
	name := filepath.Join(k.run, filepath.FromSlash(segment.SegmentName(segment.ReadingsDir, first)))
	for began := time.Now(); time.Since(began) < 20*time.Second; time.Sleep(10 * time.Millisecond) {
		select {
		case <-p.ended:
			return
		default:
		}
		if text, err := os.ReadFile(name); err == nil && bytes.Contains(text, []byte("\nindication,")) {
			return
		}
		if _, err := os.Stat(name + ".zst"); err == nil {
			return
		}
	}
	k.t.Errorf("%s: no reading within 20 s", k.run)
}

// begun says whether there is a run folder yet; a kill may come before that.
func (k *killer) begun() bool {
	_, err := os.Stat(filepath.Join(k.run, segment.RigFile))
	return err == nil
}

// check compares what a life left with what a checkpoint had covered before.
func (k *killer) check(acked, left *found) {
	total, covered := 0, 0
	for _, g := range k.feeder.gauges {
		before, after := acked.numbers[g.name], left.numbers[g.name]
		if err := consecutive(after); err != nil {
			k.t.Errorf("%s, gauge %s: %v", k.run, g.name, err)
		}
		if len(after) < len(before) || len(before) > 0 && after[0] != before[0] {
			k.t.Errorf("%s, gauge %s: %d readings were synced, %d are there", k.run, g.name, len(before), len(after))
		}
		if len(after) > 0 {
			if after[0] <= k.seen[g.name] {
				k.t.Errorf("%s, gauge %s: reading %d is there twice", k.run, g.name, after[0])
			}
			k.seen[g.name] = after[len(after)-1]
		}
		total += len(after)
		covered += len(before)
	}
	k.stored += total
	k.count.add(func() {
		k.count.kills++
		if total > 0 {
			k.count.recording++
		}
		k.count.readings += total
		k.count.acked += covered
		k.count.tails += left.tails
	})
	if !k.begun() {
		return
	}
	verified(k.t, k.run)
	there := notesIn(k.t, k.run)
	for text, n := range there {
		if _, entered := k.marks[text]; !entered || n != 1 {
			k.t.Errorf("%s: mark %q is there %d times", k.run, text, n)
		}
	}
	for text, sure := range k.marks {
		if sure && there[text] != 1 {
			k.t.Errorf("%s: mark %q was acknowledged and is there %d times", k.run, text, there[text])
		}
	}
}

// mark enters a note from a process of its own, which may be killed as well.
func (k *killer) mark() {
	if !k.begun() {
		return
	}
	k.made++
	text := fmt.Sprintf("note %d", k.made)
	k.marks[text] = false
	c := exec.Command(k.program, "mark", k.run, "--note", text)
	if err := c.Start(); err != nil {
		k.t.Error(err)
		return
	}
	cut := k.rng.IntN(4) == 0
	if cut {
		time.Sleep(time.Duration(k.rng.IntN(60)) * time.Millisecond)
		_ = c.Process.Kill() // it may have ended before
	}
	if err := c.Wait(); err == nil {
		k.marks[text] = true
		k.count.add(func() { k.count.marks++ })
	} else if !cut {
		k.t.Errorf("mark: %v", err)
	} else {
		k.count.add(func() { k.count.cutMarks++ })
	}
}

// closing lets a last recorder end cleanly and reads the whole folder again.
func (k *killer) closing() {
	p := k.record()
	p.says(k.t, "recording", 30*time.Second)
	time.Sleep(300 * time.Millisecond)
	first := segmentNumbers(k.t, k.run)
	if err := p.end(k.t, syscall.SIGTERM); err != nil {
		k.t.Errorf("ending cleanly: %v\n%s", err, p.err.String())
	}
	v := verified(k.t, k.run)
	all := decodeReadings(k.t, k.run, 1)
	total := 0
	for g, numbers := range all.numbers {
		for i := 1; i < len(numbers); i++ {
			if numbers[i] <= numbers[i-1] {
				k.t.Errorf("%s, gauge %s: reading %d stands behind %d", k.run, g, numbers[i], numbers[i-1])
			}
		}
		total += len(numbers)
	}
	if int64(total) != v.Readings || total <= k.stored {
		k.t.Errorf("%s: the library's decoder finds %d readings, the product's reader %d, %d were there before the last recording",
			k.run, total, v.Readings, k.stored)
	}
	if v.Summed < len(first) {
		k.t.Errorf("%s: %d sums for %d segments", k.run, v.Summed, len(first))
	}
	allDecode(k.t, k.run)
	k.count.add(func() { k.count.packed += all.packed })
}
