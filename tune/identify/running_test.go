package identify

import (
	"math"
	"math/rand/v2"
	"testing"

	"gainwright/tune/model"
)

// The running widths are those of the fit of the same samples, and fall with the
// root of the number of repeats.
func TestRunningWidthsAreThoseOfTheFit(t *testing.T) {
	rng := rand.New(rand.NewPCG(51, 1))
	r := zooRig{gain: 22, tau: 0.08, noise: 1.2}
	const h = 0.002
	tr := r.run(rng, stepSet(6, 1, 200, 6), h)
	run := NewRunning(21, 0.085, 0)
	var early float64
	for i := range tr.Time {
		run.Add(tr.Time[i], tr.Voltage[i], tr.Speed[i])
		if i == 200+800*2 {
			_, early, _ = run.Widths()
		}
	}
	gain, tau, ok := run.Widths()
	if !ok {
		t.Fatal("no widths")
	}
	res, err := Run(tr, Options{Kind: model.KindFirstOrder, FreeStart: true, RawMask: true})
	if err != nil {
		t.Fatal(err)
	}
	f := res.Models[0]
	k, kSD, _ := f.Value("gain")
	w, wSD, _ := f.Value("tau")
	// The fit frees the dead time too, which costs some of the time constant.
	if math.Abs(gain/(kSD/k)-1) > 0.25 || tau/(wSD/w) < 0.4 || tau/(wSD/w) > 1.25 {
		t.Errorf("running: gain %.3g, tau %.3g; fit: %.3g, %.3g", gain, tau, kSD/k, wSD/w)
	}
	if want := math.Sqrt(3); math.Abs(early/tau/want-1) > 0.2 {
		t.Errorf("three times the repeats: %.3g to %.3g, want 1/%.3g", early, tau, want)
	}
}
