package protocol

import (
	"strconv"
	"unicode/utf8"
)

// AppendJSON appends the frame as one JSON object, as `tenthmark listen --json` prints
// it. raw holds the exact bytes, those beyond ASCII as \u00XX.
func (f *Frame) AppendJSON(dst []byte) []byte {
	dst = append(dst, `{"kind":"`...)
	dst = append(dst, f.Kind.String()...)
	dst = append(dst, '"')
	switch f.Kind {
	case Weight:
		dst = f.appendWeight(dst)
	case Status:
		dst = append(append(append(dst, `,"status":"`...), f.Condition.String()...), '"')
	case Error:
		dst = append(dst, `,"code":`...)
		dst = appendRaw(dst, []byte(f.Code))
	case Damaged:
		dst = append(append(append(dst, `,"damage":"`...), f.Damage.String()...), '"')
	}
	if f.InReport {
		dst = append(dst, `,"in_report":true`...)
	}
	dst = append(dst, `,"raw":`...)
	return append(appendRaw(dst, f.Raw), '}')
}

func (f *Frame) appendWeight(dst []byte) []byte {
	sign := ""
	if f.Sign != 0 {
		sign = string(f.Sign)
	}
	for _, field := range [...]struct{ name, value string }{
		{"id", f.ID}, {"text", f.Text()}, {"value", f.Value().String()}, {"sign", sign}, {"unit", f.Unit},
	} {
		dst = append(append(append(dst, `,"`...), field.name...), `":`...)
		dst = appendRaw(dst, []byte(field.value))
	}
	dst = strconv.AppendBool(append(dst, `,"stable":`...), f.Stable)
	dst = strconv.AppendBool(append(dst, `,"plain":`...), f.Plain)
	return strconv.AppendInt(append(dst, `,"unverified_digits":`...), int64(f.UnverifiedDigits), 10)
}

// appendRaw appends bytes as a JSON string in which every byte is one character.
func appendRaw(dst, s []byte) []byte {
	const hex = "0123456789abcdef"
	dst = append(dst, '"')
	for _, b := range s {
		switch {
		case b == '"' || b == '\\':
			dst = append(dst, '\\', b)
		case b == '\r':
			dst = append(dst, `\r`...)
		case b == '\n':
			dst = append(dst, `\n`...)
		case b < 0x20 || b >= utf8.RuneSelf || b == 0x7F:
			dst = append(dst, '\\', 'u', '0', '0', hex[b>>4], hex[b&15])
		default:
			dst = append(dst, b)
		}
	}
	return append(dst, '"')
}
