package evaluate

import (
	"embed"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"slices"
	"strings"
	"sync"

	"gaugelog/config"
)

// builtIn is the Origin of the rules that come with the program.
const builtIn = "built in"

//go:embed rules/*.yaml
var ruleFiles embed.FS

// BuiltIn returns the rules that come with the program, by name. They are
// shared: do not change them.
var BuiltIn = sync.OnceValue(func() []*Rule {
	sub, err := fs.Sub(ruleFiles, "rules")
	if err != nil {
		panic(fmt.Sprintf("evaluate: the embedded rules: %v", err))
	}
	list, err := LoadFolder(sub)
	if err != nil {
		panic(fmt.Sprintf("evaluate: the embedded rules: %v", err))
	}
	for _, r := range list {
		r.Origin = builtIn
	}
	return list
})

// LoadFolder reads every *.yaml of a folder as a rule, in order of file name.
// A folder that is not there holds no rules. The error lists everything wrong
// with the files (config.Problems), a name used by two of them included.
func LoadFolder(folder fs.FS) ([]*Rule, error) {
	entries, err := fs.ReadDir(folder, ".")
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, fmt.Errorf("reading the folder of rules: %w", err)
	}
	var out []*Rule
	var problems config.Problems
	for _, e := range entries {
		if e.IsDir() || path.Ext(e.Name()) != ".yaml" || strings.HasPrefix(e.Name(), ".") {
			continue
		}
		text, err := fs.ReadFile(folder, e.Name())
		if err != nil {
			return nil, fmt.Errorf("reading rule file %s: %w", e.Name(), err)
		}
		r, err := Parse(e.Name(), text)
		var wrong config.Problems
		switch {
		case errors.As(err, &wrong):
			problems = append(problems, wrong...)
			continue
		case err != nil:
			return nil, err
		}
		if i := slices.IndexFunc(out, func(o *Rule) bool { return o.Name == r.Name }); i >= 0 {
			problems = append(problems, config.Problem{File: e.Name(), Line: 1, What: fmt.Sprintf("%s has a rule called %q too", out[i].Origin, r.Name), Fix: "give one of them another name"})
			continue
		}
		out = append(out, r)
	}
	if len(problems) > 0 {
		return nil, problems
	}
	return out, nil
}

// Pick returns the rules of these names, in this order, one name once; own
// rules go before built-in ones of the same name. unknown lists the names that
// are no rule.
func Pick(names []string, own []*Rule) (rules []*Rule, unknown []string) {
	all := slices.Concat(own, BuiltIn())
	for i, name := range names {
		if slices.Contains(names[:i], name) {
			continue
		}
		k := slices.IndexFunc(all, func(r *Rule) bool { return r.Name == name })
		if k < 0 {
			unknown = append(unknown, name)
			continue
		}
		rules = append(rules, all[k])
	}
	return rules, unknown
}

// Names lists the built-in rules' names, for messages.
func Names() []string {
	var out []string
	for _, r := range BuiltIn() {
		out = append(out, r.Name)
	}
	return out
}
