package evaluate

import (
	"maps"
	"os"
	"regexp"
	"slices"
	"strings"
	"testing"
)

// TestRulesPage holds RULES.md to the code: every name and function stands
// there, none stands there that is not known, and its example is a rule.
func TestRulesPage(t *testing.T) {
	text, err := os.ReadFile("RULES.md")
	if err != nil {
		t.Fatal(err)
	}
	page := string(text)
	_, tables, found := strings.Cut(page, "## Names")
	if !found {
		t.Fatal("no section of names")
	}
	told := map[string]bool{}
	for _, line := range strings.Split(tables, "\n") {
		cell, ok := strings.CutPrefix(line, "| ")
		if !ok {
			continue
		}
		cell, _, _ = strings.Cut(cell, " |")
		for _, m := range regexp.MustCompile("`([a-z0-9_]+)").FindAllStringSubmatch(cell, -1) {
			told[m[1]] = true
		}
	}
	known := map[string]bool{}
	for name := range catalogue {
		known[name] = true
	}
	for name := range lookups {
		known[name] = true
	}
	if !maps.Equal(told, known) {
		t.Errorf("RULES.md tells of %v\nknown are %v", slices.Sorted(maps.Keys(told)), slices.Sorted(maps.Keys(known)))
	}
	var example []string
	for _, line := range strings.Split(page, "\n") {
		if strings.HasPrefix(line, "    ") {
			example = append(example, strings.TrimPrefix(line, "    "))
		}
	}
	r, err := Parse("RULES.md", []byte(strings.Join(example, "\n")))
	if err != nil {
		t.Fatalf("the example is no rule: %v", err)
	}
	if r.Name != "our-deck" || len(r.Clauses) != 2 {
		t.Errorf("the example decoded as %s with %d clauses", r.Name, len(r.Clauses))
	}
	for _, name := range slices.Concat(unitNames(), Names()) {
		if !strings.Contains(page, "`"+name+"`") {
			t.Errorf("RULES.md does not tell of %s", name)
		}
	}
	for _, c := range confidences {
		if !strings.Contains(page, "`"+string(c)+"`") {
			t.Errorf("RULES.md does not tell of confidence %s", c)
		}
	}
}

// Every quantity's unit is one of the units, so that resolve cannot trip.
func TestCatalogueUnits(t *testing.T) {
	for name, q := range catalogue {
		if _, ok := units[q.unit]; !ok || q.missing == "" {
			t.Errorf("%s: unit %q, missing %q", name, q.unit, q.missing)
		}
	}
}
