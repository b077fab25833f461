package simrig

import (
	"encoding/json"
	"math"
	"os"
	"testing"
)

// reference is testdata/motor_model.json: closed forms and numerical integrations
// of the same equations by two general-purpose numeric packages; provenance in
// the file beside it.
type reference struct {
	Motors []struct {
		ID     string `json:"id"`
		Params struct {
			R float64 `json:"R_ohm"`
			L float64 `json:"L_H"`
			K float64 `json:"K_Nm_per_A"`
			J float64 `json:"J_kgm2"`
			B float64 `json:"b_Nms"`
		} `json:"params"`
		TF struct {
			Num []float64 `json:"num"`
			Den []float64 `json:"den"`
		} `json:"tf"`
		Poles  [][2]float64 `json:"poles"`
		Volts  float64      `json:"V"`
		NoLoad struct {
			Omega, Current float64
		} `json:"no_load"`
		LockedRotor struct {
			Current float64 `json:"current"`
			T63     float64 `json:"current_63pct_time"`
		} `json:"locked_rotor"`
		WithCoulomb *struct {
			Tc     float64 `json:"Tc"`
			NoLoad struct {
				Omega, Current float64
			} `json:"no_load"`
			Coast struct {
				StopTime float64      `json:"stop_time"`
				OmegaAt  [][2]float64 `json:"omega_at"`
				Revs     float64      `json:"revs"`
			} `json:"coast_down_open_circuit"`
			DeadZone float64 `json:"dead_zone_voltage"`
		} `json:"with_coulomb"`
		ZOH struct {
			H   float64   `json:"h"`
			Num []float64 `json:"num"`
			Den []float64 `json:"den"`
		} `json:"zoh"`
	} `json:"motors"`
	Worked struct {
		Motor  string  `json:"motor"`
		Tc     float64 `json:"Tc"`
		Ts     float64 `json:"Ts"`
		Ws     float64 `json:"ws"`
		Points []struct {
			W    float64 `json:"w"`
			B    float64 `json:"b_eff"`
			Gain float64 `json:"dc_gain"`
		} `json:"points"`
	} `json:"worked_linearisation"`
}

func loadReference(t testing.TB) reference {
	b, err := os.ReadFile("testdata/motor_model.json")
	if err != nil {
		t.Fatal(err)
	}
	var r reference
	if err := json.Unmarshal(b, &r); err != nil {
		t.Fatal(err)
	}
	if len(r.Motors) < 5 {
		t.Fatalf("%d motors in the reference", len(r.Motors))
	}
	return r
}

func near(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if math.IsNaN(got) || math.Abs(got-want) > rel*math.Abs(want) {
		t.Errorf("%s = %.10g, reference %.10g (off by %.2g, allowed %.2g)", what, got, want, got/want-1, rel)
	}
}

// bare is a reference motor with Coulomb friction tc and nothing else.
func (r *reference) bare(i int, tc float64) *motor {
	p := r.Motors[i].Params
	s := side{coulomb: tc, static: tc, viscous: p.B, stribeck: 1}
	return &motor{r: p.R, l: p.L, k: p.K, j: p.J, fwd: s, rev: s, gear: 1}
}

func TestStepResponseIsThePublishedSampledModel(t *testing.T) {
	ref := loadReference(t)
	for i, m := range ref.Motors {
		s := shaft{m: ref.bare(i, 0)}
		pr := s.m.pair(m.ZOH.H / 20)
		num, den := m.ZOH.Num, m.ZOH.Den
		var y1, y2, u1, u2 float64
		for k := range 400 {
			u := 1.0
			if k > 150 {
				u = -0.7
			}
			y := -den[1]*y1 - den[2]*y2 + num[0]*u1 + num[1]*u2
			if got := s.w; math.Abs(got-y) > 1e-8*m.TF.Num[0]/m.TF.Den[2] {
				t.Fatalf("%s sample %d: %.12g, difference equation %.12g", m.ID, k, got, y)
			}
			for range 20 {
				s.step(&pr, u, false)
			}
			y2, y1, u2, u1 = y1, y, u1, u
		}
	}
}

func TestNoLoadStallAndCoastDown(t *testing.T) {
	ref := loadReference(t)
	for i, m := range ref.Motors {
		locked := shaft{m: ref.bare(i, 0), locked: true}
		pr := locked.m.pair(m.LockedRotor.T63 / 50)
		for range 50 {
			locked.step(&pr, m.Volts, false)
		}
		near(t, m.ID+" current after L/R", locked.i, m.LockedRotor.Current*(1-math.Exp(-1)), 1e-9)

		if m.WithCoulomb == nil {
			continue
		}
		c := m.WithCoulomb
		s := shaft{m: ref.bare(i, c.Tc)}
		pr = s.m.pair(50e-6)
		for range 200_000 {
			s.step(&pr, m.Volts, false)
		}
		near(t, m.ID+" no-load speed", s.w, c.NoLoad.Omega, 1e-8)
		near(t, m.ID+" no-load current", s.i, c.NoLoad.Current, 1e-7)

		s.i, s.th = 0, 0
		n, stop := 0, 0.0
		for _, want := range c.Coast.OmegaAt {
			for ; float64(n)*50e-6 < want[0]-25e-6; n++ {
				s.step(&pr, 0, true)
			}
			near(t, m.ID+" coasting", s.w, want[1], 2e-4) // the instants are not whole steps
		}
		for ; s.dir != 0; n++ {
			s.step(&pr, 0, true)
			stop = float64(n+1) * 50e-6
		}
		near(t, m.ID+" stop time", stop, c.Coast.StopTime, 50e-6/c.Coast.StopTime)
		near(t, m.ID+" turns to rest", s.th/(2*math.Pi), c.Coast.Revs, 1e-6)
		if s.w != 0 {
			t.Errorf("%s: speed %g at rest", m.ID, s.w)
		}
	}
}

func TestBreakawayIsExact(t *testing.T) {
	ref := loadReference(t)
	for i, m := range ref.Motors {
		if m.WithCoulomb == nil {
			continue
		}
		mot := ref.bare(i, m.WithCoulomb.Tc)
		want := m.WithCoulomb.DeadZone
		for _, v := range []float64{want * 0.999999, -want * 0.999999} {
			s := shaft{m: mot}
			pr := mot.pair(50e-6)
			for range 20_000 {
				s.step(&pr, v, false)
			}
			if s.w != 0 || s.th != 0 {
				t.Errorf("%s moved at %g V, dead zone %g V", m.ID, v, want)
			}
			for range 20_000 {
				s.step(&pr, v*1.000002, false)
			}
			if s.w*v <= 0 {
				t.Errorf("%s holds at %g V, dead zone %g V", m.ID, v*1.000002, want)
			}
		}
	}
}

func TestLinearisedFriction(t *testing.T) {
	ref := loadReference(t)
	w := ref.Worked
	for i, m := range ref.Motors {
		if m.ID != w.Motor {
			continue
		}
		p := m.Params
		f := side{coulomb: w.Tc, static: w.Ts, stribeck: w.Ws, viscous: p.B}
		for _, pt := range w.Points {
			near(t, "slope", f.slope(pt.W), pt.B, 1e-9)
		}
		c := benchConfig()
		c.Motor = MotorSpec{Ohms: p.R, Henry: p.L, K: p.K, Inertia: p.J, Ambient: 25}
		c.Load = LoadSpec{Gear: 1}
		c.Friction.Forward = SideSpec{Coulomb: w.Tc, Static: w.Ts, Stribeck: w.Ws, Viscous: p.B}
		c.Friction.Reverse = &c.Friction.Forward
		r := New(c, 1)
		for _, pt := range w.Points {
			near(t, "gain", r.Truth(pt.W).Gain, pt.Gain, 1e-6)
		}
		c.Friction.Forward = SideSpec{Stribeck: 1, Viscous: p.B}
		tr := New(c, 1).Truth(100)
		near(t, m.ID+" slowest pole", -1/tr.TimeConstant, ref.Motors[i].Poles[1][0], 1e-9)
	}
}

// TestSplitStepsAgreeWithSmallOnes turns a motor with Stribeck friction to and
// fro at 50 µs and at 1 µs.
func TestSplitStepsAgreeWithSmallOnes(t *testing.T) {
	f := side{coulomb: 0.0011, static: 0.0018, viscous: 2e-6, stribeck: 3}
	g := side{coulomb: 0.0014, static: 0.0021, viscous: 3e-6, stribeck: 2}
	m := &motor{r: 2.3, l: 0.0011, k: 0.0213, j: 7.1e-6, fwd: f, rev: g, gear: 1, gravity: 2e-4}
	a, b := shaft{m: m}, shaft{m: m}
	pa, pb := m.pair(50e-6), m.pair(1e-6)
	worst, top := 0.0, 0.0
	for k := range 40_000 {
		v := 1.5 * math.Sin(2*math.Pi*2*float64(k)*50e-6)
		a.step(&pa, v, false)
		for range 50 {
			b.step(&pb, v, false)
		}
		worst, top = max(worst, math.Abs(a.w-b.w)), max(top, math.Abs(b.w))
	}
	if worst > 1e-6*top {
		t.Errorf("50 µs and 1 µs differ by %g rad/s of %g", worst, top)
	}
	t.Logf("largest difference %.3g rad/s, top speed %.3g", worst, top)
}

// TestEnergyIsConserved brakes a motor onto a supply that cannot sink: what the
// rotor loses goes into copper, friction and the bus, as the trade's formula
// V2² = V1² + 2·E/C has it.
func TestEnergyIsConserved(t *testing.T) {
	c := benchConfig()
	c.Friction.Forward = SideSpec{Stribeck: 1}
	c.Friction.Reverse = &c.Friction.Forward
	c.Supply.Rest, c.Supply.Sinks, c.Supply.Ohms = 0, false, 0.05
	p := newPlant(&c)
	p.bind()
	p.shaft.w, p.shaft.dir = 250, 1
	p.driver.now = order{duty: 0.2, on: true}
	e0 := p.motor.j * 250 * 250 / 2
	bus0 := p.supply.bus
	heat := 0.0
	pr, half := p.motor.pair(10e-6), p.supply.span(5e-6)
	for range 2000 { // 20 ms
		if i := p.shaft.i; i > 0 {
			t.Fatalf("motoring while braking: %g A", i)
		}
		p.supply.draw(p.drawn(), &half)
		heat += p.step(&pr, 0, false) * 10e-6
		p.supply.draw(p.drawn(), &half)
	}
	lost := e0 - p.motor.j*p.shaft.w*p.shaft.w/2 - p.motor.l*p.shaft.i*p.shaft.i/2
	gained := p.supply.farads * (p.supply.bus*p.supply.bus - bus0*bus0) / 2
	if p.supply.bus < bus0+1 {
		t.Fatalf("bus only rose from %g to %g V", bus0, p.supply.bus)
	}
	near(t, "copper and bus", heat+gained, lost, 2e-3)
}

func TestSupplyLimitsAndFolds(t *testing.T) {
	s := supply{volts: 24, ohms: 0.1, limit: 2, fold: 0.5, farads: 1e-3, bus: 24}
	h := s.span(50e-6)
	for range 200_000 {
		s.draw(1, &h)
	}
	near(t, "loaded", s.bus, 23.9, 1e-9)
	for range 200_000 {
		s.draw(s.bus/4, &h) // a 4 Ω load wants 6 A
	}
	// On the fold-back line i = 0.5 + 1.5·v/24 with v = 4·i: v = 2/(1 - 0.25).
	near(t, "folded back", s.bus, 2/(1-0.25), 1e-6)
}

func benchConfig() Config {
	c, err := Load("../../testdata/rigs/benchtop.toml")
	if err != nil {
		panic(err)
	}
	return c
}
