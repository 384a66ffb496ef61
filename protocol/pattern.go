package protocol

import (
	"bytes"
	"errors"
	"fmt"
	"regexp"
	"regexp/syntax"
	"slices"
	"strings"
)

// Pattern understands the lines of balances that print something else: a regular
// expression (Go's syntax) with the named groups
//
//	value    the number (needed); point or comma as decimal mark, brackets as sent
//	sign     + or - or a blank
//	unit     as sent
//	stable   the mark for "at rest", and nothing else: the load is at rest when this
//	         group takes part in the match and holds something
//
// Without a group stable a shown unit means at rest; without both, every match does.
// A line that does not match is read as status, error, blank display or text.
//
// A match that cuts a number in two, or that leaves a minus before the value out, is
// no weight, whatever the expression says.
type Pattern struct {
	re                        *regexp.Regexp
	sign, value, unit, stable int
}

// ErrPattern marks a pattern that cannot be used.
var ErrPattern = errors.New("the pattern cannot be used")

var patternGroups = []string{"sign", "value", "unit", "stable"}

// NewPattern checks and compiles a pattern. Its errors say what to change.
func NewPattern(expression string) (*Pattern, error) {
	re, err := regexp.Compile(expression)
	if err != nil {
		return nil, fmt.Errorf("%w: %s", ErrPattern, strings.TrimPrefix(err.Error(), "error parsing regexp: "))
	}
	if err := checkGroups(re.SubexpNames()); err != nil {
		return nil, err
	}
	p := &Pattern{re: re, sign: re.SubexpIndex("sign"), value: re.SubexpIndex("value"), unit: re.SubexpIndex("unit"), stable: re.SubexpIndex("stable")}
	switch {
	case p.value < 0:
		return nil, fmt.Errorf("%w: there is no group (?P<value>…) for the number", ErrPattern)
	case re.MatchString(""):
		return nil, fmt.Errorf("%w: it matches an empty line; let the group value demand a digit, as in (?P<value>[0-9]+[.][0-9]+)", ErrPattern)
	}
	if err := checkStable(expression); err != nil {
		return nil, err
	}
	return p, nil
}

func checkGroups(names []string) error {
	seen := map[string]bool{}
	for _, name := range names {
		switch {
		case name == "":
		case !slices.Contains(patternGroups, name):
			return fmt.Errorf("%w: the group %q is none of sign, value, unit and stable", ErrPattern, name)
		case seen[name]:
			return fmt.Errorf("%w: the group %q is there twice", ErrPattern, name)
		}
		seen[name] = true
	}
	return nil
}

// checkStable refuses a group stable that holds the mark of either state, such as
// (?P<stable>[SD]): it would call every line stable.
func checkStable(expression string) error {
	tree, err := syntax.Parse(expression, syntax.Perl)
	if err != nil {
		return fmt.Errorf("%w: %w", ErrPattern, err)
	}
	group := findGroup(tree, "stable")
	if group == nil || !matchesSeveral(group.Sub[0]) {
		return nil
	}
	return fmt.Errorf("%w: the group stable matches different marks, so that every line would count as stable; put only the mark for \"at rest\" into it, as in (?:(?P<stable>S)|D)", ErrPattern)
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

// matchesSeveral says whether re can match two different texts, blanks aside.
func matchesSeveral(re *syntax.Regexp) bool {
	switch re.Op {
	case syntax.OpCharClass:
		return severalRunes(re.Rune)
	case syntax.OpAlternate, syntax.OpAnyChar, syntax.OpAnyCharNotNL:
		return true
	}
	return slices.ContainsFunc(re.Sub, matchesSeveral)
}

// severalRunes: classes of blanks, and both cases of one letter, count as one.
func severalRunes(ranges []rune) bool {
	var first rune
	for i := 0; i < len(ranges); i += 2 {
		if ranges[i+1]-ranges[i] > 32 {
			return true
		}
		for r := ranges[i]; r <= ranges[i+1]; r++ {
			folded := []rune(strings.ToLower(string(r)))[0]
			switch {
			case strings.ContainsRune(" \t\n\v\f\r", r):
			case first == 0:
				first = folded
			case folded != first:
				return true
			}
		}
	}
	return false
}

func (p *Pattern) parse(f *Frame) {
	f.noNumber()
	m := p.re.FindSubmatchIndex(f.line)
	if m == nil || !p.weight(f, m) {
		f.noNumber()
		f.parseSpecial(f.line)
	}
}

// weight fills the frame from a match.
func (p *Pattern) weight(f *Frame, m []int) bool {
	group := func(i int) []byte {
		if i < 0 || m[2*i] < 0 {
			return nil
		}
		return f.line[m[2*i]:m[2*i+1]]
	}
	value := bytes.TrimSpace(group(p.value))
	sign := bytes.TrimSpace(group(p.sign))
	if len(sign) == 0 && len(value) > 0 && isSign(value[0]) {
		sign, value = value[:1], bytes.TrimLeft(value[1:], " ")
	}
	unit := bytes.TrimSpace(group(p.unit))
	switch {
	case len(sign) > 1 || len(sign) == 1 && !isSign(sign[0]):
		return false
	case cutsNumber(f.line, m[2*p.value], m[2*p.value+1], len(sign) > 0):
		return false
	case len(value) == 0 || f.readNumber(value) != len(value) || !isUnit(unit):
		return false
	}
	f.Kind, f.Unit = Weight, intern(unit)
	if len(sign) == 1 {
		f.Sign = sign[0]
	}
	f.Stable = p.atRest(f, group(p.stable))
	f.Plain = isGrams(f.Unit)
	return true
}

func (p *Pattern) atRest(f *Frame, mark []byte) bool {
	if p.stable >= 0 {
		return len(mark) > 0
	}
	return p.unit < 0 || f.Unit != ""
}

// cutsNumber says whether the value, at line[from:to], is only a part of what stands
// there: digits go on before or after it, or a minus before it was left out.
func cutsNumber(line []byte, from, to int, signed bool) bool {
	if to < len(line) && isNumeral(line[to]) {
		return true
	}
	if from > 0 && isNumeral(line[from-1]) {
		return true
	}
	before := bytes.TrimRight(line[:from], " ")
	return !signed && len(before) > 0 && before[len(before)-1] == '-'
}

func isNumeral(c byte) bool { return isDigit(c) || c == '.' || c == ',' }
