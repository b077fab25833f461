package sheet

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"unicode"
	"unicode/utf8"
)

// Known returns a pointer to x, or nil for a NaN or an infinity, so that a
// value that is not known is written as null and never as 0.
func Known(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// encode returns v as indented JSON whose every character prints. Such
// characters stand only inside JSON strings, where \u says the same.
func encode(v any) ([]byte, error) {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	if err := e.Encode(v); err != nil {
		return nil, err
	}
	return escapeUnprintable(b.Bytes()), nil
}

func escapeUnprintable(in []byte) []byte {
	out := make([]byte, 0, len(in))
	for i := 0; i < len(in); {
		r, n := utf8.DecodeRune(in[i:])
		switch {
		case r == '\n' || unicode.IsPrint(r):
			out = append(out, in[i:i+n]...)
		case r > 0xffff:
			r -= 0x10000
			out = fmt.Appendf(out, `\u%04x\u%04x`, 0xd800+(r>>10), 0xdc00+(r&0x3ff))
		default:
			out = fmt.Appendf(out, `\u%04x`, r)
		}
		i += n
	}
	return out
}
