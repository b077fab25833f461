package bench

import (
	"path/filepath"
	"testing"

	"gainwright/safety"
)

// Where the rig file asks for it, the stop key brings the shaft to rest under
// power: the output stays on for longer than a cut lets it. A second cause makes
// it a cut.
func TestARampIsNotOvertakenByACut(t *testing.T) {
	for _, c := range faultCases() {
		if c.style != safety.StopRamp {
			continue
		}
		row, err := c.run(trialRig(t), filepath.Join(t.TempDir(), "sheet"))
		if err != nil {
			t.Fatal(err)
		}
		if row.Bad != "" || row.OffMS == nil {
			t.Fatalf("%+v", row)
		}
		if c.name == "stop key, ramp and cut" && (*row.OffMS < 100 || *row.RestMS > *row.OffMS+100) {
			t.Errorf("off after %v ms, at rest after %v ms: no ramp", *row.OffMS, *row.RestMS)
		}
		if c.name != "stop key, ramp and cut" && *row.OffMS > 300 {
			t.Errorf("%s: off after %v ms, longer than the board's timeout", c.name, *row.OffMS)
		}
	}
}
