package config

import (
	"regexp"
	"regexp/syntax"
	"slices"
	"strings"
)

// groupsOf lists the named groups of a pattern; none where it does not compile.
func groupsOf(pattern string) []string {
	re, err := regexp.Compile(pattern)
	if err != nil {
		return nil
	}
	var names []string
	for _, name := range re.SubexpNames() {
		if name != "" {
			names = append(names, name)
		}
	}
	return names
}

// pattern checks a text frame's grammar.
func (c *checker) pattern(p string, f *Frame) {
	if f.Pattern == "" {
		c.fail(p, "frame "+f.Name+" is text and has no pattern", `add pattern: '(?P<value>[+-]\d+\.\d+)' in single quotes, after the instrument's manual`)
		return
	}
	whole, err := regexp.Compile(`\A(?:` + f.Pattern + `)\z`)
	if err != nil {
		c.fail(p+".pattern", "the pattern cannot be read: "+err.Error(), "mend the regular expression (Go's syntax); write it in single quotes, so that YAML leaves \\ alone")
		return
	}
	if whole.MatchString("") {
		c.fail(p+".pattern", "the pattern of frame "+f.Name+" can match nothing at all", "write out what is always there: digits, point, sign")
	}
	groups := groupsOf(f.Pattern)
	if len(groups) == 0 {
		c.fail(p+".pattern", "the pattern of frame "+f.Name+" has no named group, so nothing can be read from it",
			`put the digits with their sign into (?P<value>...)`)
		return
	}
	tree, err := syntax.Parse(f.Pattern, syntax.Perl)
	if err != nil || !slices.Contains(groups, "value") {
		return
	}
	value := findGroup(tree, "value")
	before, after := neighbours(tree, value)
	own := canBegin(value, '-')
	switch {
	case !own && before != nil && canEnd(before, '-'):
		c.fail(p+".pattern", "the sign stands outside the group value of frame "+f.Name+": a minus would be dropped",
			`move it inside, as (?P<value>[+-]\d+\.\d+)`)
	case !own && after != nil && canBegin(after, '-'):
		c.fail(p+".pattern", "the sign stands behind the group value of frame "+f.Name+": a minus would be dropped",
			"the sign must stand inside the group; a trailing sign cannot be read")
	case !own:
		c.warn(p+".pattern", "frame "+f.Name+" knows no minus sign: frames below zero would be refused", `allow it, as (?P<value>[+-]?\d+\.\d+), unless the instrument cannot show it`)
	}
	if canMatch(value, 'x') {
		c.warn(p+".pattern", "the group value of frame "+f.Name+" also matches letters", `write digits only, as [+-]\d+\.\d+: a damaged frame is then refused`)
	}
}

func findGroup(re *syntax.Regexp, name string) *syntax.Regexp {
	if re.Op == syntax.OpCapture && re.Name == name {
		return re
	}
	for _, sub := range re.Sub {
		if found := findGroup(sub, name); found != nil {
			return found
		}
	}
	return nil
}

// neighbours returns what stands before and behind the group in the innermost
// sequences around it; nil where nothing does.
func neighbours(re, group *syntax.Regexp) (before, after *syntax.Regexp) {
	for i, sub := range re.Sub {
		if sub != group && !holds(sub, group) {
			continue
		}
		if sub != group {
			before, after = neighbours(sub, group)
		}
		if re.Op == syntax.OpConcat {
			if before == nil && i > 0 {
				before = &syntax.Regexp{Op: syntax.OpConcat, Sub: re.Sub[:i]}
			}
			if after == nil && i+1 < len(re.Sub) {
				after = &syntax.Regexp{Op: syntax.OpConcat, Sub: re.Sub[i+1:]}
			}
		}
	}
	return before, after
}

func holds(re, group *syntax.Regexp) bool {
	for _, sub := range re.Sub {
		if sub == group || holds(sub, group) {
			return true
		}
	}
	return false
}

// canBegin, canEnd and canMatch report whether a text that re matches can
// begin with, end with or hold the character.
func canBegin(re *syntax.Regexp, r rune) bool { return reaches(re, r, 1) }
func canEnd(re *syntax.Regexp, r rune) bool   { return reaches(re, r, -1) }
func canMatch(re *syntax.Regexp, r rune) bool { return reaches(re, r, 0) }

// reaches walks from the front (way 1), from the back (-1) or over all (0).
func reaches(re *syntax.Regexp, r rune, way int) bool {
	switch re.Op {
	case syntax.OpLiteral:
		switch {
		case len(re.Rune) == 0:
			return false
		case way > 0:
			return re.Rune[0] == r
		case way < 0:
			return re.Rune[len(re.Rune)-1] == r
		}
		return slices.Contains(re.Rune, r)
	case syntax.OpCharClass:
		for i := 0; i+1 < len(re.Rune); i += 2 {
			if re.Rune[i] <= r && r <= re.Rune[i+1] {
				return true
			}
		}
		return false
	case syntax.OpAnyChar, syntax.OpAnyCharNotNL:
		return true
	case syntax.OpConcat:
		subs := slices.Clone(re.Sub)
		if way < 0 {
			slices.Reverse(subs)
		}
		for _, sub := range subs {
			if reaches(sub, r, way) {
				return true
			}
			if way != 0 && !optional(sub) && !blank(sub) {
				return false
			}
		}
		return false
	}
	return slices.ContainsFunc(re.Sub, func(sub *syntax.Regexp) bool { return reaches(sub, r, way) })
}

// blank reports whether re matches blanks only: a sign may stand beyond them.
func blank(re *syntax.Regexp) bool {
	return re.Op == syntax.OpLiteral && strings.TrimSpace(string(re.Rune)) == ""
}

// optional reports whether re matches the empty text too.
func optional(re *syntax.Regexp) bool {
	switch re.Op {
	case syntax.OpQuest, syntax.OpStar, syntax.OpEmptyMatch, syntax.OpBeginLine, syntax.OpEndLine, syntax.OpBeginText,
		syntax.OpEndText, syntax.OpWordBoundary, syntax.OpNoWordBoundary:
		return true
	case syntax.OpRepeat:
		return re.Min == 0 || optional(re.Sub[0])
	case syntax.OpCapture, syntax.OpPlus:
		return optional(re.Sub[0])
	case syntax.OpAlternate:
		return slices.ContainsFunc(re.Sub, optional)
	case syntax.OpConcat:
		return !slices.ContainsFunc(re.Sub, func(sub *syntax.Regexp) bool { return !optional(sub) })
	}
	return false
}
