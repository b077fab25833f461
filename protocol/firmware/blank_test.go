package firmware_test

import (
	"os/exec"
	"path/filepath"
	"testing"
)

// The worked blank board builds without a warning, in every shape of the core.
func TestBlankBoardBuilds(t *testing.T) {
	need(t, "gcc")
	for _, knobs := range [][]string{nil, {"-DGW_FIXED=1"}, {"-DGW_PID=1", "-DGW_CAPTURE=100"}, {"-DGW_RAMP=0", "-DGW_QUADRANTS=2"}} {
		args := append([]string{"-Icore", "-Iboards/blank", "-Os", "-o", filepath.Join(buildDir, "blank")}, warnings...)
		args = append(args, knobs...)
		args = append(args, glob(t, "core/*.c", "boards/blank/*.c")...)
		if msg, err := exec.Command("gcc", args...).CombinedOutput(); err != nil {
			t.Errorf("gcc %v: %v\n%s", knobs, err, msg)
		}
	}
}
