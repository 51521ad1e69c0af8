package evaluate

import (
	"fmt"
	"strconv"
)

// A formula is
//
//	sum    = term { ("+" | "-") term }
//	term   = factor { ("*" | "/") factor }
//	factor = "-" factor | atom [ "^" digit ]
//	atom   = number | name | function "(" name ")" | "(" sum ")"
//
// Names are those of the catalogue and of the rule's numbers; functions are
// those of lookups, whose one argument is a number of the rule that is a time.

// maxFormula bounds the length of a formula, and so the depth of its tree.
const maxFormula = 500

// node is one part of a formula; pos is its offset in the text.
type node struct {
	op          byte // 'n' literal, 'q' quantity, 'k' number of the rule, 'f' function, '+', '-', '*', '/', '^', '~' negation
	pos         int
	literal     float64
	name        string // quantity, number or function
	arg         string // function: the number that is its time
	left, right *node
	exponent    int
}

// formulaError is what is wrong with a formula, and at which offset.
type formulaError struct {
	pos       int
	what, fix string
}

func (e *formulaError) Error() string { return e.what }

type parser struct {
	text string
	at   int
}

// parseFormula parses a formula without looking its names up.
func parseFormula(text string) (*node, *formulaError) {
	if len(text) > maxFormula {
		return nil, &formulaError{0, fmt.Sprintf("the formula is longer than %d characters", maxFormula), "split the clause"}
	}
	p := &parser{text: text}
	n, err := p.sum()
	if err != nil {
		return nil, err
	}
	if c := p.peek(); c != 0 {
		return nil, &formulaError{p.at, fmt.Sprintf("%q is not expected here", string(c)), "write an operator (+ - * / ^) between names"}
	}
	return n, nil
}

// peek skips blanks and returns the next byte, 0 at the end.
func (p *parser) peek() byte {
	for p.at < len(p.text) && (p.text[p.at] == ' ' || p.text[p.at] == '\t' || p.text[p.at] == '\n') {
		p.at++
	}
	if p.at == len(p.text) {
		return 0
	}
	return p.text[p.at]
}

func (p *parser) sum() (*node, *formulaError)  { return p.row(p.term, '+', '-') }
func (p *parser) term() (*node, *formulaError) { return p.row(p.factor, '*', '/') }

// row parses operands of one rank, from left to right.
func (p *parser) row(operand func() (*node, *formulaError), a, b byte) (*node, *formulaError) {
	left, err := operand()
	for err == nil {
		op, pos := p.peek(), p.at
		if op != a && op != b {
			return left, nil
		}
		p.at++
		var right *node
		if right, err = operand(); err == nil {
			left = &node{op: op, pos: pos, left: left, right: right}
		}
	}
	return nil, err
}

func (p *parser) factor() (*node, *formulaError) {
	if p.peek() == '-' {
		pos := p.at
		p.at++
		n, err := p.factor()
		if err != nil {
			return nil, err
		}
		return &node{op: '~', pos: pos, left: n}, nil
	}
	n, err := p.atom()
	if err != nil || p.peek() != '^' {
		return n, err
	}
	pos := p.at
	p.at++
	c := p.peek()
	if c < '1' || c > '9' || p.at+1 < len(p.text) && isWord(p.text[p.at+1]) {
		return nil, &formulaError{p.at, "an exponent is one digit, 1 to 9", "write it so, such as depth^3"}
	}
	p.at++
	return &node{op: '^', pos: pos, left: n, exponent: int(c - '0')}, nil
}

func isLetter(c byte) bool { return c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c == '_' }
func isDigit(c byte) bool  { return c >= '0' && c <= '9' }
func isWord(c byte) bool   { return isLetter(c) || isDigit(c) || c == '.' }

// word takes letters, digits, underscores and points.
func (p *parser) word() string {
	from := p.at
	for p.at < len(p.text) && isWord(p.text[p.at]) {
		p.at++
	}
	return p.text[from:p.at]
}

func (p *parser) atom() (*node, *formulaError) {
	c, pos := p.peek(), p.at
	switch {
	case c == '(':
		p.at++
		n, err := p.sum()
		if err != nil {
			return nil, err
		}
		return n, p.expect(')')
	case isDigit(c):
		text := p.word()
		v, err := strconv.ParseFloat(text, 64)
		if err != nil {
			return nil, &formulaError{pos, fmt.Sprintf("%q is no plain number", text), "write digits with one point; a number with a unit belongs under numbers, with its source"}
		}
		return &node{op: 'n', pos: pos, literal: v}, nil
	case isLetter(c):
		name := p.word()
		if p.peek() != '(' {
			return &node{op: 'q', pos: pos, name: name}, nil
		}
		p.at++
		if !isLetter(p.peek()) {
			return nil, &formulaError{p.at, "a function takes the name of a time", "name a number of the rule, such as sag(day)"}
		}
		n := &node{op: 'f', pos: pos, name: name, arg: p.word()}
		return n, p.expect(')')
	case c == 0:
		return nil, &formulaError{p.at, "the formula ends too early", "complete it"}
	}
	return nil, &formulaError{pos, fmt.Sprintf("%q is not expected here", string(c)), "write a name, a number or a bracket"}
}

func (p *parser) expect(c byte) *formulaError {
	if p.peek() != c {
		return &formulaError{p.at, fmt.Sprintf("%q is missing here", string(c)), "close the bracket"}
	}
	p.at++
	return nil
}
