package job

import (
	"strings"
	"testing"

	"gainwright/tune/design"
)

// ki in V/rad adds ki·T·e a sample: half the period, half the number; kd/T doubles.
func TestBothSetsAtTwoLoopPeriods(t *testing.T) {
	g := design.PI(0.3, 8, 0.001, 0)
	g.Kd = 0.002
	got := PeriodSets(g, 0.0005)
	text := strings.Join(got, "\n")
	for _, want := range []string{"1 ms then, 0.5 ms now", "ki·T " + number(0.008), "ki·T " + number(0.004), "kd/T " + number(2), "kd/T " + number(4)} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is missing:\n%s", want, text)
		}
	}
	if PeriodSets(g, 0.001) != nil {
		t.Error("two sets for one period")
	}
}
