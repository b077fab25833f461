package family_test

import (
	"bytes"
	"slices"
	"testing"

	"gainwright/link/simrig"
	"gainwright/link/simrig/family"
)

// Every drawn rig is one that simrig takes, with the fault that it says and the
// expectation that goes with it.
func TestEveryDrawnRigIsTaken(t *testing.T) {
	faulty := 0
	for _, r := range family.Make(400, 5) {
		c, err := simrig.Parse(r.Name, r.Text)
		if err != nil {
			t.Fatalf("%v\n%s", err, r.Text)
		}
		if (r.Fault != "") != (c.Expect == "refused") || r.Fault != c.Cause || len(c.Faults) > 1 || len(c.Faults) == 1 && c.Faults[0].Kind != r.Fault {
			t.Errorf("%s: fault %q, expect %q, cause %q, faults %v", r.Name, r.Fault, c.Expect, c.Cause, c.Faults)
		}
		if r.Fault != "" {
			faulty++
			if !slices.Contains(simrig.FaultKinds(), r.Fault) {
				t.Errorf("%s: simrig has no fault %q", r.Name, r.Fault)
			}
		}
		// What the ranges promise (common practice, no source).
		if c.Motor.Ohms < 0.1 || c.Motor.Ohms > 20 || c.Friction.Forward.Static < 1.1*c.Friction.Forward.Coulomb*0.999 || c.Friction.Forward.Static > 1.8*c.Friction.Forward.Coulomb*1.001 {
			t.Errorf("%s: %g ohm, static over Coulomb friction %g", r.Name, c.Motor.Ohms, c.Friction.Forward.Static/c.Friction.Forward.Coulomb)
		}
	}
	if share := float64(faulty) / 400; share < family.FaultShare-0.07 || share > family.FaultShare+0.07 {
		t.Errorf("%.0f %% are faulty, drawn for are %.0f %%", 100*share, 100*family.FaultShare)
	}
}

// The same seed gives the same bytes, and a rig does not depend on how many are
// drawn after it.
func TestSameSeedSameFamily(t *testing.T) {
	a, b, other := family.Make(20, 3), family.Make(40, 3), family.Make(20, 4)
	same := 0
	for i := range a {
		if !bytes.Equal(a[i].Text, b[i].Text) {
			t.Errorf("rig %d depends on the number drawn", i)
		}
		if bytes.Equal(a[i].Text, other[i].Text) {
			same++
		}
	}
	if same > 0 {
		t.Errorf("%d rigs are the same for another seed", same)
	}
}
