package tap

import (
	"bytes"
	"strings"
	"unicode/utf8"
)

const (
	esc = 0x1B
	bel = 0x07
)

// Bracketed paste, as xterm's control sequences define it (mode 2004).
var (
	pasteStart = []byte("\x1b[200~")
	pasteEnd   = []byte("\x1b[201~")
)

// cutPaste splits what was read within a paste at its end.
func cutPaste(chunk []byte) (part, rest []byte, pasting bool) {
	part, rest, found := bytes.Cut(chunk, pasteEnd)
	return part, rest, !found
}

// isStop reports whether a key is a stop key, also with Alt (ESC before it).
func isStop(k []byte) bool {
	if len(k) == 2 && k[0] == esc {
		k = k[1:]
	}
	return len(k) == 1 && strings.IndexByte(stopKeys, k[0]) >= 0
}

// printable counts the characters that a person could have typed as text.
func printable(b []byte) int {
	n := 0
	for len(b) > 0 {
		size, _ := keyLen(b)
		if b[0] >= 0x20 && b[0] != 0x7F {
			n++
		}
		b = b[size:]
	}
	return n
}

// keyLen returns how many bytes at the start of b are one key (b is not empty),
// and false if they are not a key but an answer of the terminal to a question.
// Sequences are those of ECMA-48 (CSI, and strings ended by ST or BEL) and of
// the VT series (SS3). A sequence never reaches over the end of a read: half a
// sequence counts as a key, because an unknown key stops and a swallowed one
// would not.
func keyLen(b []byte) (n int, isKey bool) {
	if b[0] != esc {
		_, size := utf8.DecodeRune(b)
		return size, true
	}
	if len(b) == 1 {
		return 1, true // the escape key itself
	}
	switch b[1] {
	case '[':
		return csiLen(b), true
	case 'O':
		return min(3, len(b)), true
	case ']', 'P', '_', '^', 'X':
		if n := stringLen(b); n > 0 {
			return n, false
		}
		return 2, true
	}
	n, isKey = keyLen(b[1:]) // with Alt
	return 1 + n, isKey
}

// csiLen measures ESC [ parameters intermediates final.
func csiLen(b []byte) int {
	if len(b) > 2 && b[2] == '[' { // function keys of the Linux console: ESC [ [ A
		return min(4, len(b))
	}
	for i := 2; i < len(b); i++ {
		if b[i] >= 0x40 && b[i] <= 0x7E {
			return i + 1
		}
		if b[i] < 0x20 || b[i] > 0x7E {
			return i // not a sequence after all; the byte stands for itself
		}
	}
	return len(b)
}

// stringLen measures ESC ] … BEL and its kin, 0 if the end is not in b.
func stringLen(b []byte) int {
	for i := 2; i < len(b); i++ {
		switch {
		case b[i] == bel:
			return i + 1
		case b[i] == esc && i+1 < len(b) && b[i+1] == '\\':
			return i + 2
		}
	}
	return 0
}
