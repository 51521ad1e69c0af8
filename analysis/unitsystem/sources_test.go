package unitsystem

import (
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

// bare is a verb and a unit of length, force, mass or stress with a plain
// blank between them, as nobody could show it in other units. Bytes, times and
// counts are the same in all.
var bare = regexp.MustCompile(`%[-+]?[.\d*]*[vgfes](?:\(%[^)]*\))? (?:mm[234]?|N|kN|kg|MPa|GPa|N/mm|mm/N|mm/[dhK]|m/s2|N\.mm2|1/MPa|C|K)(?:[^\w/]|$)`)

// Every sentence that the analysis and the rig file's checks make with a
// quantity in it has the quantity in the written form.
func TestSentencesAreWrittenForAnyUnits(t *testing.T) {
	for _, dir := range []string{"..", "../../config"} {
		err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
			if err != nil || d.IsDir() || !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") || strings.Contains(path, "historytest") {
				return err
			}
			files := token.NewFileSet()
			file, err := parser.ParseFile(files, path, nil, 0)
			if err != nil {
				return err
			}
			ast.Inspect(file, func(n ast.Node) bool {
				if lit, ok := n.(*ast.BasicLit); ok && lit.Kind == token.STRING {
					text, err := strconv.Unquote(lit.Value)
					if err == nil && bare.MatchString(text) {
						t.Errorf(`%s: %q: write \u202f between the number and its unit`, files.Position(lit.Pos()), bare.FindString(text))
					}
				}
				return true
			})
			return nil
		})
		if err != nil {
			t.Fatal(err)
		}
	}
}

func TestBareIsFound(t *testing.T) {
	for text, want := range map[string]bool{
		"it moved by %.3g mm, then": true, "at %g\u202fmm": false, "%d mm": false, "about %g min": false,
		"%s MPa": true, "rate %.3g mm/d": true, "%v N": true, "%v Newton": false, "%.1f mm/s": false,
	} {
		if got := bare.MatchString(text); got != want {
			t.Errorf("%q: %v", text, got)
		}
	}
}
