package main

import (
	"os/exec"
	"path"
	"strings"
	"testing"
)

// arrows says which of our folders a folder may import, from the design: a
// folder not named here may import nothing of ours. An entry covers its
// subfolders unless one of them has an entry of its own.
var arrows = map[string][]string{
	"config":         {},
	"device":         {"config", "device"},
	"device/frame":   {},
	"device/modbus":  {},
	"ingest":         {"config", "device", "ingest"},
	"ingest/segment": {"ingest/segment"},
	"analysis":       {"config", "ingest/segment", "analysis"},
	"analysis/beam":  {},
	"analysis/lsq":   {},
	"simulators":     {"config", "simulators"},
	"cmd/gaugelog":   {"config", "device", "ingest", "analysis", "simulators"},
}

// TestArrows holds the imports of every package, test files apart, against
// the arrows: the direct ones by table, the forbidden pairs through any chain.
func TestArrows(t *testing.T) {
	out, err := exec.Command("go", "list", "-deps", "-f", "{{.ImportPath}} {{join .Imports \" \"}}", "gaugelog/...").Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	imports := map[string][]string{}
	for _, line := range strings.Split(strings.TrimSpace(string(out)), "\n") {
		fields := strings.Fields(line)
		if from, ours := strings.CutPrefix(fields[0], "gaugelog/"); ours {
			for _, to := range fields[1:] {
				if to, ours := strings.CutPrefix(to, "gaugelog/"); ours {
					imports[from] = append(imports[from], to)
				}
			}
			if _, room := roomOf(from); !room {
				t.Errorf("%s belongs to no folder of the design; give it a place in one", from)
			}
		}
	}
	if len(imports) < 5 {
		t.Fatalf("only %d packages with imports found; the list is not whole", len(imports))
	}
	for from, tos := range imports {
		allowed, _ := roomOf(from)
		for _, to := range tos {
			if !within(to, allowed) {
				t.Errorf("%s imports %s, which its folder may not", from, to)
			}
		}
	}
	never(t, imports, "analysis", "device")
	never(t, imports, "device", "ingest")
	never(t, imports, "simulators", "analysis")
	never(t, imports, "simulators", "device")
}

// roomOf finds the nearest entry of arrows for a package.
func roomOf(pkg string) ([]string, bool) {
	for p := pkg; p != "."; p = path.Dir(p) {
		if allowed, ok := arrows[p]; ok {
			return allowed, true
		}
	}
	return nil, false
}

func within(pkg string, folders []string) bool {
	for _, f := range folders {
		if pkg == f || strings.HasPrefix(pkg, f+"/") {
			return true
		}
	}
	return false
}

// never fails where a package of folder from reaches folder to by any chain.
func never(t *testing.T, imports map[string][]string, from, to string) {
	t.Helper()
	for start := range imports {
		if !within(start, []string{from}) {
			continue
		}
		seen := map[string]bool{}
		stack := []string{start}
		for len(stack) > 0 {
			p := stack[len(stack)-1]
			stack = stack[:len(stack)-1]
			if seen[p] {
				continue
			}
			seen[p] = true
			if within(p, []string{to}) {
				t.Errorf("%s reaches %s", start, p)
			}
			stack = append(stack, imports[p]...)
		}
	}
}
