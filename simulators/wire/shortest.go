package wire

import (
	"fmt"
	"regexp/syntax"
	"strings"
)

// shortest writes a shortest text that a pattern without groups of meaning
// matches; of a class of characters it prefers a blank, then a letter or digit
// that can be printed.
func shortest(re *syntax.Regexp) (string, error) {
	switch re.Op {
	case syntax.OpEmptyMatch, syntax.OpBeginText, syntax.OpEndText, syntax.OpBeginLine, syntax.OpEndLine,
		syntax.OpWordBoundary, syntax.OpNoWordBoundary, syntax.OpQuest, syntax.OpStar:
		return "", nil
	case syntax.OpLiteral:
		return string(re.Rune), nil
	case syntax.OpAnyChar, syntax.OpAnyCharNotNL:
		return " ", nil
	case syntax.OpCharClass:
		return fromClass(re.Rune)
	case syntax.OpCapture, syntax.OpPlus:
		return shortest(re.Sub[0])
	case syntax.OpRepeat:
		s, err := shortest(re.Sub[0])
		return strings.Repeat(s, re.Min), err
	case syntax.OpConcat:
		var out strings.Builder
		for _, sub := range re.Sub {
			s, err := shortest(sub)
			if err != nil {
				return "", err
			}
			out.WriteString(s)
		}
		return out.String(), nil
	case syntax.OpAlternate:
		best, err := shortest(re.Sub[0])
		for _, sub := range re.Sub[1:] {
			if s, e := shortest(sub); e == nil && (err != nil || len(s) < len(best)) {
				best, err = s, nil
			}
		}
		return best, err
	}
	return "", fmt.Errorf("the simulator cannot write %q", re)
}

// fromClass picks a character from pairs of lowest and highest.
func fromClass(pairs []rune) (string, error) {
	has := func(c rune) bool {
		for i := 0; i+1 < len(pairs); i += 2 {
			if pairs[i] <= c && c <= pairs[i+1] {
				return true
			}
		}
		return false
	}
	for _, c := range " +0A" {
		if has(c) {
			return string(c), nil
		}
	}
	for c := rune('!'); c <= '~'; c++ {
		if has(c) {
			return string(c), nil
		}
	}
	if len(pairs) == 0 {
		return "", fmt.Errorf("a class of no characters")
	}
	return string(pairs[0]), nil
}
