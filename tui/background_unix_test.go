//go:build linux || darwin

package tui

import (
	"io"
	"os"
	"os/exec"
	"strings"
	"testing"

	"github.com/creack/pty"
)

// TestNobodyAsksForTheBackground starts this test program on a terminal that
// never answers and looks at what it wrote while it started. The question for
// the background colour (OSC 11, xterm control sequences) would keep it waiting
// for seconds.
func TestNobodyAsksForTheBackground(t *testing.T) {
	if os.Getenv("TUI_ONLY_START") != "" {
		return
	}
	cmd := exec.Command(os.Args[0], "-test.run", "TestNobodyAsksForTheBackground", "-test.v")
	cmd.Env = append(os.Environ(), "TUI_ONLY_START=1", "TERM=xterm-256color")
	term, err := pty.Start(cmd)
	if err != nil {
		t.Skip("no pseudo-terminal here:", err)
	}
	defer term.Close()
	wrote, _ := io.ReadAll(term) // ends with an error when the program does
	_ = cmd.Wait()
	if !strings.Contains(string(wrote), "PASS") {
		t.Fatalf("the program did not run: %q", wrote)
	}
	if strings.Contains(string(wrote), "]11;?") || strings.Contains(string(wrote), "]10;?") {
		t.Errorf("the terminal was asked for its colours: %q", wrote)
	}
}
