package sheet

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// An index made of a real one's words in any order, with others between, from a
// stick that somebody hands over: it may be wrong in any way, but reading it
// neither panics nor leaves the folder, and the page about it is sound.
func TestIndexFromElsewhere(t *testing.T) {
	dir := mustWrite(t)
	secret := filepath.Join(filepath.Dir(dir), "0004-check-secret.json")
	if err := os.WriteFile(secret, []byte(`"the secret"`), 0o644); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(dir, indexName)
	whole, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	words := append(strings.Fields(string(whole)), "", "-1", "99999999999999999999", "\x1b[2J", "../0004-check-secret.json", secret,
		"..", "check", "\xff", "9223372036854775807", "0001-header-job.json", "2025-11-04T10:12:00.000+01:00")
	lines := strings.Split(string(whole), "\n")
	rapid.Check(t, func(t *rapid.T) {
		line := rapid.OneOf(rapid.SampledFrom(lines), rapid.Custom(func(t *rapid.T) string {
			return strings.Join(rapid.SliceOfN(rapid.SampledFrom(words), 0, 8).Draw(t, "words"), " ")
		}))
		text := strings.Join(rapid.SliceOfN(line, 0, 14).Draw(t, "lines"), "\n")
		if rapid.Bool().Draw(t, "head") {
			text = preamble + text
		}
		if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		r, _ := Open(dir)
		problems, sum := Check(dir)
		if len(problems) == 0 && text != string(whole) {
			t.Fatalf("passes for whole with %d entries: %q", sum.Entries, text)
		}
		for _, l := range r.Lines() {
			if b, err := r.Read(l); err == nil && strings.Contains(string(b), "the secret") {
				t.Fatal("the reader left the folder")
			}
			_ = l.Name()
		}
		card := Card(CardOf(r))
		if strings.Contains(card+Report(dir), "the secret") {
			t.Fatal("the reader left the folder")
		}
		if found, err := List(filepath.Dir(dir), Filter{}); err != nil || len(found) != 1 {
			t.Fatalf("listed %d, %v", len(found), err)
		}
	})
}
