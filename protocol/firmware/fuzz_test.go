package firmware_test

import (
	"fmt"
	"os/exec"
	"path/filepath"
	"testing"
)

// Inputs of a seeded generator through the fuzz target, with sanitizers. The
// target aborts where the output is on outside of motion, a cut byte leaves it
// on, or a line is too long. README.md says how to fuzz guided by coverage.
func TestSeededFuzz(t *testing.T) {
	need(t, "gcc")
	for _, variant := range []string{"float", "fixed"} {
		out := filepath.Join(buildDir, "fuzz-"+variant)
		args := append([]string{"-Icore", "-Ihost", "-DFUZZ_MAIN", "-o", out}, warnings...)
		args = append(args, variants[variant]...)
		args = append(args, glob(t, "core/*.c", "host/fuzz/*.c")...)
		if msg, err := exec.Command("gcc", args...).CombinedOutput(); err != nil {
			t.Fatalf("gcc: %v\n%s", err, msg)
		}
		msg, err := exec.Command(out, "-n", "4000", "7").CombinedOutput()
		if err != nil {
			t.Fatalf("%s: %v\n%s", variant, err, msg)
		}
		var driven int
		if _, err := fmt.Sscanf(string(msg), "driven %d", &driven); err != nil || driven < 1000 {
			t.Errorf("%s: %q: the inputs hardly ever drove the motor", variant, msg)
		}
	}
}
