//go:build campaign && linux

package main

import (
	"bufio"
	"bytes"
	"flag"
	"fmt"
	"io"
	"io/fs"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"
)

var (
	surviveCuts   = flag.Int("survive.cuts", 20, "how often the emulated machine loses its power")
	surviveKernel = flag.String("survive.kernel", "", "folder with an unpacked Debian cloud kernel package (default: fetched with apt-get download)")
)

// TestSurvivePowerCuts records inside an emulated machine and kills the machine:
// what its system had not put on the disk is gone, as in a power cut. All that
// was synced is there at the next boot, each reading once. A file written
// beside it without a sync must lose something, or the test shows nothing.
//
//	go test -tags campaign -run SurvivePower -timeout 60m ./cmd/gaugelog -survive.cuts 100
func TestSurvivePowerCuts(t *testing.T) {
	needTool(t, "qemu-system-x86_64", "mkfs.ext4")
	m := newMachine(t)
	rng := rand.New(rand.NewPCG(*surviveSeed, 9))
	var all []*bootLog
	twinLost, twinSaid, synced, notes := 0, 0, 0, 0
	for boot := 1; boot <= *surviveCuts+1; boot++ {
		last := boot == *surviveCuts+1
		b := m.bootUp(t, boot, last, time.Duration(500+rng.IntN(3500))*time.Millisecond)
		b.check(t, all)
		if n := len(all); n > 0 {
			twinSaid += all[n-1].acks
			twinLost += all[n-1].acks - b.twin
		}
		if !last {
			all = append(all, b)
			notes += len(b.marked)
			for _, n := range b.acked {
				synced += n - boot*eachBoot
			}
			t.Logf("cut %d: so far %d synced readings and %d acknowledged marks; %d of %d lines not synced lost", boot, synced, notes, twinLost, twinSaid)
		}
		if t.Failed() {
			t.Fatalf("at boot %d:\n%s", boot, b.text.String())
		}
	}
	if twinLost == 0 || synced == 0 || notes == 0 {
		t.Errorf("nothing was put to the test: %d of %d unsynced lines lost, %d readings synced, %d marks", twinLost, twinSaid, synced, notes)
	}
	t.Logf("%d power cuts: of %d synced readings and %d acknowledged marks none lost; the file without syncs lost %d of %d lines",
		*surviveCuts, synced, notes, twinLost, twinSaid)
}

// bootLog is what one boot of the guest said.
type bootLog struct {
	number int
	have   map[string][2]string // "gauge boot": last number, how
	notes  map[string]int
	damage []string
	twin   int
	acked  map[string]int // last synced number by gauge
	acks   int
	marked []string
	init   bool // the guest's own program was reached
	told   bool
	text   bytes.Buffer
}

// check compares what the disk holds now with what earlier boots called synced.
func (b *bootLog) check(t *testing.T, earlier []*bootLog) {
	t.Helper()
	if !b.told {
		t.Errorf("boot %d did not say what the disk holds", b.number)
	}
	for _, d := range b.damage {
		t.Errorf("boot %d: damage: %s", b.number, d)
	}
	for _, e := range earlier {
		for g, n := range e.acked {
			have := b.have[fmt.Sprint(g, " ", e.number)]
			if last, _ := strconv.Atoi(have[0]); last < n || have[1] != "each-once" {
				t.Errorf("boot %d: gauge %s of boot %d: synced up to %d, the disk holds up to %q, %s", b.number, g, e.number, n, have[0], have[1])
			}
		}
		for _, note := range e.marked {
			if b.notes[note] != 1 {
				t.Errorf("boot %d: mark %q of boot %d is there %d times", b.number, note, e.number, b.notes[note])
			}
		}
	}
}

func (b *bootLog) line(text string) {
	b.text.WriteString(text + "\n")
	w := strings.Fields(text)
	if len(w) == 0 {
		return
	}
	switch w[0] {
	case "INIT":
		b.init = true
	case "HAVE":
		if len(w) == 6 {
			b.have[w[1]+" "+w[2]] = [2]string{w[4], w[5]}
		}
	case "NOTE":
		b.notes[w[len(w)-1]]++
	case "DAMAGE":
		b.damage = append(b.damage, text)
	case "TWIN":
		b.twin, _ = strconv.Atoi(w[len(w)-1])
	case "TOLD":
		b.told = true
	case "MARKED":
		b.marked = append(b.marked, w[len(w)-1])
	case "ACK":
		// A line cut off with the power is no promise that was heard.
		if n, err := strconv.Atoi(w[len(w)-1]); len(w) == 3 && err == nil {
			b.acked[w[1]] = n
			b.acks++
		}
	}
}

// machine is the emulated computer: a kernel, a memory disk with this test
// binary as its first process, and a disk that outlives its boots.
type machine struct{ kernel, initrd, disk string }

func newMachine(t *testing.T) *machine {
	t.Helper()
	dir := t.TempDir()
	kernel, modules := cloudKernel(t, dir)
	program := filepath.Join(dir, "init")
	c := exec.Command("go", "test", "-c", "-tags", "campaign", "-ldflags", "-s -w", "-o", program, ".")
	c.Env = append(os.Environ(), "CGO_ENABLED=0")
	if out, err := c.CombinedOutput(); err != nil {
		t.Fatalf("building the guest: %v\n%s", err, out)
	}
	m := &machine{kernel: kernel, initrd: filepath.Join(dir, "initrd"), disk: filepath.Join(dir, "disk")}
	if err := os.WriteFile(m.initrd, memoryDisk(t, program, modules), 0o644); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(m.disk, nil, 0o644); err != nil {
		t.Fatal(err)
	}
	if err := os.Truncate(m.disk, 256<<20); err != nil {
		t.Fatal(err)
	}
	do(t, "mkfs.ext4", "-q", m.disk)
	return m
}

// cloudKernel finds, or fetches without installing, a kernel and its modules.
func cloudKernel(t *testing.T, dir string) (kernel string, modules map[string]string) {
	t.Helper()
	root := *surviveKernel
	if root == "" {
		needTool(t, "apt-get", "apt-cache", "dpkg-deb")
		root = filepath.Join(dir, "kernel")
		if err := os.Mkdir(root, 0o755); err != nil {
			t.Fatal(err)
		}
		do(t, "sh", "-c", `cd "$1" && p=$(apt-cache depends linux-image-cloud-amd64 | sed -n 's/.*Depends: \(linux-image[^ ]*\)$/\1/p' | head -n 1) && apt-get download -qq "$p" && dpkg-deb -x "$p"*.deb .`, "sh", root)
	}
	modules = map[string]string{}
	err := filepath.WalkDir(root, func(path string, d fs.DirEntry, err error) error {
		if strings.HasPrefix(d.Name(), "vmlinuz-") {
			kernel = path
		}
		if name, ok := strings.CutSuffix(d.Name(), ".ko"); ok {
			modules[name] = path
		}
		return err
	})
	if err != nil || kernel == "" {
		t.Fatalf("no kernel in %s: %v", root, err)
	}
	return kernel, modules
}

// memoryDisk writes a cpio archive in the "newc" form that the kernel unpacks
// (Documentation/driver-api/early-userspace/buffer-format.rst of the kernel).
func memoryDisk(t *testing.T, program string, modules map[string]string) []byte {
	t.Helper()
	var b bytes.Buffer
	number := 0
	entry := func(name string, mode int, device [2]int, body []byte) {
		number++
		fmt.Fprintf(&b, "070701%08x%08x%08x%08x%08x%08x%08x%08x%08x%08x%08x%08x%08x%s\x00",
			number, mode, 0, 0, 1, 0, len(body), 0, 0, device[0], device[1], len(name)+1, 0, name)
		b.Write(make([]byte, -b.Len()&3))
		b.Write(body)
		b.Write(make([]byte, -b.Len()&3))
	}
	for _, d := range []string{"dev", "proc", "sys", "mnt", "mod", "run", "run/lock", "tmp"} {
		entry(d, 0o040755, [2]int{}, nil)
	}
	entry("dev/console", 0o020600, [2]int{5, 1}, nil)
	for name, path := range map[string]string{"init": program, "gaugelog": ""} {
		if path == "" {
			entry(name, 0o120777, [2]int{}, []byte("init"))
			continue
		}
		entry(name, 0o100755, [2]int{}, mustRead(t, path))
	}
	for _, name := range guestModules {
		if modules[name] == "" {
			t.Fatalf("the kernel package has no module %s", name)
		}
		entry("mod/"+name+".ko", 0o100644, [2]int{}, mustRead(t, modules[name]))
	}
	entry("TRAILER!!!", 0, [2]int{}, nil)
	return b.Bytes()
}

func mustRead(t *testing.T, name string) []byte {
	t.Helper()
	b, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// bootUp boots the machine, anew where its system did not come up: on a busy
// host the emulated timer may not answer in time. That touches no disk.
func (m *machine) bootUp(t *testing.T, number int, last bool, after time.Duration) *bootLog {
	t.Helper()
	for try := 1; ; try++ {
		b := m.boot(t, number, last, after)
		if b.init || try == 5 {
			return b
		}
		t.Logf("boot %d, try %d: the system did not come up:\n%s", number, try, b.text.String())
	}
}

// boot runs the machine and kills it a while after its first word of a synced
// reading; the last boot only tells what the disk holds.
func (m *machine) boot(t *testing.T, number int, last bool, after time.Duration) *bootLog {
	t.Helper()
	b := &bootLog{number: number, have: map[string][2]string{}, notes: map[string]int{}, acked: map[string]int{}}
	// A plain processor and a kernel without precautions start twice as fast
	// under software emulation; neither concerns the disk.
	c := exec.Command("qemu-system-x86_64", "-accel", "tcg", "-cpu", "qemu64,+ssse3,+sse4.1,+sse4.2,+popcnt,+rdrand", "-m", "512",
		"-nographic", "-no-reboot", "-nodefaults", "-serial", "stdio", "-kernel", m.kernel, "-initrd", m.initrd,
		"-append", fmt.Sprintf("console=ttyS0 quiet panic=-1 edd=off mitigations=off nokaslr no_timer_check cryptomgr.notests random.trust_cpu=on survive.boot=%d", number),
		"-drive", "file="+m.disk+",format=raw,if=virtio,cache=none")
	out, err := c.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := c.Start(); err != nil {
		t.Fatal(err)
	}
	deadline := time.AfterFunc(10*time.Minute, func() { _ = c.Process.Kill() })
	defer deadline.Stop()
	lines := bufio.NewReader(out)
	for cut := false; ; {
		text, err := lines.ReadString('\n')
		if err == nil {
			b.line(strings.TrimSpace(text))
		} else if err != io.EOF {
			t.Error(err)
		}
		if err != nil {
			break
		}
		if last && b.told || strings.HasPrefix(text, "GUEST FAILED") {
			_ = c.Process.Kill()
		}
		if b.acks > 0 && !cut {
			cut = true
			time.AfterFunc(after, func() { _ = c.Process.Kill() })
		}
	}
	_ = c.Wait() // it was killed
	return b
}
