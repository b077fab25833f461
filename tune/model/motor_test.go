package model

import (
	"encoding/json"
	"math"
	"math/cmplx"
	"os"
	"sort"
	"testing"
)

// The reference values of this file are described in testdata/PROVENANCE.md.

type motorCase struct {
	ID     string
	Params struct {
		R float64 `json:"R_ohm"`
		L float64 `json:"L_H"`
		K float64 `json:"K_Nm_per_A"`
		J float64 `json:"J_kgm2"`
		B float64 `json:"b_Nms"`
	}
	DCGain      float64      `json:"dc_gain_rad_s_per_V"`
	Poles       [][2]float64 `json:"poles"`
	TauE        float64      `json:"tau_e"`
	TauM        float64      `json:"tau_m_with_b"`
	V           float64
	NoLoad      struct{ Omega, Current float64 } `json:"no_load"`
	LockedRotor struct{ Current float64 }        `json:"locked_rotor"`
	WithCoulomb *struct {
		Tc       float64
		NoLoad   struct{ Omega, Current float64 } `json:"no_load"`
		DeadZone float64                          `json:"dead_zone_voltage"`
	} `json:"with_coulomb"`
	ZOH struct {
		H        float64
		Num, Den []float64
	}
}

type motorFile struct {
	Motors []motorCase
	Worked struct {
		Tc, Ts, Ws float64
		Points     []struct {
			W      float64
			BEff   float64 `json:"b_eff"`
			DCGain float64 `json:"dc_gain"`
			Tau    float64
		}
	}
}

func readMotors(t *testing.T) motorFile {
	t.Helper()
	b, err := os.ReadFile("testdata/motors.json")
	if err != nil {
		t.Fatal(err)
	}
	var f motorFile
	if err := json.Unmarshal(b, &f); err != nil {
		t.Fatal(err)
	}
	if len(f.Motors) != 5 {
		t.Fatalf("got %d motors, want 5", len(f.Motors))
	}
	return f
}

func (c motorCase) motor() Motor {
	return Motor{R: c.Params.R, L: c.Params.L, Ke: c.Params.K, Kt: c.Params.K, J: c.Params.J, Viscous: c.Params.B}
}

func near(t *testing.T, what string, got, want, rel float64) {
	t.Helper()
	if !(math.Abs(got-want) <= rel*math.Abs(want)+1e-300) {
		t.Errorf("%s: got %.15g, want %.15g", what, got, want)
	}
}

func TestMotorAgainstReference(t *testing.T) {
	for _, c := range readMotors(t).Motors {
		t.Run(c.ID, func(t *testing.T) {
			m := c.motor()
			if err := m.Validate(); err != nil {
				t.Fatal(err)
			}
			lin := m.Linearise(1, 0)
			near(t, "DC gain", lin.DCGain(), c.DCGain, 1e-12)
			poles := lin.Poles()
			sort.Slice(poles, func(i, j int) bool { return cmplx.Abs(poles[i]+complex(0, -1)) > cmplx.Abs(poles[j]+complex(0, -1)) })
			want := make([]complex128, 0, 2)
			for _, p := range c.Poles {
				want = append(want, complex(p[0], p[1]))
			}
			sort.Slice(want, func(i, j int) bool { return cmplx.Abs(want[i]+complex(0, -1)) > cmplx.Abs(want[j]+complex(0, -1)) })
			for i := range want {
				if d := cmplx.Abs(poles[i] - want[i]); d > 1e-9*cmplx.Abs(want[i]) {
					t.Errorf("pole %d: got %v, want %v", i, poles[i], want[i])
				}
			}
			te, tm := m.TimeConstants()
			near(t, "electrical time constant", te, c.TauE, 1e-12)
			near(t, "mechanical time constant", tm, c.TauM, 1e-12)
			w := m.SteadySpeed(c.V, 0)
			near(t, "no-load speed", w, c.NoLoad.Omega, 1e-12)
			near(t, "voltage back from it", m.SteadyVolts(w, 0), c.V, 1e-12)
			if c.NoLoad.Current > 0 {
				near(t, "no-load current", m.SteadyCurrent(w, 0), c.NoLoad.Current, 1e-12)
			}
			near(t, "stall current", m.StallCurrent(c.V), c.LockedRotor.Current, 1e-12)
			if k := c.WithCoulomb; k != nil {
				m.CoulombForward = k.Tc
				w := m.SteadySpeed(c.V, 0)
				near(t, "no-load speed with Coulomb", w, k.NoLoad.Omega, 1e-12)
				near(t, "no-load current with Coulomb", m.SteadyCurrent(w, 0), k.NoLoad.Current, 1e-12)
				fwd, rev := m.BreakawayVolts()
				near(t, "breakaway voltage", fwd, k.DeadZone, 1e-12)
				if rev != 0 {
					t.Errorf("reverse breakaway: got %g V, want 0: no friction was given there", rev)
				}
			}
		})
	}
}

// The pulse transfer function in z is rebuilt from the delta form and compared
// coefficient by coefficient.
func TestZeroOrderHoldAgainstReference(t *testing.T) {
	for _, c := range readMotors(t).Motors {
		d, err := c.motor().Linearise(1, 0).Sample(c.ZOH.H, 0)
		if err != nil {
			t.Fatal(err)
		}
		p := d.Pulse()
		h := c.ZOH.H
		den := []float64{1, p.Den[1]*h - 2, 1 - p.Den[1]*h + p.Den[2]*h*h}
		num := []float64{p.Num0[0] * h, p.Num0[1]*h*h - p.Num0[0]*h}
		for i := range den {
			if math.Abs(den[i]-c.ZOH.Den[i]) > 1e-11 {
				t.Errorf("%s: den[%d]: got %.15g, want %.15g", c.ID, i, den[i], c.ZOH.Den[i])
			}
		}
		for i := range num {
			near(t, c.ID+" num", num[i], c.ZOH.Num[i], 1e-9)
		}
	}
}

func TestLinearisationAgainstWorkedExample(t *testing.T) {
	f := readMotors(t)
	var m Motor
	for _, c := range f.Motors {
		if c.ID == "benchA" {
			m = c.motor()
		}
	}
	m.L = 0
	m.CoulombForward, m.BreakawayForward, m.StribeckSpeed = f.Worked.Tc, f.Worked.Ts, f.Worked.Ws
	for _, p := range f.Worked.Points {
		near(t, "friction slope", m.FrictionSlope(p.W), p.BEff, 1e-9)
		lin := m.Linearise(p.W, 0)
		near(t, "DC gain", lin.DCGain(), p.DCGain, 1e-9)
		near(t, "time constant", lin.Den[0]/lin.Den[1], p.Tau, 1e-9)
	}
}

func TestUltimateAgainstReference(t *testing.T) {
	b, err := os.ReadFile("testdata/plants.json")
	if err != nil {
		t.Fatal(err)
	}
	var f struct {
		Plants []struct {
			ID       string
			Num, Den []float64
			Delay    float64
			Ku, Pu   float64
		}
	}
	if err := json.Unmarshal(b, &f); err != nil {
		t.Fatal(err)
	}
	if len(f.Plants) != 34 {
		t.Fatalf("got %d plants, want 34", len(f.Plants))
	}
	for _, p := range f.Plants {
		ku, pu, ok := Linear{Num: p.Num, Den: p.Den, DeadTime: p.Delay}.Ultimate(0)
		if !ok {
			t.Errorf("%s: no ultimate point found", p.ID)
			continue
		}
		near(t, p.ID+" Ku", ku, p.Ku, 1e-9)
		near(t, p.ID+" Pu", pu, p.Pu, 1e-9)
	}
	if _, _, ok := FirstOrder(1, 1, 0).Ultimate(0); ok {
		t.Error("a first order without dead time has no ultimate point, yet one was found")
	}
}

// Closed forms of the step response are an outside check of the sampled form,
// also where the dead time falls between two samples.
func TestStepAgainstClosedForm(t *testing.T) {
	const k, t1, t2 = 20.0, 0.05, 0.008
	for _, dead := range []float64{0, 0.0004, 0.001, 0.00237} {
		y1, err := FirstOrder(k, t1, dead).Step(0.001, 200)
		if err != nil {
			t.Fatal(err)
		}
		y2, err := SecondOrder(k, t1, t2, dead).Step(0.001, 200)
		if err != nil {
			t.Fatal(err)
		}
		for i := range y1 {
			at := math.Max(0, float64(i)*0.001-dead)
			w1 := k * -math.Expm1(-at/t1)
			w2 := k * (1 - (t1*math.Exp(-at/t1)-t2*math.Exp(-at/t2))/(t1-t2))
			if math.Abs(y1[i]-w1) > 1e-11 || math.Abs(y2[i]-w2) > 1e-11 {
				t.Fatalf("dead time %g, sample %d: got %.14g and %.14g, want %.14g and %.14g", dead, i, y1[i], y2[i], w1, w2)
			}
		}
	}
}

// The pulse transfer function of K/(τs+1) with a fractional dead time in closed
// form (Åström & Wittenmark; from memory): with p = e^(−h/τ), q = e^(−(h−r)/τ),
// G(z) = K·z^(−m)·((1−q)·z + (q−p)) / (z·(z−p)).
func TestPulseAgainstClosedForm(t *testing.T) {
	const k, tau, h, dead = 20.0, 0.05, 0.001, 0.0027
	d, err := FirstOrder(k, tau, dead).Sample(h, 0)
	if err != nil {
		t.Fatal(err)
	}
	if d.Whole != 2 || math.Abs(d.Rest-0.0007) > 1e-15 {
		t.Fatalf("dead time split as %d periods and %g s, want 2 and 0.0007", d.Whole, d.Rest)
	}
	p, q := math.Exp(-h/tau), math.Exp(-(h-0.0007)/tau)
	for _, w := range []float64{0.01, 1, 20, 300, 3000, math.Pi / h} {
		z := cmplx.Exp(complex(0, w*h))
		want := k / (z * z) * (complex(1-q, 0)*z + complex(q-p, 0)) / (z * (z - complex(p, 0)))
		if got := d.Pulse().At(w); cmplx.Abs(got-want) > 1e-10*cmplx.Abs(want) {
			t.Errorf("ω = %g rad/s: got %v, want %v", w, got, want)
		}
	}
}

func TestMotorRefuses(t *testing.T) {
	good := Motor{R: 1, L: 1e-3, Ke: 0.02, Kt: 0.02, J: 1e-5}
	if err := good.Validate(); err != nil {
		t.Fatal(err)
	}
	for name, edit := range map[string]func(*Motor){
		"no resistance": func(m *Motor) { m.R = 0 }, "NaN inertia": func(m *Motor) { m.J = math.NaN() },
		"negative friction": func(m *Motor) { m.CoulombReverse = -1 },
	} {
		m := good
		edit(&m)
		if m.Validate() == nil {
			t.Errorf("%s: not refused", name)
		}
	}
}
