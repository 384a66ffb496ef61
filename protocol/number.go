package protocol

import "tenthmark/calc/decimal"

// readNumber reads digits with at most one decimal mark (point or comma, the comma
// never groups thousands), the last of them perhaps in brackets: "123.5[6]" has one
// digit that is not verified. It gives how many bytes it took, 0 when s does not begin
// with a number. A zero of the count is the only failure: nothing is taken in part.
func (f *Frame) readNumber(s []byte) int {
	f.digits, f.unscaled, f.decimals, f.UnverifiedDigits = f.digits[:0], 0, 0, 0
	i, mark, count := 0, false, 0
	for ; i < len(s); i++ {
		c := s[i]
		if c-'0' <= 9 {
			count++
			if count > decimal.MaxDigits {
				return 0
			}
			f.unscaled = f.unscaled*10 + int64(c-'0')
			if mark {
				f.decimals++
			}
		} else if (c == '.' || c == ',') && !mark {
			c, mark = '.', true
		} else {
			break
		}
		f.digits = append(f.digits, c)
	}
	if i < len(s) && s[i] == '[' {
		return f.readBracket(s, i, count, mark)
	}
	if count == 0 {
		return 0
	}
	return i
}

// readBracket reads "[6]" at s[i], the end of a number.
func (f *Frame) readBracket(s []byte, i, count int, mark bool) int {
	for i++; i < len(s) && isDigit(s[i]); i++ {
		if count++; count > decimal.MaxDigits {
			return 0
		}
		f.UnverifiedDigits++
		f.unscaled = f.unscaled*10 + int64(s[i]-'0')
		if mark {
			f.decimals++
		}
		f.digits = append(f.digits, s[i])
	}
	if i == len(s) || s[i] != ']' || f.UnverifiedDigits == 0 {
		return 0
	}
	return i + 1
}
