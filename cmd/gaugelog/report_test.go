package main

import (
	"bytes"
	"os"
	"path/filepath"
	"regexp"
	"runtime"
	"strings"
	"testing"
)

// The analysis is a pure function of the folder: the same bytes come out
// whatever the number of cores.
func TestAnalysisIsPure(t *testing.T) {
	dir := demoRun(t)
	var first []byte
	for _, cores := range []int{1, 4} {
		before := runtime.GOMAXPROCS(cores)
		var out, errOut bytes.Buffer
		code := run([]string{"analyse", dir, "--json"}, strings.NewReader(""), &out, &errOut)
		runtime.GOMAXPROCS(before)
		if code != Done {
			t.Fatalf("analyse ended with %d: %s", code, &errOut)
		}
		if first == nil {
			first = out.Bytes()
			continue
		}
		if !bytes.Equal(first, out.Bytes()) {
			t.Error("the result depends on the number of cores")
		}
	}
}

var noNumber = regexp.MustCompile(`\bNaN\b|\bInf\b`)

var fetched = regexp.MustCompile(`(?i)(src|href)\s*=|url\(|@import|<script|<link|<iframe`)

// The report is one self-contained file that says every section, and saying
// it again gives the same bytes.
func TestReportPage(t *testing.T) {
	dir := demoRun(t)
	page, err := os.ReadFile(filepath.Join(dir, "report", "report.html"))
	if err != nil {
		t.Fatal(err)
	}
	if m := fetched.Find(page); m != nil {
		t.Errorf("the report fetches or runs something: %q", m)
	}
	for _, want := range []string{
		"In short", "How stiff is it?", "How far did it sag?", "Load steps", "The curve along the beam",
		"Uncertainty budget of E", "Creep", "After unloading", "What was corrected and what was left out",
		"Suspended loads can hurt and kill", "software alarm is no safety device", "licensed engineer decide",
		"gauge-knock", "Traceability", "@media print", `name="viewport"`,
	} {
		if !bytes.Contains(page, []byte(want)) {
			t.Errorf("the report does not say %q", want)
		}
	}
	if n := bytes.Count(page, []byte("<svg")); n < 6 {
		t.Errorf("the report has %d plots, it should have 6 or more", n)
	}
	if noNumber.Match(page) {
		t.Error("the report prints a number that is none")
	}
	var out, errOut bytes.Buffer
	if code := run([]string{"report", dir}, strings.NewReader(""), &out, &errOut); code != Done {
		t.Fatalf("report ended with %d: %s", code, &errOut)
	}
	again, err := os.ReadFile(filepath.Join(dir, "report", "report.html"))
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(page, again) {
		t.Error("the same run gave another report")
	}
}

// metric finds a unit that a report in inches and pounds must not hold.
var metric = regexp.MustCompile(`.{0,40}(?:^|[^\pL/])(?:mm[234]?|µm|N|kN|N·m2|kg|[kMG]?Pa|°C|m/s2|mm/.|N/mm)(?:[^\pL]|$).{0,20}`)

// Both systems of units are whole: nothing of the other is left in a report
// in inches and pounds, in tables, sentences, plots or what was typed.
func TestReportInUSUnits(t *testing.T) {
	into := filepath.Join(t.TempDir(), "us.html")
	var out, errOut bytes.Buffer
	if code := run([]string{"report", demoRun(t), "--units", "us", "--output", into}, strings.NewReader(""), &out, &errOut); code != Done {
		t.Fatalf("report ended with %d: %s", code, &errOut)
	}
	page, err := os.ReadFile(into)
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{"psi", "lbf", ", in<", "lb-in2", "(up to 0.01", "39.370(20) in", "5.5116(22) lb"} {
		if !bytes.Contains(page, []byte(want)) {
			t.Errorf("no %q in a report in US units", want)
		}
	}
	page = regexp.MustCompile(`(?s)<style.*?</style>|<[^>]*>`).ReplaceAll(page, []byte("\n"))
	for _, found := range metric.FindAllString(string(page), -1) {
		t.Errorf("in US units: %q", found)
	}
	if !metric.MatchString("it moved by 3 mm.") || !metric.MatchString("98 N") || metric.MatchString("3 in, 22 lbf, PDF, command") {
		t.Error("what is looked for is not found, or what is not is")
	}
}

// Every format is written beside the page, whole, and the same again; json is
// what analyse prints.
func TestReportFormats(t *testing.T) {
	if testing.Short() {
		t.Skip("many reports")
	}
	dir, into := demoRun(t), t.TempDir()
	write := func(format, name string, more ...string) []byte {
		t.Helper()
		path := filepath.Join(into, name)
		var out, errOut bytes.Buffer
		args := append([]string{"report", dir, "--format", format, "--output", path}, more...)
		if code := run(args, strings.NewReader(""), &out, &errOut); code != Done {
			t.Fatalf("report --format %s ended with %d: %s", format, code, &errOut)
		}
		b, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		return b
	}
	written := map[string][]byte{}
	for format, begins := range map[string]string{"pdf": "%PDF-1.", "md": "# ", "csv": "title,,,", "json": "{\n \"schema\""} {
		first := write(format, "first."+format)
		written[format] = first
		if !bytes.HasPrefix(first, []byte(begins)) {
			t.Errorf("%s begins with %q", format, first[:min(20, len(first))])
		}
		if !bytes.Equal(first, write(format, "second."+format)) {
			t.Errorf("the same run gave another %s", format)
		}
	}
	if bytes.Equal(write("pdf", "letter.pdf", "--paper", "letter"), written["pdf"]) {
		t.Error("Letter and A4 are the same file")
	}
	var result, errOut bytes.Buffer
	if code := run([]string{"analyse", dir, "--json"}, strings.NewReader(""), &result, &errOut); code != Done {
		t.Fatalf("analyse ended with %d: %s", code, &errOut)
	}
	if !bytes.Equal(result.Bytes(), written["json"]) {
		t.Error("report --format json is not what analyse --json prints")
	}
	for _, args := range [][]string{{"--format", "doc"}, {"--format", "pdf", "--paper", "a3"}} {
		var out, errOut bytes.Buffer
		if code := run(append([]string{"report", dir}, args...), strings.NewReader(""), &out, &errOut); code != Wrong || !strings.Contains(errOut.String(), "mend: give") {
			t.Errorf("report %v ended with %d: %s", args, code, &errOut)
		}
	}
}
