package plain

import (
	"fmt"
	"unicode"
	"unicode/utf8"
)

// JSON returns JSON text whose every character prints. Characters that do not
// stand only inside JSON strings, where \u says the same.
func JSON(in []byte) []byte {
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
