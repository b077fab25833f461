package tui

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

var update = flag.Bool("update", false, "write the golden screens anew")

// show prints one stage as it looks: go test ./tui -run TestGolden -show running -v
var show = flag.String("show", "", "print this stage at 80x24")

var looks = []struct {
	name string
	look Look
}{
	{"colour", Look{}},
	{"no-colour", Look{NoColour: true}},
	{"ascii", Look{Dumb: true}},
}

// large holds the stages that are also kept at the larger sizes: one for each
// page.
var large = map[string]bool{
	"ports": true, "as-found": true, "path": true, "checks": true, "plan": true, "count-down": true, "running": true, "model": true,
	"design": true, "push-word": true, "verify": true, "card": true, "tripped": true, "help": true, "words": true, "link-lost": true, "interlocks": true,
	"loop": true, "earlier": true, "alarms": true, "refused": true, "experiments": true,
}

// TestGolden holds every screen against the kept one. The pictures were looked
// at when they were written; a change shows as a diff and is to be looked at
// before -update.
func TestGolden(t *testing.T) {
	all := stages()
	if *show != "" {
		for _, st := range all {
			if st.name == *show {
				fmt.Println(screenAt(st, Look{}).Draw(st.view, 80, 24))
			}
		}
	}
	for _, l := range looks {
		for _, size := range [][2]int{{80, 24}, {120, 40}, {200, 50}} {
			name := fmt.Sprintf("%s-%dx%d", l.name, size[0], size[1])
			t.Run(name, func(t *testing.T) {
				var b strings.Builder
				for _, st := range all {
					if size[0] > 80 && !large[st.name] {
						continue
					}
					fmt.Fprintf(&b, "==== %s\n%s\n", st.name, screenAt(st, l.look).Draw(st.view, size[0], size[1]))
				}
				file := filepath.Join("testdata", "golden", name+".txt")
				if *update {
					if err := os.MkdirAll(filepath.Dir(file), 0o755); err != nil {
						t.Fatal(err)
					}
					if err := os.WriteFile(file, []byte(b.String()), 0o644); err != nil {
						t.Fatal(err)
					}
				}
				want, err := os.ReadFile(file)
				if err != nil {
					t.Fatal(err)
				}
				if d := cmp.Diff(strings.Split(string(want), "\n"), strings.Split(b.String(), "\n")); d != "" {
					t.Errorf("screens differ from %s (-want +got):\n%s", file, d)
				}
			})
		}
	}
}

// TestEveryPageIsKept fails when a page has no golden screen at every size.
func TestEveryPageIsKept(t *testing.T) {
	seen := map[Page]bool{}
	for _, st := range stages() {
		if large[st.name] {
			seen[screenAt(st, Look{}).page(st.view)] = true
		}
	}
	for p := PagePath; p < pageCount; p++ {
		if !seen[p] {
			t.Errorf("no stage shows the page %q", p)
		}
	}
}
