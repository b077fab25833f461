package identify

import (
	"math/rand/v2"
	"os"
	"strings"
	"testing"
)

// sickClasses are records that no model here describes, with words of which the
// reasons must hold one.
var sickClasses = []struct {
	class string
	words []string
}{
	{"wrong sign", []string{"wrong sign"}},
	{"noise", []string{"does not answer"}},
	{"drift", []string{"drifts"}},
	{"slip", []string{"slipping"}},
	{"saturated", []string{"saturate"}},
	{"sag", []string{"bus sagged"}},
	{"nonlinear", []string{"level"}},
	{"resonance", []string{"resonance"}},
	{"backlash", []string{"backlash", "friction"}},
	{"asymmetry", []string{"not alike", "not noise", "level"}},
}

// best is the chosen model, or the first where all are refused.
func best(res Result) Fit {
	if res.Chosen != nil {
		return *res.Best()
	}
	return res.Models[0]
}

// Of records that no model describes none is believed, and nearly all name the
// right cause; of healthy ones nearly all are believed. The rigs are our own
// simulation, seeded; GAINWRIGHT_LONG=1 makes 200 of each, as the target asks.
func TestVerdicts(t *testing.T) {
	each, healthy := 2, 16
	if os.Getenv("GAINWRIGHT_LONG") != "" {
		each, healthy = 20, 200
	}
	named, sick := 0, 0
	for c, class := range sickClasses {
		hits := 0
		for k := 0; k < each; k++ {
			tr := sickZoo(class.class, rand.New(rand.NewPCG(uint64(1000*c+k), 5)))
			res, err := Run(tr, Options{Holdout: 0.5})
			if err != nil {
				t.Fatal(err)
			}
			sick++
			f := best(res)
			if f.Verdict == Believed {
				t.Errorf("%s %d: believed (NRMSE %.3f, hold-out %.3f, findings %v)", class.class, k, f.NRMSE, f.HoldoutNRMSE, f.Findings)
			}
			reasons := strings.Join(f.Reasons, "; ")
			for _, w := range class.words {
				if strings.Contains(reasons, w) {
					hits++
					break
				}
			}
			if f.Verdict != Believed && f.Helps == "" {
				t.Errorf("%s %d: %s without a test that would help", class.class, k, f.Verdict)
			}
		}
		t.Logf("%-10s right reason in %d of %d", class.class, hits, each)
		named += hits
	}
	if named*10 < sick*9 {
		t.Errorf("right reason in %d of %d, want 90 %%", named, sick)
	}
	believed := 0
	for k := 0; k < healthy; k++ {
		rng := rand.New(rand.NewPCG(uint64(k), 6))
		r, u, h := healthyZoo(rng)
		res, err := Run(r.run(rng, u, h), Options{Holdout: 0.5})
		if err != nil {
			t.Fatal(err)
		}
		f := best(res)
		if f.Verdict == Believed {
			believed++
		} else {
			t.Logf("healthy %d: %s %v NRMSE %.3f", k, f.Verdict, f.Reasons, f.NRMSE)
		}
	}
	t.Logf("healthy: %d of %d believed", believed, healthy)
	if believed*100 < healthy*95 {
		t.Errorf("%d of %d healthy records believed, want 95 %%", believed, healthy)
	}
}
