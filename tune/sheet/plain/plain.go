// Package plain turns text that came from outside (a board, a rig file, a
// person, an old record) into text that may be shown, printed, put in a file
// name or in a page. It decides nothing else and imports only the standard
// library, so that every floor may use it.
//
// What it removes the power of: control characters and escape sequences (C0,
// DEL, C1), bytes that are not UTF-8, characters that have no shape of their
// own or turn the direction of writing round, piles of combining marks, path
// separators, and sheer length.
package plain

import (
	"fmt"
	"strings"
	"unicode"
	"unicode/utf8"
)

// marksMax is how many combining marks may follow one another. Two are enough
// for every written language in common use; a hundred draw over other lines.
const marksMax = 2

// Visible returns s on one line in at most max terminal columns, with every
// character that does not print written as an escape: \x1b for a control
// character, \xff for a byte that is not UTF-8, \u202e for any other. Line ends
// and tabs become \n, \r and \t. Text that is cut ends in "..", which counts
// towards max; max <= 0 sets no bound.
func Visible(s string, max int) string {
	return visible(s, max, false)
}

// Block is Visible for text of several lines: line feeds and tabs stay, a
// carriage return before a line feed goes, and nothing is cut. Text that needs
// no change comes back byte for byte, so a file that passed Clean is kept as
// it was.
func Block(s string) string {
	if Clean(s) {
		return s
	}
	return visible(strings.ReplaceAll(s, "\r\n", "\n"), 0, true)
}

// Clean reports whether s holds only printing characters, line ends and tabs,
// so that it may be stored and shown as it is.
func Clean(s string) bool {
	marks := 0
	for i, r := range s {
		if r == utf8.RuneError {
			if _, n := utf8.DecodeRuneInString(s[i:]); n == 1 {
				return false
			}
		}
		if r == '\n' || r == '\t' || (r == '\r' && strings.HasPrefix(s[i+1:], "\n")) {
			marks = 0
			continue
		}
		if marks = countMarks(marks, r); marks > marksMax {
			return false
		}
		if !unicode.IsPrint(r) && !isSpace(r) {
			return false
		}
	}
	return true
}

func visible(s string, max int, lines bool) string {
	var b strings.Builder
	width, marks := 0, 0
	cutAt, cutWidth := 0, 0 // the longest prefix that leaves room for the dots
	for i := 0; i < len(s); {
		r, n := utf8.DecodeRuneInString(s[i:])
		piece := ""
		marks = countMarks(marks, r)
		switch {
		case r == utf8.RuneError && n == 1:
			piece = fmt.Sprintf(`\x%02x`, s[i])
		case lines && (r == '\n' || r == '\t'):
			piece = s[i : i+n]
		case marks > marksMax:
			piece = escape(r)
		case isSpace(r):
			piece = " "
		case unicode.IsPrint(r):
			piece = s[i : i+n]
		default:
			piece = escape(r)
		}
		w := Width(piece)
		if max > 0 && width+w > max {
			return b.String()[:cutAt] + strings.Repeat(".", min(2, max-cutWidth))
		}
		b.WriteString(piece)
		width += w
		if width <= max-2 {
			cutAt, cutWidth = b.Len(), width
		}
		i += n
	}
	return b.String()
}

// isSpace reports the blanks other than the ASCII one that people paste in
// from documents; they show as a plain blank.
func isSpace(r rune) bool {
	return r == 0x00a0 || r == 0x2009 || r == 0x202f
}

func countMarks(marks int, r rune) int {
	if unicode.In(r, unicode.Mn, unicode.Me) {
		return marks + 1
	}
	return 0
}

func escape(r rune) string {
	switch {
	case r == '\n':
		return `\n`
	case r == '\r':
		return `\r`
	case r == '\t':
		return `\t`
	case r < 0x20 || r == 0x7f:
		return fmt.Sprintf(`\x%02x`, r)
	case r <= 0xffff:
		return fmt.Sprintf(`\u%04x`, r)
	default:
		return fmt.Sprintf(`\U%08x`, r)
	}
}

// Width returns the terminal columns that s takes: none for a combining mark,
// two for the wide characters of East Asian scripts and pictures, one for
// every other. It is meant for text that has passed Visible.
func Width(s string) int {
	w := 0
	for _, r := range s {
		switch {
		case r < 0x300:
			w++
		case unicode.In(r, unicode.Mn, unicode.Me):
		case wide(r):
			w += 2
		default:
			w++
		}
	}
	return w
}

// wide holds the blocks that Unicode Standard Annex 11 gives as Wide or
// Fullwidth, joined where the gaps between them are unassigned (*from memory*).
func wide(r rune) bool {
	switch {
	case r >= 0x1100 && r <= 0x115f, // Hangul leading consonants
		r >= 0x2e80 && r <= 0xa4cf && r != 0x303f, // CJK, kana, Yi
		r >= 0xa960 && r <= 0xa97f,
		r >= 0xac00 && r <= 0xd7a3, // Hangul syllables
		r >= 0xf900 && r <= 0xfaff,
		r >= 0xfe30 && r <= 0xfe6f,
		r >= 0xff00 && r <= 0xff60,
		r >= 0xffe0 && r <= 0xffe6,
		r >= 0x1f300 && r <= 0x1faff, // pictures
		r >= 0x20000 && r <= 0x3fffd:
		return true
	}
	return false
}

// FileName returns a part of a file name made from s: lower-case ASCII letters,
// digits, '.', '-' and '_', at most max bytes, never empty, never beginning or
// ending in a point or a dash. Everything else becomes one dash, so no text can
// climb out of its folder, and folders copied to a disk that does not tell
// upper case from lower stay apart.
func FileName(s string, max int) string {
	var b strings.Builder
	dash := false
	for i := 0; i < len(s) && b.Len() < max; i++ {
		c := s[i]
		if c >= 'A' && c <= 'Z' {
			c += 'a' - 'A'
		}
		ok := c >= 'a' && c <= 'z' || c >= '0' && c <= '9' || c == '.' || c == '_'
		if !ok {
			dash = true
			continue
		}
		if c == '.' && strings.HasSuffix(b.String(), ".") {
			continue
		}
		if dash && b.Len() > 0 {
			b.WriteByte('-')
		}
		dash = false
		b.WriteByte(c)
	}
	out := b.String()
	if len(out) > max {
		out = out[:max]
	}
	if out = strings.Trim(out, ".-"); out == "" {
		return "x"
	}
	return out
}
