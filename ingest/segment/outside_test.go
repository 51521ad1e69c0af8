package segment_test

import (
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"testing"

	"gaugelog/ingest/segment"
)

// realFS is a real folder.
func realFS(t testing.TB) (segment.FS, string) {
	dir := t.TempDir()
	root, err := os.OpenRoot(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { root.Close() })
	return segment.OSFS(root, segment.OSOptions{}), dir
}

// run runs a program of the system, skipping the test where it is not there.
func run(t *testing.T, dir, name string, args ...string) []byte {
	t.Helper()
	if _, err := exec.LookPath(name); err != nil {
		t.Skipf("%s is not installed", name)
	}
	cmd := exec.Command(name, args...)
	cmd.Dir = dir
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("%s %v: %v\n%s%s", name, args, err, out, stderr.Bytes())
	}
	return out
}

// The system's own zstd and sha256sum accept the folder, and the unpacked text
// is the plain segment byte for byte.
func TestSystemProgramsAcceptTheFolder(t *testing.T) {
	fs, dir := realFS(t)
	fill(t, fs, 1, 0, 60000, 300, true)
	fill(t, fs, 2, 60000, 61000, 300, false)
	plain, err := os.ReadFile(filepath.Join(dir, "readings/000001.lp"))
	if err != nil {
		t.Fatal(err)
	}
	c, err := segment.Compress(fs, 1)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%d bytes packed into %d", c.Plain, c.Packed)
	if err := segment.UpdateSums(fs, c.Name, "readings/000002.lp"); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(filepath.Join(dir, "readings/000001.lp")); !os.IsNotExist(err) {
		t.Fatal("the plain segment is still there")
	}
	run(t, dir, "sha256sum", "--strict", "-c", segment.SumsFile)
	run(t, dir, "zstd", "-t", c.Name)
	if !bytes.Equal(run(t, dir, "zstdcat", c.Name), plain) {
		t.Fatal("zstdcat gives other bytes than were packed")
	}
	got, report := read(t, fs, segment.ReadOptions{})
	if len(got) != 60900 || len(report.Damage) > 0 {
		t.Fatal(len(got), report)
	}
}

// What another program packed in one frame reads as well, and a foreign text
// without comments, with strings that hold newlines.
func TestForeignFilesAreRead(t *testing.T) {
	fs, dir := realFS(t)
	if err := fs.MkdirAll("readings"); err != nil {
		t.Fatal(err)
	}
	text := "# made elsewhere\n" +
		"indication,gauge=mid mm=1.5 1790000000000000000\n" +
		"note text=\"two\nlines\" 1790000000000000001\r\n" +
		"indication,gauge=12\" mm=1.5 1790000000000000002\n" +
		"indication,gauge=mid,room=b mm=1.5,t=20 1790000000000000003\n" +
		"indication,gauge=mid mm=0x1p3 1790000000000000004\n" +
		"indication,gauge=mid mm=2 1790000000000000005\n" +
		"indication,gauge=mid mm=3 17900000"
	if err := os.WriteFile(filepath.Join(dir, "readings/mine.lp"), []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	check := func(file string) {
		t.Helper()
		got, report := read(t, fs, segment.ReadOptions{})
		if len(got) != 4 || report.Lines != 5 || len(report.Damage) != 1 || report.Damage[0].Lines != 1 {
			t.Fatalf("%s: %v %+v", file, got, report)
		}
		if len(report.Tails) != 1 || report.Tails[0].Length != int64(len("indication,gauge=mid mm=3 17900000")) {
			t.Fatalf("%s: %+v", file, report.Tails)
		}
	}
	check("plain")
	run(t, dir, "zstd", "-q", "--rm", "readings/mine.lp")
	check("packed")
}

// Verify changes nothing, is content with a whole folder, and names what hurts.
func TestVerify(t *testing.T) {
	fs, dir := realFS(t)
	fill(t, fs, 1, 0, 3000, 300, true)
	fill(t, fs, 2, 3000, 6000, 300, true)
	w := fill(t, fs, 3, 6000, 6100, 30, false)
	l, err := segment.OpenLog(fs, segment.MarksFile, header())
	if err != nil {
		t.Fatal(err)
	}
	note := func() {
		t.Helper()
		e := segment.Entry{Point: &segment.Point{Measurement: "note", Fields: []segment.Field{{Key: "text", Value: "x"}}}, Time: t0}
		if err := l.Append(synced(t0), e); err != nil {
			t.Fatal(err)
		}
	}
	note()
	if err := os.WriteFile(filepath.Join(dir, "rig.yaml"), []byte("title: x\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := segment.Compress(fs, 2); err != nil {
		t.Fatal(err)
	}
	if err := segment.UpdateSums(fs, "rig.yaml", "readings/000001.lp", "readings/000002.lp.zst", segment.MarksFile); err != nil {
		t.Fatal(err)
	}
	note()
	verify := func() *segment.Verified {
		t.Helper()
		v, err := segment.Verify(fs)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	if v := verify(); !v.Whole() || v.Readings != 6090 || v.Summed != 4 || v.Files != 6 {
		t.Fatalf("%+v", v)
	}
	for _, name := range []string{"rig.yaml", "readings/000001.lp", "readings/000002.lp.zst", "readings/000003.lp", "marks.lp"} {
		path := filepath.Join(dir, name)
		whole, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		hurt := bytes.Clone(whole)
		hurt[len(hurt)/3] ^= 1
		if err := os.WriteFile(path, hurt, 0o644); err != nil {
			t.Fatal(err)
		}
		v := verify()
		if v.Whole() {
			t.Errorf("%s damaged unnoticed", name)
		}
		for _, d := range v.Damage {
			if d.File != name {
				t.Errorf("%s damaged, but reported: %v", name, d)
			}
		}
		if after, _ := os.ReadFile(path); !bytes.Equal(after, hurt) {
			t.Errorf("verify changed %s", name)
		}
		if err := os.WriteFile(path, whole, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	w.Close(synced(nth(6100).time))
}
