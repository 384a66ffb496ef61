package protocol

import "tenthmark/calc/decimal"

// readNumber reads digits with at most one decimal mark (point or comma, the comma
// never groups thousands), the last of them perhaps in brackets: "123.5[6]" has one
// digit that is not verified. It gives how many bytes it took, 0 when s does not begin
// with a number: nothing is taken in part.
func (f *Frame) readNumber(s []byte) int {
	i, mark := 0, -1
	for ; i < len(s); i++ {
		c := s[i]
		if c-'0' <= 9 {
			continue
		}
		if c != '.' && c != ',' || mark >= 0 {
			break
		}
		mark = i
	}
	f.digits, f.UnverifiedDigits = s[:i], 0
	count := i
	if mark >= 0 {
		count--
		if s[mark] == ',' {
			f.digits = append(f.store[:0], s[:i]...)
			f.digits[mark] = '.'
		}
	}
	if i < len(s) && s[i] == '[' {
		return f.readBracket(s, i, count)
	}
	if count == 0 || count > decimal.MaxDigits {
		return 0
	}
	return i
}

// readBracket reads "[6]" at s[i], the end of a number.
func (f *Frame) readBracket(s []byte, i, count int) int {
	f.digits = append(f.store[:0], f.digits...) // the brackets go, so the digits move together
	for i++; i < len(s) && isDigit(s[i]); i++ {
		f.UnverifiedDigits++
		f.digits = append(f.digits, s[i])
	}
	count += f.UnverifiedDigits
	if i == len(s) || s[i] != ']' || f.UnverifiedDigits == 0 || count > decimal.MaxDigits {
		return 0
	}
	return i + 1
}

// Scaled gives the number as an integer and its count of decimals: the value is
// unscaled × 10^-decimals in the frame's unit. It allocates nothing.
func (f *Frame) Scaled() (unscaled int64, decimals int) {
	for i, c := range f.digits {
		if c == '.' {
			decimals = len(f.digits) - i - 1
			continue
		}
		unscaled = unscaled*10 + int64(c-'0')
	}
	if f.Sign == '-' {
		unscaled = -unscaled
	}
	return unscaled, decimals
}
