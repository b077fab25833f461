package plain_test

import (
	"strings"
	"testing"
	"unicode"
	"unicode/utf8"

	"gainwright/tune/sheet/plain"
	"pgregory.net/rapid"
)

func TestVisible(t *testing.T) {
	tests := []struct {
		name, in string
		max      int
		want     string
	}{
		{"plain text stays", "PUMP-3 (24 V)", 0, "PUMP-3 (24 V)"},
		{"other scripts stay", "Prüfstand 3 µm 試験", 0, "Prüfstand 3 µm 試験"},
		// ECMA-48: ESC is 1/11, CSI in its 8-bit form is 9/11.
		{"escape sequence", "\x1b[2J\x1b]0;x\x07", 0, `\x1b[2J\x1b]0;x\x07`},
		{"8-bit control", "a\u009b31mb", 0, `a\u009b31mb`},
		{"bytes that are not UTF-8", "a\xff\xc3b", 0, `a\xff\xc3b`},
		{"line ends", "a\r\nb\tc", 0, `a\r\nb\tc`},
		{"writing direction", "a\u202eb", 0, `a\u202eb`},
		{"tag characters", "a\U000e0041b", 0, `a\U000e0041b`},
		{"pasted blanks", "24\u00a0V", 0, "24 V"},
		{"pile of marks", "a\u0301\u0302\u0303b", 0, "a\u0301\u0302\\u0303b"},
		{"cut", "abcdefgh", 6, "abcd.."},
		{"fits exactly", "abcdef", 6, "abcdef"},
		{"an escape is never cut in two", "abc\x1bdef", 6, "abc.."},
		{"wide characters count two", "試験試験", 6, "試験.."},
		{"no room for anything", "abc", 1, "."},
		{"empty", "", 5, ""},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			if got := plain.Visible(tt.in, tt.max); got != tt.want {
				t.Errorf("Visible(%q, %d) = %q, want %q", tt.in, tt.max, got, tt.want)
			}
		})
	}
}

// Whatever comes in, nothing that steers a terminal goes out, and never more
// columns than asked for.
func TestVisibleNeverSteers(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		in := string(rapid.SliceOf(rapid.Byte()).Draw(t, "bytes")) + rapid.String().Draw(t, "text")
		max := rapid.IntRange(1, 40).Draw(t, "max")
		for _, out := range []string{plain.Visible(in, max), plain.Visible(in, 0)} {
			if !utf8.ValidString(out) {
				t.Fatalf("not UTF-8: %q", out)
			}
			for _, r := range out {
				if !unicode.IsPrint(r) {
					t.Fatalf("%U in %q", r, out)
				}
			}
		}
		if w := plain.Width(plain.Visible(in, max)); w > max {
			t.Fatalf("%d columns, at most %d", w, max)
		}
		if block := plain.Block(in); !plain.Clean(block) {
			t.Fatalf("Block left something in %q", block)
		}
	})
}

func TestBlockKeepsCleanText(t *testing.T) {
	rig := "# rig\r\nname = \"PUMP-3\"\r\n\tvolts = 24\n"
	if got := plain.Block(rig); got != rig {
		t.Errorf("clean text changed to %q", got)
	}
	if got, want := plain.Block("a\r\nb\x1b[0m\n"), "a\nb\\x1b[0m\n"; got != want {
		t.Errorf("Block = %q, want %q", got, want)
	}
}

func TestFileName(t *testing.T) {
	tests := []struct {
		name, in string
		max      int
		want     string
	}{
		{"lower case", "PUMP-3", 40, "pump-3"},
		{"climbing", "../../etc/passwd", 40, "etc-passwd"},
		{"other separators", `C:\windows\system32`, 40, "c-windows-system32"},
		{"nothing left", "../..", 40, "x"},
		{"hidden", ".profile", 40, "profile"},
		{"control characters", "a\x00\x1b[2Jb", 40, "a-2jb"},
		{"not ASCII", "Prüfstand", 40, "pr-fstand"},
		{"long", strings.Repeat("a", 10_000), 40, strings.Repeat("a", 40)},
		{"points", "a....b", 40, "a.b"},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			got := plain.FileName(tt.in, tt.max)
			if got != tt.want {
				t.Errorf("FileName(%q) = %q, want %q", tt.in, got, tt.want)
			}
		})
	}
}
