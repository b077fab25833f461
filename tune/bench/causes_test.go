package bench

import (
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/tune/job"
)

// Each cause has words and a number of its own: faults of the simulated rig are
// brought about in a run while the board keeps its limits to itself, so that it is
// the console that has to tell them apart.
func TestCausesAreToldApart(t *testing.T) {
	inject := func(kind string, value float64) func(*Virtual) {
		return func(v *Virtual) { v.rig.Inject(kind, value) }
	}
	for _, c := range []struct {
		name  string
		step  job.StepID
		do    func(*Virtual)
		want  safety.Code
		words string
		// figures are asked for where the cause is a quantity
		figures bool
	}{
		{"stalled", job.StepStep, inject(simrig.FaultStalled, 0), safety.CodeStalled, "stalled", true},
		{"turning but no counts", job.StepStep, inject(simrig.FaultDeadEncoder, 0), safety.CodeNoCounts, "turning but no counts", true},
		{"wrong way", job.StepStep, inject(simrig.FaultReversed, 0), safety.CodeWrongWay, "wrong way", true},
		{"encoder slip", job.StepStep, inject(simrig.FaultSlip, 0.6), safety.CodeSlip, "speed and voltage disagree", true},
		{"load coming loose", job.StepStep, inject(simrig.FaultLoose, 0.15), safety.CodeLoose, "load coming loose", true},
		{"supply folding back", job.StepStep, inject(simrig.FaultSupplyFolds, 0.2), safety.CodeBusLow, "supply folds back", true},
		{"pushed", job.StepStop, inject(simrig.FaultPushed, 0.15), safety.CodePushed, "beyond what the drive can do", true},
		{"board restarted", job.StepStep, inject(simrig.FaultRestarts, 0), safety.CodeRestarted, "restarted", false},
		{"telemetry stops", job.StepStep, inject(simrig.FaultMute, 0), safety.CodeStale, "no fresh telemetry", true},
		{"link lost", job.StepStep, func(v *Virtual) { v.s.core.LinkLost(v.Now(), "unplugged") }, safety.CodeLinkLost, "link lost", false},
		{"screen frozen", job.StepStep, func(v *Virtual) { v.op.attends = false }, safety.CodeLease, "screen is frozen", false},
	} {
		t.Run(c.name, func(t *testing.T) {
			v, j, _ := interlocked(t, job.StepFound, nil) // the model is known
			v.op.attends = true                           // frames reach the screen as long as it says so
			did := false
			var ended safety.RunEnded
			v.each = func() {
				if v.op.attends {
					v.s.core.Do(safety.Lease{At: v.Now()})
				}
				if e := v.s.lastEnd; did && e != nil && ended.Name == "" {
					ended = *e
				}
				st := v.s.core.State()
				if did || st.Phase != safety.Running || v.Now()-st.RunAt < 700*time.Millisecond {
					return
				}
				did, v.s.lastEnd = true, nil
				v.rig.Inject(simrig.FaultUnjudged, 0)
				c.do(v)
			}
			_ = j.Do(c.step)
			if ended.Name == "" && v.s.lastEnd != nil {
				ended = *v.s.lastEnd
			}
			got := ended.Cause
			ok := got.Code == c.want && strings.Contains(got.Words, c.words) ||
				c.want == safety.CodePushed && (got.Code == safety.CodeSpeed || got.Code == safety.CodeSpeedAhead) // whichever is first
			if !did || !ok {
				t.Fatalf("told %q (%d), want %q (%d)", got.Words, got.Code, c.words, c.want)
			}
			if c.figures && !strings.ContainsAny(got.Words, "0123456789") {
				t.Errorf("no figure in %q", got.Words)
			}
			if got.Do == "" {
				t.Errorf("%q says not what to do", got.Words)
			}
		})
	}
}
