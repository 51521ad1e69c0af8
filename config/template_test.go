package config

import (
	"flag"
	"os"
	"reflect"
	"regexp"
	"strings"
	"testing"
)

var update = flag.Bool("update", false, "write the golden files again")

func TestTemplateIsTheGoldenOneAndChecksClean(t *testing.T) {
	got := Template(TemplateOptions{})
	const golden = "testdata/template.golden.yaml"
	if *update {
		if err := os.WriteFile(golden, got, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(golden)
	if err != nil {
		t.Fatal(err)
	}
	if string(got) != string(want) {
		t.Errorf("the template differs from %s; look, then run go test -update", golden)
	}
	r, err := Parse("template", got)
	if err != nil {
		t.Fatal(err)
	}
	if p := append(r.Check(), r.CheckPorts()...); len(p) != 0 {
		t.Errorf("template: %v", Problems(p))
	}
}

func TestTemplateQuotesItsOptions(t *testing.T) {
	o := TemplateOptions{Title: `a "b": #c`, Name: "on", Timezone: "Europe/Dublin", Port: "usb:0403:6001:A1"}
	r, err := Parse("template", Template(o))
	if err != nil {
		t.Fatal(err)
	}
	if r.Title != o.Title || r.Specimen.Name != "on" || r.Gauges[0].Port != o.Port || r.Timezone != o.Timezone {
		t.Errorf("read back %q %q %q", r.Title, r.Specimen.Name, r.Gauges[0].Port)
	}
}

// allKeys collects every key of the rig file's types.
func allKeys(typ reflect.Type, keys map[string]bool) {
	for typ.Kind() == reflect.Pointer || typ.Kind() == reflect.Slice {
		typ = typ.Elem()
	}
	if typ.Kind() != reflect.Struct || elemIsScalar(typ) {
		return
	}
	for key, field := range keysOf(typ) {
		keys[key] = true
		allKeys(field, keys)
	}
}

func TestTemplateShowsEveryKey(t *testing.T) {
	keys := map[string]bool{}
	allKeys(reflect.TypeFor[Rig](), keys)
	if len(keys) < 100 {
		t.Fatalf("only %d keys found", len(keys))
	}
	for key := range keys {
		if !regexp.MustCompile(`\b` + key + `:`).MatchString(templateText) {
			t.Errorf("the template does not show %s", key)
		}
	}
}

// The commented examples must be right too: each is put in the place of what
// it stands beside.
func TestCommentedExamplesLoad(t *testing.T) {
	text := string(Template(TemplateOptions{}))
	block := func(key string) string { // the commented block that begins with "# key:"
		var out []string
		for line := range strings.Lines(text[strings.Index(text, "\n# "+key+":")+1:]) {
			if len(out) > 0 && !strings.HasPrefix(line, "#   ") {
				break
			}
			out = append(out, line[2:])
		}
		return strings.Join(out, "")
	}
	full := text + block("frames") + block("probes") + block("alarms") + block("forward") + block("evaluate") + block("forecast") + block("gravity")
	for _, key := range []string{"mass", "expect", "bar", "stand", "calibration", "contact", "serial_number", "silent_after", "u", "line"} {
		full = regexp.MustCompile(`(?m)^( +)# `+key+`:`).ReplaceAllString(full, "${1}"+key+":")
	}
	r, err := Parse("template", []byte(full))
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range append(r.Check(), r.CheckPorts()...) {
		t.Errorf("%v (%s)", p, p.Fix)
	}
	if len(r.Frames) != 7 || len(r.Probes) != 1 || len(r.Alarms.Command) != 2 || r.Forward.To == "" || r.Gauges[0].Calibration == nil || r.Specimen.Expect.Modulus == nil {
		t.Errorf("not all examples were read: %d frames, %d probes", len(r.Frames), len(r.Probes))
	}
	sections := regexp.MustCompile(`(?m)^  # (section: .*)$`).FindAllStringSubmatch(text, -1)
	if len(sections) != 4 {
		t.Fatalf("%d sections", len(sections))
	}
	for _, s := range sections {
		other := regexp.MustCompile(`(?m)^  section: .*$`).ReplaceAllLiteralString(text, "  "+s[1])
		r, err := Parse("template", []byte(other))
		if err != nil {
			t.Errorf("%s: %v", s[1], err)
		} else if p := r.Check(); len(p) != 0 {
			t.Errorf("%s: %v", s[1], Problems(p))
		}
	}
}
