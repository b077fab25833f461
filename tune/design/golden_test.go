package design

import (
	"encoding/json"
	"math"
	"os"
	"testing"

	"gainwright/tune/model"
)

// The reference values of this file are described in testdata/PROVENANCE.md.

type goldenController struct{ Kp, Ki, Kd, Tf float64 }

func (c goldenController) gains() Gains {
	g := PI(c.Kp, c.Ki, 0, 0)
	g.Kd, g.DerivativeFilter, g.DerivativeOn = c.Kd, c.Tf, OnError
	return g
}

type goldenMargins struct {
	GM  *float64
	WPC *float64 `json:"w_pc"`
	PM  *float64 `json:"pm_deg"`
	WGC *float64 `json:"w_gc"`
	DM  *float64 `json:"dm_s"`
	Ms  float64
	Mt  float64
}

type goldenStep struct {
	Overshoot float64 `json:"overshoot_pct"`
	Rise      float64 `json:"rise_10_90"`
	Settle    float64 `json:"settle_2pct"`
	Sensitive bool    `json:"settle_sensitive"`
	IAE       float64
	Y         []float64 `json:"y_first_samples"`
	U         []float64 `json:"u_first_samples"`
}

type goldenLoad struct {
	Peak float64 `json:"peak_dev"`
	IAE  float64
	Y    []float64 `json:"y_first_samples"`
}

type goldenLoop struct {
	ID, Plant, Rule string
	Controller      goldenController
	Stable          bool
	goldenMargins
	Crossovers   int  `json:"n_gain_crossovers"`
	NearMarginal bool `json:"near_marginal"`
	SP           *goldenStep
	SPC0         *goldenStep `json:"sp_c0"`
	LD           *goldenLoad
	Tol          map[string]map[string]float64 `json:"check_tol"`
}

type goldenSampled struct {
	Plant          string
	H              float64
	Delay          float64 `json:"comp_delay_samples"`
	Discretisation string
	Controller     goldenController
	Stable         bool
	goldenMargins
	SP goldenStep
	LD goldenLoad
}

type goldenFile struct {
	Plants []struct {
		ID       string
		Num, Den []float64
		Delay    float64
	}
	Loops   []goldenLoop
	Sampled []goldenSampled
}

func readGolden(t testing.TB) (goldenFile, map[string]model.Linear) {
	t.Helper()
	var f goldenFile
	readJSON(t, "testdata/loops.json", &f)
	if len(f.Loops) != 445 || len(f.Sampled) != 30 {
		t.Fatalf("got %d loops and %d sampled loops, want 445 and 30", len(f.Loops), len(f.Sampled))
	}
	plants := map[string]model.Linear{}
	for _, p := range f.Plants {
		plants[p.ID] = model.Linear{Num: p.Num, Den: p.Den, DeadTime: p.Delay}
	}
	return f, plants
}

func readJSON(t testing.TB, name string, into any) {
	t.Helper()
	b, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(b, into); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
}

func sameValue(t *testing.T, id, what string, got Value, want *float64, rel, abs float64) {
	t.Helper()
	switch {
	case want == nil:
		if got.Known() {
			t.Errorf("%s: %s: got %.12g, want none", id, what, got)
		}
	case !(math.Abs(float64(got)-*want) <= rel*math.Abs(*want)+abs):
		t.Errorf("%s: %s: got %.12g, want %.12g", id, what, got, *want)
	}
}

func sameMargins(t *testing.T, id string, got Margins, want goldenMargins) {
	t.Helper()
	sameValue(t, id, "gain margin", got.GainMargin, want.GM, 1e-6, 0)
	sameValue(t, id, "phase crossover", got.PhaseCrossover, want.WPC, 1e-6, 0)
	sameValue(t, id, "phase margin", got.PhaseMargin, want.PM, 0, 1e-4)
	sameValue(t, id, "gain crossover", got.Crossover, want.WGC, 1e-6, 0)
	sameValue(t, id, "delay margin", got.DelayMargin, want.DM, 1e-6, 0)
	sameValue(t, id, "Ms", got.Ms, &want.Ms, 1e-6, 0)
	sameValue(t, id, "Mt", got.Mt, &want.Mt, 1e-6, 0)
}

func TestMarginsAgainstReference(t *testing.T) {
	f, plants := readGolden(t)
	stable := 0
	for _, c := range f.Loops {
		got, err := JudgeFrequency(plants[c.Plant], c.Controller.gains())
		if err != nil {
			t.Errorf("%s: %v", c.ID, err)
			continue
		}
		if got.Stable != c.Stable {
			t.Errorf("%s: stable: got %v, want %v", c.ID, got.Stable, c.Stable)
			continue
		}
		if !c.Stable {
			continue
		}
		stable++
		sameMargins(t, c.ID, got, c.goldenMargins)
		if len(got.Crossovers) != c.Crossovers {
			t.Errorf("%s: got %d gain crossovers, want %d", c.ID, len(got.Crossovers), c.Crossovers)
		}
	}
	if stable != 428 {
		t.Errorf("compared %d stable loops, want 428", stable)
	}
}

func TestStepsAgainstReference(t *testing.T) {
	f, plants := readGolden(t)
	compared := 0
	for _, c := range f.Loops {
		if !c.Stable || c.NearMarginal || c.SP == nil {
			continue
		}
		compared++
		g := c.Controller.gains()
		got, err := Judge(plants[c.Plant], g)
		if err != nil {
			t.Errorf("%s: %v", c.ID, err)
			continue
		}
		sameStep(t, c.ID, got.Step, *c.SP, c.Tol["sp"])
		sameValue(t, c.ID, "load IAE", got.LoadStep.IAE, &c.LD.IAE, c.Tol["ld"]["iae"], 0)
		sameValue(t, c.ID, "load peak", got.LoadStep.Peak, &c.LD.Peak, c.Tol["ld"]["peak_dev"], 0)
		if c.SPC0 != nil {
			g.DerivativeOn = OnMeasurement
			got, err := Judge(plants[c.Plant], g)
			if err != nil {
				t.Errorf("%s: %v", c.ID, err)
				continue
			}
			sameStep(t, c.ID+" derivative on measurement", got.Step, *c.SPC0, c.Tol["sp_c0"])
		}
	}
	if compared != 414 {
		t.Errorf("compared %d loops, want 414", compared)
	}
}

func sameStep(t *testing.T, id string, got Step, want goldenStep, tol map[string]float64) {
	t.Helper()
	sameValue(t, id, "overshoot", got.Overshoot, &want.Overshoot, 0, tol["overshoot_pct"])
	sameValue(t, id, "rise time", got.RiseTime, &want.Rise, tol["rise_10_90"], 0)
	sameValue(t, id, "IAE", got.IAE, &want.IAE, tol["iae"], 0)
	if !want.Sensitive {
		sameValue(t, id, "settling time", got.SettlingTime, &want.Settle, tol["settle_2pct"], 0)
	}
}

func TestSampledLoopsAgainstReference(t *testing.T) {
	f, plants := readGolden(t)
	words := map[string]string{"backward_euler": BackwardEuler, "tustin": Tustin, "forward_euler": ForwardEuler}
	for _, c := range f.Sampled {
		m := plants[c.Plant]
		m.DeadTime = 0 // the reference leaves it out here
		g := c.Controller.gains()
		g.SampleTime, g.ComputeDelay, g.Discretisation = c.H, c.Delay*c.H, words[c.Discretisation]
		id := c.Plant + " " + c.Discretisation
		got, err := Judge(m, g)
		if err != nil {
			t.Errorf("%s: %v", id, err)
			continue
		}
		if got.Stable != c.Stable {
			t.Errorf("%s: stable: got %v, want %v", id, got.Stable, c.Stable)
		}
		sameMargins(t, id, got, c.goldenMargins)
		tol := map[string]float64{"overshoot_pct": 1e-6, "rise_10_90": 1e-8, "settle_2pct": 1e-9, "iae": 1e-6}
		sameStep(t, id, got.Step, c.SP, tol)
		sameValue(t, id, "load IAE", got.LoadStep.IAE, &c.LD.IAE, 1e-6, 0)
		sameValue(t, id, "load peak", got.LoadStep.Peak, &c.LD.Peak, 1e-8, 0)
		sameSamples(t, id, m, g, c)
	}
}

// sameSamples compares the first samples of speed and drive one by one, for the
// positional law and for its incremental twin.
func sameSamples(t *testing.T, id string, m model.Linear, g Gains, c goldenSampled) {
	t.Helper()
	laws := []string{g.Discretisation}
	if g.Discretisation == BackwardEuler {
		laws = append(laws, Incremental)
	}
	for _, name := range laws {
		g.Discretisation = name
		p, err := newSampledPlant(m, g)
		if err != nil {
			t.Fatal(err)
		}
		l := newLaw(g)
		for k := range c.SP.Y {
			y := p.speed()
			u := l.next(1, y, 0)
			if math.Abs(y-c.SP.Y[k]) > 1e-9 || math.Abs(u-c.SP.U[k]) > 1e-9*(1+math.Abs(c.SP.U[k])) {
				t.Errorf("%s %s: sample %d: got speed %.12g drive %.12g, want %.12g and %.12g", id, name, k, y, u, c.SP.Y[k], c.SP.U[k])
			}
			p.apply(u)
		}
	}
}
