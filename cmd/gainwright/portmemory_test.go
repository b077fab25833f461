package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gainwright/link/serialport"
)

// A board is remembered by the name of its port that stays, the newest first, and
// a file with nonsense in it is as good as none.
func TestPortsRememberTheirBoards(t *testing.T) {
	m := boardMemory{filepath.Join(t.TempDir(), "deep", "ports.json")}
	p := serialport.Info{Path: "/dev/ttyUSB7", VID: "0403", PID: "6001", Serial: "A1"}
	if w := m.words(p); w != "" {
		t.Errorf("before anything was seen: %q", w)
	}
	m.keep("/dev/ttyUSB9", "7A31-22")
	m.keep("/dev/ttyUSB9", "B2")
	m.keep("/dev/pts/4", "C3")
	if w := m.words(serialport.Info{Path: "/dev/ttyUSB9"}); !strings.HasPrefix(w, "board B2 was here on 20") {
		t.Errorf("remembered is %q", w)
	}
	if n := len(m.load()); n != 1 {
		t.Errorf("%d are kept, want 1: one a port, no pseudo-terminals", n)
	}
	for i := range seenMax + 20 {
		m.keep(fmt.Sprintf("/dev/ttyX%d", i), "x")
	}
	if n := len(m.load()); n != seenMax {
		t.Errorf("%d are kept, at most %d", n, seenMax)
	}
	if err := os.WriteFile(m.file, []byte("[{"), 0o644); err != nil {
		t.Fatal(err)
	}
	if w := m.words(p); w != "" {
		t.Errorf("from nonsense: %q", w)
	}
	boardMemory{}.keep("/dev/ttyUSB9", "B2") // no home: nothing happens
}
