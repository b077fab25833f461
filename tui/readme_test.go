package tui

import (
	"os"
	"regexp"
	"strings"
	"testing"
)

var (
	sequences = regexp.MustCompile("\x1b\\[[0-9;]*m")
	pictures  = regexp.MustCompile("(?s)<!-- screen ([a-z-]+) -->\n```\n(.*?)```\n")
)

// TestPicturesOfTheREADME: the screens that README shows are those that are drawn,
// from the fixtures; -update draws them anew.
func TestPicturesOfTheREADME(t *testing.T) {
	const file = "../README.md"
	data, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	drawn := map[string]string{}
	for _, st := range stages() {
		rows := strings.Split(sequences.ReplaceAllString(screenAt(st, Look{}).Draw(st.view, 80, 24), ""), "\n")
		for i := range rows {
			rows[i] = strings.TrimRight(rows[i], " ")
		}
		drawn[st.name] = strings.Join(rows, "\n") + "\n"
	}
	shown := 0
	text := pictures.ReplaceAllStringFunc(string(data), func(block string) string {
		shown++
		name := pictures.FindStringSubmatch(block)[1]
		if drawn[name] == "" {
			t.Errorf("README shows %q, which is no screen", name)
			return block
		}
		return "<!-- screen " + name + " -->\n```\n" + drawn[name] + "```\n"
	})
	if shown < 4 {
		t.Errorf("README shows %d screens", shown)
	}
	if text == string(data) {
		return
	}
	if !*update {
		t.Error("pictures in README differ from the screens: go test ./tui -update")
	} else if err := os.WriteFile(file, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
}
