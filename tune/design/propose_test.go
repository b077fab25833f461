package design

import (
	"encoding/json"
	"math"
	"strings"
	"testing"

	"gainwright/tune/model"
)

var bench = model.SecondOrder(46.5, 0.0352, 0.0005, 0.0015)

func TestProposeEveryRule(t *testing.T) {
	for _, law := range []string{LawPI, LawPID} {
		ps, chosen, err := Propose(bench, Options{Rule: "all", SampleTime: 0.001, ComputeDelay: 0.0005, Law: law})
		if err != nil {
			t.Fatal(err)
		}
		if len(ps) != len(Rules()) {
			t.Fatalf("got %d proposals, want %d", len(ps), len(Rules()))
		}
		if chosen != 0 || ps[0].Rule != RuleLargestKi || ps[0].Refused != "" {
			t.Fatalf("chosen %d: %+v", chosen, ps[0])
		}
		if ps[0].Margins.Ms > DefaultMsMax+1e-3 {
			t.Errorf("%s: Ms %.6g is over the bound", law, ps[0].Margins.Ms)
		}
		given := 0
		for _, p := range ps {
			if p.Refused != "" {
				continue
			}
			given++
			if !p.Margins.Stable || !p.Margins.Ms.Known() || !p.Margins.Step.SettlingTime.Known() || p.NoiseGain <= 0 || p.PeakDrive <= 0 {
				t.Errorf("%s %s: incomplete: %+v", law, p.Rule, p)
			}
			if p.Rule != RuleLargestKi && !strings.HasPrefix(p.Notes[0], "source: ") {
				t.Errorf("%s %s: the source does not come first: %q", law, p.Rule, p.Notes)
			}
		}
		if given < 10 {
			t.Errorf("%s: only %d of %d rules apply to a plain motor", law, given, len(ps))
		}
	}
}

func TestProposeKeepsItsBounds(t *testing.T) {
	o := Options{SampleTime: 0.001, ComputeDelay: 0.0005}
	free := mustChoose(t, bench, o)
	o.Noise = 0.5 * float64(free.NoiseGain)
	quiet := mustChoose(t, bench, o)
	if got := float64(quiet.NoiseGain); got > o.Noise || got < 0.95*o.Noise {
		t.Errorf("noise gain %.4g under a bound of %.4g: neither over it nor far below", got, o.Noise)
	}
	if quiet.Gains.Ki >= free.Gains.Ki {
		t.Errorf("ki %.4g under the noise bound, %.4g without: the bound must cost something", quiet.Gains.Ki, free.Gains.Ki)
	}
	o.Noise, o.UMax, o.Step = 0, 6, 0
	o.Step = 6 / float64(free.PeakDrive) * 1.3 // too much for a setpoint weight of 1
	mild := mustChoose(t, bench, o)
	peak, err := PeakDrive(bench, mild.Gains, o.Step)
	if err != nil {
		t.Fatal(err)
	}
	if peak > o.UMax*1.0001 {
		t.Errorf("the step drives %.4g V, over the bound of %g V", peak, o.UMax)
	}
	if mild.Gains.SetpointWeight >= 1 || mild.Gains.Ki != free.Gains.Ki {
		t.Errorf("setpoint weight %g, ki %g (free %g): the weight alone should give way", mild.Gains.SetpointWeight, mild.Gains.Ki, free.Gains.Ki)
	}
}

func mustChoose(t *testing.T, m model.Linear, o Options) Proposal {
	t.Helper()
	ps, chosen, err := Propose(m, o)
	if err != nil {
		t.Fatal(err)
	}
	if chosen < 0 {
		t.Fatalf("nothing chosen: %+v", ps)
	}
	return ps[chosen]
}

func TestProposeRefusesInWords(t *testing.T) {
	for _, c := range []struct {
		name string
		m    model.Linear
		o    Options
		word string
	}{
		{"loop too slow", bench, Options{SampleTime: 0.05}, "too slow"},
		{"unstable model", model.Linear{Num: []float64{1}, Den: []float64{1, -1}, DeadTime: 0.1}, Options{}, "unstable"},
		{"no dead time at all", model.FirstOrder(20, 0.05, 0), Options{}, "sample time"},
		{"published rule without dead time", model.FirstOrder(20, 0.05, 0), Options{Rule: "simc"}, "dead time"},
		{"Ziegler–Nichols far outside", model.FirstOrder(20, 1, 0.001), Options{Rule: "ziegler-nichols-step"}, "the rule is for"},
		{"resonance", model.Linear{Num: []float64{18000}, Den: []float64{1, 3, 900}}, Options{SampleTime: 0.001, ComputeDelay: 0.005, Rule: "pole-placement", Law: LawPID}, "resonance"},
	} {
		ps, chosen, err := Propose(c.m, c.o)
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		if chosen != -1 || ps[0].Refused == "" || !strings.Contains(ps[0].Refused, c.word) {
			t.Errorf("%s: chosen %d, refused %q", c.name, chosen, ps[0].Refused)
		}
	}
	if _, _, err := Propose(bench, Options{Rule: "guess"}); err == nil {
		t.Error("an unknown rule was taken")
	}
	if _, _, err := Propose(bench, Options{MsMax: 0.9}); err == nil {
		t.Error("a bound on Ms below 1 was taken")
	}
}

func TestProposeForANegativeGain(t *testing.T) {
	pos := mustChoose(t, bench, Options{SampleTime: 0.001})
	neg := mustChoose(t, bench.Scale(-1), Options{SampleTime: 0.001})
	if neg.Gains.Kp != -pos.Gains.Kp || neg.Gains.Ki != -pos.Gains.Ki {
		t.Errorf("got kp %g ki %g, want the opposite of %g %g", neg.Gains.Kp, neg.Gains.Ki, pos.Gains.Kp, pos.Gains.Ki)
	}
	m, err := Judge(bench.Scale(-1), neg.Gains)
	if err != nil || !m.Stable {
		t.Errorf("the loop around the negative motor: stable %v, %v", m.Stable, err)
	}
}

func TestProposalJSON(t *testing.T) {
	p := mustChoose(t, bench, Options{SampleTime: 0.001})
	b, err := json.Marshal(p)
	if err != nil {
		t.Fatal(err)
	}
	var back struct {
		Rule  string
		Gains Gains
		Marg  struct {
			Ms   float64 `json:"ms"`
			Step struct {
				Settle *float64 `json:"settling_time_s"`
			} `json:"step"`
		} `json:"margins"`
		Notes []string
	}
	if err := json.Unmarshal(b, &back); err != nil {
		t.Fatal(err)
	}
	if back.Gains.Kp != p.Gains.Kp || back.Gains.SetpointWeight != 1 || back.Marg.Ms != float64(p.Margins.Ms) || back.Marg.Step.Settle == nil {
		t.Errorf("came back as %+v from %s", back, b)
	}
	u, err := json.Marshal(unknownMargins())
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(string(u), `"stable":false`) || !strings.Contains(string(u), `"ms":null`) || strings.Contains(string(u), "NaN") {
		t.Errorf("an unstable loop reads %s", u)
	}
}

// The noise gain against a plain simulation of the sampled loop under white
// noise: the standard deviation of the drive over 200 000 samples is known to
// about 0.5 %.
func TestNoiseGainAgainstSimulation(t *testing.T) {
	p := mustChoose(t, bench, Options{SampleTime: 0.001, ComputeDelay: 0.0005})
	plant, err := newSampledPlant(bench, p.Gains)
	if err != nil {
		t.Fatal(err)
	}
	l := newLaw(p.Gains)
	r := newRand(7)
	var sum float64
	const n = 200000
	for range n {
		u := l.next(0, plant.speed()+r.NormFloat64(), 0)
		sum += u * u
		plant.apply(u)
	}
	if got := math.Sqrt(sum / n); math.Abs(got/float64(p.NoiseGain)-1) > 0.02 {
		t.Errorf("simulated noise gain %.5g, computed %.5g", got, p.NoiseGain)
	}
}

func BenchmarkProposeWithMargins(b *testing.B) {
	for b.Loop() {
		if _, _, err := Propose(bench, Options{Rule: RuleLargestKi, SampleTime: 0.001, ComputeDelay: 0.0005}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkProposePID(b *testing.B) {
	for b.Loop() {
		if _, _, err := Propose(bench, Options{Rule: RuleLargestKi, SampleTime: 0.001, ComputeDelay: 0.0005, Law: LawPID, Noise: 0.3, UMax: 12}); err != nil {
			b.Fatal(err)
		}
	}
}
