package protocol

import (
	"strconv"
	"unicode/utf8"
)

// AppendJSON appends the frame as one JSON object, as `tenthmark listen --json` prints
// it:
//
//	{"kind":"weight","id":"N","text":"123.56","value":"123.56","sign":"+","unit":"g",
//	 "stable":true,"plain":true,"unverified_digits":0,"raw":"…"}
//
// A status has "status", an error "code", a damaged line "damage"; "in_report" and
// "reply" stand where they are true. raw holds the exact bytes, those beyond ASCII as
// \u00XX.
func (f *Frame) AppendJSON(dst []byte) []byte {
	dst = append(dst, `{"kind":"`...)
	dst = append(dst, f.Kind.String()...)
	dst = append(dst, '"')
	switch f.Kind {
	case Weight:
		dst = f.appendWeight(dst)
	case Status:
		dst = appendField(dst, "status", f.Condition.String())
	case Error:
		dst = appendField(dst, "code", f.Code)
	case Damaged:
		dst = appendField(dst, "damage", f.Damage.String())
	}
	if f.InReport {
		dst = append(dst, `,"in_report":true`...)
	}
	if f.Reply {
		dst = append(dst, `,"reply":true`...)
	}
	if f.Dropped > 0 {
		dst = strconv.AppendInt(append(dst, `,"dropped_bytes":`...), int64(f.Dropped), 10)
	}
	dst = append(dst, `,"raw":`...)
	return append(AppendQuoted(dst, f.Raw), '}')
}

func (f *Frame) appendWeight(dst []byte) []byte {
	sign := ""
	if f.Sign != 0 {
		sign = string(rune(f.Sign))
	}
	dst = appendField(dst, "id", f.ID)
	dst = appendField(dst, "text", f.Text())
	dst = appendField(dst, "value", f.Value().String())
	dst = appendField(dst, "sign", sign)
	dst = appendField(dst, "unit", f.Unit)
	dst = strconv.AppendBool(append(dst, `,"stable":`...), f.Stable)
	dst = strconv.AppendBool(append(dst, `,"plain":`...), f.Plain)
	return strconv.AppendInt(append(dst, `,"unverified_digits":`...), int64(f.UnverifiedDigits), 10)
}

func appendField(dst []byte, name, value string) []byte {
	dst = append(append(append(dst, `,"`...), name...), `":`...)
	return AppendQuoted(dst, []byte(value))
}

// AppendQuoted appends bytes as a JSON string in which every byte is one character.
func AppendQuoted(dst, s []byte) []byte {
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
