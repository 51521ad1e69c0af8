package main

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gaugelog/analysis/history/historytest"
	"gaugelog/ingest/segment"
)

// TestOfficeOpensExports has LibreOffice read each export, with nothing said of
// its format, and write it as its own CSV again: the same columns by the same
// names, as many rows, and every number a number.
func TestOfficeOpensExports(t *testing.T) {
	if testing.Short() {
		t.Skip("starts an office program")
	}
	office, err := exec.LookPath("soffice")
	if err != nil {
		if os.Getenv("GAUGELOG_CI") == "1" {
			t.Fatal("soffice is not installed")
		}
		t.Skip("soffice is not installed (apt-get install libreoffice-calc-nogui)")
	}
	dir := t.TempDir()
	run := filepath.Join(dir, "run")
	if err := os.Mkdir(run, 0o755); err != nil {
		t.Fatal(err)
	}
	root, err := os.OpenRoot(run)
	if err != nil {
		t.Fatal(err)
	}
	defer root.Close()
	made := historytest.Run{Gauges: 3, Readings: 600, Duration: 2 * time.Hour, Steps: 2}
	if err := made.Write(segment.OSFS(root, segment.OSOptions{SyncOnCloseOnly: true})); err != nil {
		t.Fatal(err)
	}
	var files []string
	for name, flag := range map[string]string{"long": "", "wide": "--wide", "marks": "--marks", "corrected": "--corrected"} {
		file := filepath.Join(dir, name+".csv")
		args := []string{"export", run, "--output", file}
		if flag != "" {
			args = append(args, flag)
		}
		if code := ending(t, args...); code != Done {
			t.Fatalf("export %s ends with %d", flag, code)
		}
		files = append(files, file)
	}
	into := filepath.Join(dir, "again")
	// 44,34,76: fields parted by commas, words in quotes, UTF-8.
	c := exec.Command(office, append([]string{"-env:UserInstallation=file://" + filepath.Join(dir, "profile"), "--headless",
		"--infilter=CSV:44,34,76,1,,1033", "--convert-to", "csv:Text - txt - csv (StarCalc):44,34,76,1,,1033,false,true", "--outdir", into}, files...)...)
	c.Env = append(os.Environ(), "HOME="+dir)
	if out, err := c.CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	for _, file := range files {
		ours, theirs := sheet(t, file), sheet(t, filepath.Join(into, filepath.Base(file)))
		if len(ours) < 2 || fmt.Sprint(ours[0]) != fmt.Sprint(theirs[0]) || len(ours) != len(theirs) {
			t.Errorf("%s: %d rows of %v, opened %d of %v", filepath.Base(file), len(ours), ours[0], len(theirs), theirs[0])
			continue
		}
		for i, row := range ours[1:] {
			for k, cell := range row {
				if got := theirs[i+1][k]; !sameCell(cell, got) {
					t.Fatalf("%s, row %d, %s: %q was opened as %q", filepath.Base(file), i+2, ours[0][k], cell, got)
				}
			}
		}
	}
}

func sheet(t *testing.T, file string) [][]string {
	t.Helper()
	b, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(bytes.NewReader(bytes.TrimPrefix(b, []byte("\ufeff")))).ReadAll()
	if err != nil {
		t.Fatalf("%s: %v", file, err)
	}
	return rows
}

// sameCell tells whether two cells hold the same number, or the same text.
func sameCell(a, b string) bool {
	var x, y float64
	if _, err := fmt.Sscanf(a, "%g", &x); err == nil && !strings.ContainsAny(a, "T:") {
		_, err = fmt.Sscanf(b, "%g", &y)
		return err == nil && (x == y || (x-y)/x < 1e-9 && (y-x)/x < 1e-9)
	}
	return a == b
}
