//go:build campaign && linux

package main

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"

	"golang.org/x/sys/unix"

	"gaugelog/ingest"
	"gaugelog/ingest/segment"
)

// eachBoot separates the numbers of the readings of two boots of the guest.
const eachBoot = 50_000

// guestModules are what the cloud kernel needs to see its disk, in order.
var guestModules = []string{"virtio_ring", "virtio", "virtio_pci_legacy_dev", "virtio_pci_modern_dev", "virtio_pci", "virtio_blk"}

// As the first process of an emulated machine this test binary is the guest of
// TestSurvivePowerCuts: it says what the disk holds, then records on it until
// the power goes.
func init() {
	if os.Getpid() != 1 {
		return
	}
	if err := guest(); err != nil {
		fmt.Println("GUEST FAILED:", err)
	}
	for {
		time.Sleep(time.Hour)
	}
}

func guest() error {
	fmt.Println("\nINIT")
	if err := guestMachine(); err != nil {
		return err
	}
	base, err := guestBase()
	if err != nil {
		return err
	}
	if err := guestTells("/mnt/run"); err != nil {
		return err
	}
	twin, err := os.ReadFile("/mnt/twin")
	if err != nil && !os.IsNotExist(err) {
		return err
	}
	fmt.Printf("TWIN %d\nTOLD\n", bytes.Count(twin, []byte("\n")))
	return guestRecords(base)
}

func guestMachine() error {
	for _, m := range [][3]string{{"proc", "/proc", "proc"}, {"sys", "/sys", "sysfs"}, {"dev", "/dev", "devtmpfs"}} {
		if err := unix.Mount(m[0], m[1], m[2], 0, ""); err != nil {
			return fmt.Errorf("mounting %s: %w", m[1], err)
		}
	}
	if err := os.MkdirAll("/dev/pts", 0o755); err != nil {
		return err
	}
	if err := unix.Mount("devpts", "/dev/pts", "devpts", 0, "ptmxmode=0666"); err != nil {
		return fmt.Errorf("mounting devpts: %w", err)
	}
	for _, name := range guestModules {
		f, err := os.Open("/mod/" + name + ".ko")
		if err != nil {
			return err
		}
		err = unix.FinitModule(int(f.Fd()), "", 0)
		f.Close()
		if err != nil {
			return fmt.Errorf("loading %s: %w", name, err)
		}
	}
	for range 200 {
		if _, err := os.Stat("/dev/vda"); err == nil {
			break
		}
		time.Sleep(20 * time.Millisecond)
	}
	if err := unix.Mount("/dev/vda", "/mnt", "ext4", 0, ""); err != nil {
		return fmt.Errorf("mounting the disk: %w", err)
	}
	return nil
}

// guestBase takes the number of the boot from the kernel's command line.
func guestBase() (int64, error) {
	line, err := os.ReadFile("/proc/cmdline")
	if err != nil {
		return 0, err
	}
	for word := range strings.FieldsSeq(string(line)) {
		if n, ok := strings.CutPrefix(word, "survive.boot="); ok {
			boot, err := strconv.ParseInt(n, 10, 64)
			return boot * eachBoot, err
		}
	}
	return 0, fmt.Errorf("no survive.boot in %q", line)
}

// guestTells prints what the run folder holds, by gauge and boot, and whether
// it is whole.
func guestTells(run string) error {
	if _, err := os.Stat(filepath.Join(run, segment.RigFile)); os.IsNotExist(err) {
		return nil
	}
	dir, err := ingest.OpenDir(run, ingest.DirOptions{})
	if err != nil {
		return err
	}
	defer dir.Close()
	v, err := segment.Verify(dir.FS())
	if err != nil {
		return err
	}
	for _, d := range v.Damage {
		fmt.Println("DAMAGE", d)
	}
	fmt.Println("TAILS", len(v.Tails))
	folder, err := segment.OpenFolder(dir.FS())
	if err != nil {
		return err
	}
	r := folder.Read(segment.ReadOptions{})
	defer r.Close()
	numbers := map[string][]int{}
	for rec, err := range r.Records() {
		if err != nil {
			return err
		}
		n := int(rec.MM*1000 + 0.5)
		key := fmt.Sprint(rec.Name, " ", n/eachBoot)
		numbers[key] = append(numbers[key], n)
	}
	for key, list := range numbers {
		how := "each-once"
		if err := consecutive(list); err != nil {
			how = strings.ReplaceAll(err.Error(), " ", "-")
		}
		fmt.Println("HAVE", key, list[0], list[len(list)-1], how)
	}
	marks, err := ingest.ListMarks(dir.FS())
	for _, m := range marks {
		fmt.Println("NOTE", m.Note)
	}
	return err
}

// guestRecords records, and says what is synced: a checkpoint is, once the next
// one stands behind it in its file. What it says it also writes to a file that
// nobody syncs.
func guestRecords(base int64) error {
	f, err := openFeeder(2, 50, base)
	if err != nil {
		return err
	}
	rig, ports, err := f.lay("/", "{sampling: all, sync: 200 ms, roll: {size: 8 kB}}")
	if err != nil {
		return err
	}
	c := exec.Command("/gaugelog", "record", rig, "--into", "/mnt/run", "--ports", ports, "--quiet")
	c.Stdout, c.Stderr = os.Stdout, os.Stdout
	if err := c.Start(); err != nil {
		return err
	}
	twin, err := os.OpenFile("/mnt/twin", os.O_CREATE|os.O_TRUNC|os.O_WRONLY|os.O_APPEND, 0o644)
	if err != nil {
		return err
	}
	go guestMarks(base)
	synced := map[string]int{}
	for {
		time.Sleep(100 * time.Millisecond)
		if !guestSynced(synced, int(base)) {
			continue
		}
		for g, n := range synced {
			if _, err := fmt.Fprintln(twin, "ACK", g, n); err != nil {
				return err
			}
			fmt.Println("ACK", g, n)
		}
	}
}

// guestMarks enters notes from processes of their own.
func guestMarks(base int64) {
	for n := 1; ; n++ {
		time.Sleep(1200 * time.Millisecond)
		text := fmt.Sprintf("note-%d-%d", base, n)
		if err := exec.Command("/gaugelog", "mark", "/mnt/run", "--note", text).Run(); err == nil {
			fmt.Println("MARKED", text)
		}
	}
}

var (
	openCheckpoint = regexp.MustCompile(`(?m)^#checkpoint .* end=no .*$`)
	numberLine     = regexp.MustCompile(`(?m)^indication,gauge=(\w+) mm=([\d.]+) `)
)

// guestSynced raises the numbers of the last synced readings; false where
// nothing new is.
func guestSynced(synced map[string]int, base int) (more bool) {
	names, _ := filepath.Glob("/mnt/run/readings/*.lp")
	if len(names) == 0 {
		return false
	}
	slices.Sort(names)
	text, err := os.ReadFile(names[len(names)-1])
	ends := openCheckpoint.FindAllIndex(text, -1)
	if err != nil || len(ends) < 2 {
		return false // it may have been compressed just now
	}
	for _, m := range numberLine.FindAllSubmatch(text[:ends[len(ends)-2][0]], -1) {
		mm, err := strconv.ParseFloat(string(m[2]), 64)
		n := int(mm*1000 + 0.5)
		if g := string(m[1]); err == nil && n > base && n > synced[g] {
			synced[g], more = n, true
		}
	}
	return more
}
