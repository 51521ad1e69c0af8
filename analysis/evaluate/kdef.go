package evaluate

import (
	_ "embed"
	"encoding/csv"
	"fmt"
	"strconv"
	"strings"
	"sync"
)

// kdefText is EN 1995-1-1:2004 (+A1:2008) table 3.2; its first line says
// which values were read in a public text and which come from memory.
//
//go:embed kdef_en1995.csv
var kdefText string

// kdefRow is one product: k_def by service class, nil where the class is not
// permitted.
type kdefRow struct {
	material, standard string
	class              [3]*float64
}

var kdefTable = sync.OnceValue(func() []kdefRow {
	r := csv.NewReader(strings.NewReader(kdefText))
	r.Comment = '#'
	lines, err := r.ReadAll()
	if err != nil {
		panic(fmt.Sprintf("evaluate: the embedded k_def table: %v", err))
	}
	var out []kdefRow
	for _, l := range lines[1:] {
		row := kdefRow{material: l[0], standard: l[1]}
		for i, cell := range l[2:5] {
			if cell == "" {
				continue
			}
			v, err := strconv.ParseFloat(cell, 64)
			if err != nil {
				panic(fmt.Sprintf("evaluate: the embedded k_def table: %v", err))
			}
			row.class[i] = &v
		}
		out = append(out, row)
	}
	return out
})

// KDef looks up the deformation factor of EN 1995-1-1 table 3.2 for a product
// ("solid timber", "plywood" with its part "EN 636 part 2" appended, and so
// on; case and blanks do not count) in service class 1, 2 or 3. The error says
// what is known, or that the class is not permitted.
func KDef(product string, class int) (float64, error) {
	if class < 1 || class > 3 {
		return 0, fmt.Errorf("service class %d is not known; give 1, 2 or 3", class)
	}
	var names []string
	for _, row := range kdefTable() {
		full := row.material + " " + row.standard
		if squeezed(product) != squeezed(full) && (squeezed(product) != squeezed(row.material) || row.material == "Plywood") {
			names = append(names, full)
			continue
		}
		if row.class[class-1] == nil {
			return 0, fmt.Errorf("%s is not permitted in service class %d", full, class)
		}
		return *row.class[class-1], nil
	}
	return 0, fmt.Errorf("%q is no product of the table; known: %s", product, strings.Join(names, "; "))
}

func squeezed(s string) string {
	return strings.ToLower(strings.Join(strings.Fields(s), ""))
}

// kdefOf looks up the specimen's k_def by the rig file's details
// kdef_material and service_class; nil where they name no value.
func kdefOf(f *Facts) *Quantity {
	class, err := strconv.Atoi(strings.TrimSpace(f.Details["service_class"]))
	if err != nil {
		return nil
	}
	v, err := KDef(f.Details["kdef_material"], class)
	if err != nil {
		return nil
	}
	return Exactly(v)
}

// kdefWhy says why kdefOf found none.
func kdefWhy(f *Facts) string {
	product, class := f.Details["kdef_material"], strings.TrimSpace(f.Details["service_class"])
	if product == "" || class == "" {
		return "kdef is not known: " + catalogueKdefMissing
	}
	n, err := strconv.Atoi(class)
	if err != nil {
		return fmt.Sprintf("kdef is not known: service_class %q in the rig file's details is not 1, 2 or 3", class)
	}
	if _, err := KDef(product, n); err != nil {
		return "kdef is not known: " + err.Error()
	}
	return "kdef is not known"
}

const catalogueKdefMissing = "the rig file's details state no kdef_material and service_class of EN 1995-1-1 table 3.2"
