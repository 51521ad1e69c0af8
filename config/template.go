package config

import (
	_ "embed"
	"strings"
)

//go:embed template.yaml
var templateText string

// TemplateOptions fill the places of the template that a person would change
// first; an empty one takes its default.
type TemplateOptions struct {
	Title    string // default "Slat 1, larch"
	Name     string // of the specimen; default "slat-1"
	Timezone string // default "UTC"
	Port     string // of the gauge; default "/dev/ttyUSB0"
}

// Template returns a commented rig file that shows every key with its
// default, for a larch slat of 95 mm by 20 mm hung with up to 4 kg. With the
// default options it loads and checks without a word; a text of the options is
// quoted where YAML needs it, and is for the caller to have checked otherwise.
func Template(o TemplateOptions) []byte {
	setDefault(&o.Title, "Slat 1, larch")
	setDefault(&o.Name, "slat-1")
	setDefault(&o.Timezone, "UTC")
	setDefault(&o.Port, "/dev/ttyUSB0")
	return []byte(strings.NewReplacer(
		"{{title}}", scalarText(o.Title), "{{name}}", scalarText(o.Name),
		"{{timezone}}", scalarText(o.Timezone), "{{port}}", scalarText(o.Port),
		"{{frames}}", strings.Join(builtinNames(), ", "),
	).Replace(templateText))
}
