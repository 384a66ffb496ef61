package protocol

import (
	"fmt"
	"regexp"
	"slices"
)

// Pattern understands the lines of balances that print something else: a regular
// expression with the named groups value (needed), sign, unit and stable. A line that
// does not match is text. Without a group stable, a shown unit means stable; without
// both, every matching line does.
type Pattern struct {
	re                        *regexp.Regexp
	sign, value, unit, stable int
}

var patternGroups = []string{"sign", "value", "unit", "stable"}

// NewPattern checks and compiles a pattern.
func NewPattern(expression string) (*Pattern, error) {
	re, err := regexp.Compile(expression)
	if err != nil {
		return nil, fmt.Errorf("pattern: %w", err)
	}
	for _, name := range re.SubexpNames() {
		if name != "" && !slices.Contains(patternGroups, name) {
			return nil, fmt.Errorf("pattern: the group %q is none of sign, value, unit and stable", name)
		}
	}
	p := &Pattern{re: re, sign: re.SubexpIndex("sign"), value: re.SubexpIndex("value"), unit: re.SubexpIndex("unit"), stable: re.SubexpIndex("stable")}
	if p.value < 0 {
		return nil, fmt.Errorf("pattern: there is no group (?P<value>…) for the number")
	}
	return p, nil
}

func (p *Pattern) parse(f *Frame, line []byte) {
	m := p.re.FindSubmatchIndex(line)
	group := func(i int) []byte {
		if i < 0 || m[2*i] < 0 {
			return nil
		}
		return line[m[2*i]:m[2*i+1]]
	}
	if m == nil {
		f.Kind = Text
		return
	}
	value := group(p.value)
	if s := group(p.sign); len(s) == 1 && isSign(s[0]) {
		f.Sign = s[0]
	} else if len(value) > 0 && isSign(value[0]) {
		f.Sign, value = value[0], value[1:]
	}
	rest, ok := f.readDigits(value)
	if !ok || len(rest) > 0 || !isUnit(group(p.unit)) {
		f.Kind, f.digits = Text, f.digits[:0]
		return
	}
	f.Kind, f.Unit = Weight, intern(group(p.unit))
	switch {
	case p.stable >= 0:
		f.Stable = len(group(p.stable)) > 0
	case p.unit >= 0:
		f.Stable = f.Unit != ""
	default:
		f.Stable = true
	}
	_, f.Plain = gramShift[f.Unit]
}
