package bench

import (
	"strings"
	"testing"

	"gainwright/tune/job"
)

// The second test ends once its own record tells gain and time constant well enough,
// and says on the way how well that is; the sum of sines ends behind a whole period,
// and its response is as good. A shaft that swings like two bodies leaves more behind
// than one lag can say: there it goes to its end.
func TestPatternsEndWhenEnoughIsKnown(t *testing.T) {
	known := func(v *Virtual) int {
		n := 0
		for _, l := range v.s.view.Log {
			if strings.Contains(l.Text, "enough is known") {
				n++
			}
		}
		return n
	}
	v, j := onBench(t, "flywheel", job.StepStep)
	before := known(v)
	if err := j.Do(job.StepSecond); err != nil {
		t.Fatal(err)
	}
	l := v.s.view.Live
	if known(v) != before+1 || l.Elapsed > 2*l.Length/3 || l.Elapsed < l.Length/3 {
		t.Errorf("flywheel: ended after %v of %v: %s", l.Elapsed, l.Length, l.Ended)
	}
	if !strings.Contains(l.Learn, "time constant ±") || !strings.Contains(l.Learn, "to its end") {
		t.Errorf("the screen says %q", l.Learn)
	}
	if err := j.Do(job.StepFit); err != nil {
		t.Fatal(err)
	}
	if f := j.Fit.Best(); f == nil || f.Verdict != "believed" {
		t.Errorf("the shorter record: %+v", f)
	}
	if err := j.Do(job.StepFrequency); err != nil {
		t.Fatal(err)
	}
	x := j.Experiments[job.StepFrequency]
	if l := v.s.view.Live; known(v) != before+2 || l.Elapsed >= l.Length || x.Verdict != "believed" {
		t.Errorf("sines: ended after %v of %v: %s; %s %v", l.Elapsed, l.Length, l.Ended, x.Verdict, x.Reasons)
	}

	v, j = onBench(t, "resonant", job.StepStep)
	before = known(v)
	if err := j.Do(job.StepSecond); err != nil {
		t.Fatal(err)
	}
	if known(v) != before {
		t.Error("resonant: ended by what a model knows that does not hold")
	}
}
