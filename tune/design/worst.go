package design

import (
	"fmt"
	"math"
	"math/rand/v2"
	"sort"

	"gainwright/protocol/si"
	"gainwright/tune/model"
)

// Spread says what is not known of a motor, or will not stay as it was.
type Spread struct {
	// Draws is how many motors are drawn; 0 means DrawsMin, which is the least.
	Draws int
	// Seed makes the draws repeatable.
	Seed uint64

	// Names, Values and Cov are the fitted parameters with their covariance, as
	// a fit reports them. Parameters that do not shape the model (offset, drift)
	// are passed over. With Cov nil the intervals CI95 of the model are used, as
	// if independent.
	Names  []string
	Values []float64
	Cov    [][]float64

	// InertiaMin and InertiaMax are factors on the inertia, e.g. 0.5 and 3.
	InertiaMin, InertiaMax float64
	// GainMin and GainMax are factors on the gain: the spread over operating
	// points, or of the bus voltage where the drive does not make up for it.
	GainMin, GainMax float64
	// WarmMin and WarmMax are temperatures in K above that of the fit.
	WarmMin, WarmMax float64
	// MagnetPerKelvin is the change of flux per K, negative: ferrite about
	// −0.002, neodymium about −0.001.
	MagnetPerKelvin float64
}

// DrawsMin is the least number of motors drawn.
const DrawsMin = 1000

// Worst is what becomes of the margins over the spread.
type Worst struct {
	Draws    int `json:"draws"`
	Unstable int `json:"unstable"`
	// Ms, PhaseMargin, GainMargin and Overshoot are kept by 95 % of the draws.
	Ms          Value `json:"ms"`
	PhaseMargin Value `json:"phase_margin_deg"`
	GainMargin  Value `json:"gain_margin"`
	Overshoot   Value `json:"overshoot_percent"`
	// Model is the draw with the largest Ms, Margins what it has.
	Model   model.Linear `json:"model"`
	Margins Margins      `json:"margins"`
}

// newRand returns the generator that a seed stands for.
func newRand(seed uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, 0x9e3779b97f4a7c15)) }

// WorstCase judges g on motors drawn from the spread about m. The corners of the
// stated ranges come first among the draws.
func WorstCase(m model.Linear, g Gains, s Spread) (Worst, error) {
	if s.Draws < DrawsMin {
		s.Draws = DrawsMin
	}
	return worstCase(m, g, s)
}

func worstCase(m model.Linear, g Gains, s Spread) (Worst, error) {
	w := Worst{Draws: s.Draws, Model: m, Margins: unknownMargins()}
	draw, err := newDrawer(m, s)
	if err != nil {
		return w, err
	}
	ms, pm := make([]float64, s.Draws), make([]float64, s.Draws)
	gm, over := make([]float64, s.Draws), make([]float64, s.Draws)
	top := math.Inf(-1)
	for i := range s.Draws {
		c := draw.next()
		margins, err := JudgeFrequency(c, g)
		if err != nil {
			return w, err
		}
		ms[i], pm[i], gm[i], over[i] = math.Inf(1), -180, 1, math.Inf(1)
		if margins.Stable {
			ms[i], pm[i], gm[i] = float64(margins.Ms), orElse(margins.PhaseMargin, 180), orElse(margins.GainMargin, math.Inf(1))
			over[i] = firstOvershoot(c, g, margins)
		} else {
			w.Unstable++
		}
		if ms[i] > top {
			top, w.Model, w.Margins = ms[i], c, margins
		}
	}
	w.Ms, w.PhaseMargin = Value(part(ms, 0.95)), Value(part(pm, 0.05))
	w.GainMargin, w.Overshoot = Value(part(gm, 0.05)), Value(part(over, 0.95))
	return w, nil
}

func orElse(v Value, other float64) float64 {
	if !v.Known() {
		return other
	}
	return float64(v)
}

// part returns the value below which the part p of xs lies, on the careful side
// of two neighbours; it sorts xs.
func part(xs []float64, p float64) float64 {
	sort.Float64s(xs)
	i := int(math.Ceil(p*float64(len(xs)))) - 1
	if p < 0.5 {
		i = int(math.Floor(p * float64(len(xs))))
	}
	return xs[min(max(i, 0), len(xs)-1)]
}

// firstOvershoot returns the overshoot in percent within the first swings of a
// setpoint step, where a speed loop has its largest. A continuous loop is taken
// at twenty samples a radian of its crossover.
func firstOvershoot(m model.Linear, g Gains, margins Margins) float64 {
	if !margins.Crossover.Known() {
		return 0
	}
	g = g.Parallel()
	w := float64(margins.Crossover)
	if g.SampleTime == 0 {
		g.SampleTime = 0.05 / w
	}
	p, err := newSampledPlant(m, g)
	if err != nil {
		return math.Inf(1)
	}
	g.UMin, g.UMax = nil, nil
	c := newLaw(g)
	n := int(15/(w*g.SampleTime)) + p.drive.Whole + 20
	top := 0.0
	for range min(n, 20000) {
		y := p.speed()
		top = math.Max(top, y)
		p.apply(c.next(1, y, 0))
	}
	return 100 * math.Max(0, top-1)
}

// drawer makes motors.
type drawer struct {
	m      model.Linear
	s      Spread
	r      *rand.Rand
	names  []string
	values []float64
	chol   [][]float64
	n      int
}

// logarithmic are the parameters that are positive by nature and drawn on the
// logarithm.
var logarithmic = map[string]bool{"tau": true, "tau1": true, "tau2": true, "natural_frequency": true, "damping": true}

func newDrawer(m model.Linear, s Spread) (*drawer, error) {
	d := &drawer{m: m, s: s, r: newRand(s.Seed)}
	for _, f := range []*float64{&d.s.InertiaMin, &d.s.InertiaMax, &d.s.GainMin, &d.s.GainMax} {
		if *f == 0 {
			*f = 1
		}
	}
	for _, c := range []struct {
		name     string
		low, top float64
		floor    float64
	}{
		{"inertia", d.s.InertiaMin, d.s.InertiaMax, 0}, {"gain", d.s.GainMin, d.s.GainMax, 0},
		{"temperature", d.s.WarmMin, d.s.WarmMax, -200},
	} {
		if !si.Finite(c.low) || !si.Finite(c.top) || c.low > c.top || c.low <= c.floor {
			return nil, fmt.Errorf("design: the range of %s is %g to %g: it must rise and stay above %g", c.name, c.low, c.top, c.floor)
		}
	}
	if err := d.parameters(); err != nil {
		return nil, err
	}
	return d, nil
}

// parameters takes over the parameters that shape the model.
func (d *drawer) parameters() error {
	s := d.s
	if s.Cov == nil {
		for name := range d.m.CI95 {
			if _, ok := shape(d.m, name); ok {
				d.names = append(d.names, name)
			}
		}
		sort.Strings(d.names) // a map has no order, a seed must have one
		d.chol = make([][]float64, len(d.names))
		for i, name := range d.names {
			v, _ := shape(d.m, name)
			d.values = append(d.values, v)
			d.chol[i] = make([]float64, len(d.names))
			ci := d.m.CI95[name]
			d.chol[i][i] = (ci[1] - ci[0]) / (2 * 1.959964)
			if logarithmic[name] && ci[0] > 0 {
				d.chol[i][i] = v * math.Log(ci[1]/ci[0]) / (2 * 1.959964)
			}
		}
		return nil
	}
	if len(s.Names) != len(s.Cov) || len(s.Values) != len(s.Cov) {
		return fmt.Errorf("design: %d names and %d values for a covariance of %d rows", len(s.Names), len(s.Values), len(s.Cov))
	}
	var keep []int
	for i, name := range s.Names {
		if len(s.Cov[i]) != len(s.Cov) {
			return fmt.Errorf("design: row %d of the covariance has %d entries, want %d", i, len(s.Cov[i]), len(s.Cov))
		}
		if _, ok := shape(d.m, name); ok {
			keep = append(keep, i)
			d.names = append(d.names, name)
			d.values = append(d.values, s.Values[i])
		}
	}
	cov := make([][]float64, len(keep))
	for a, i := range keep {
		cov[a] = make([]float64, len(keep))
		for b, j := range keep {
			cov[a][b] = s.Cov[i][j]
		}
	}
	chol, err := cholesky(cov)
	d.chol = chol
	return err
}

// shape returns the value that the named parameter has in m, and whether it is
// one that shapes m.
func shape(m model.Linear, name string) (float64, bool) {
	n := len(m.Den)
	switch name {
	case "gain", "slope":
		return m.Num[len(m.Num)-1], true
	case "dead_time":
		return m.DeadTime, true
	case "tau", "tau1", "tau2":
		if n == 2 && m.Den[1] != 0 && name != "tau2" {
			return m.Den[0] / m.Den[1], true
		}
		if n == 3 && m.Den[2] != 0 {
			roots := model.Roots(m.Den)
			if imag(roots[0]) != 0 {
				return 0, false
			}
			slow, fast := -1/real(roots[0]), -1/real(roots[1])
			if slow < fast {
				slow, fast = fast, slow
			}
			if name == "tau2" {
				return fast, true
			}
			return slow, true
		}
	case "natural_frequency", "damping":
		if n == 3 && m.Den[2] > 0 && m.Den[0] > 0 {
			w := math.Sqrt(m.Den[2] / m.Den[0])
			if name == "damping" {
				return m.Den[1] / m.Den[0] / (2 * w), true
			}
			return w, true
		}
	}
	return 0, false
}

// next draws one motor; the first eight are the corners of the stated ranges.
func (d *drawer) next() model.Linear {
	value := map[string]float64{}
	z := make([]float64, len(d.names))
	for i := range z {
		z[i] = d.r.NormFloat64()
	}
	corner := d.n < 8
	for i, name := range d.names {
		var dx float64
		for j := 0; j <= i; j++ {
			dx += d.chol[i][j] * z[j]
		}
		switch {
		case corner:
			value[name] = d.values[i]
		case logarithmic[name]:
			value[name] = d.values[i] * math.Exp(dx/d.values[i])
		default:
			value[name] = d.values[i] + dx
		}
	}
	u := [3]float64{d.r.Float64(), d.r.Float64(), d.r.Float64()}
	if corner {
		for i := range u {
			u[i] = float64(d.n >> i & 1)
		}
	}
	d.n++
	s := d.s
	between := func(lo, hi, u float64) float64 { return lo + (hi-lo)*u }
	inertia := s.InertiaMin * math.Pow(s.InertiaMax/s.InertiaMin, u[0])
	return vary(rebuild(d.m, value), inertia, between(s.GainMin, s.GainMax, u[1]), between(s.WarmMin, s.WarmMax, u[2]), s.MagnetPerKelvin)
}

// rebuild returns m with the given parameters in place of its own.
func rebuild(m model.Linear, value map[string]float64) model.Linear {
	or := func(name string, other float64) float64 {
		if v, ok := value[name]; ok {
			return v
		}
		return other
	}
	get := func(name string) float64 { v, _ := shape(m, name); return or(name, v) }
	out := m
	out.DeadTime = math.Max(0, or("dead_time", m.DeadTime))
	gain := or("gain", or("slope", m.Num[len(m.Num)-1]))
	out = out.Scale(gain / m.Num[len(m.Num)-1])
	out.Den = append([]float64(nil), m.Den...)
	tau := or("tau1", or("tau", math.NaN()))
	n := len(m.Den)
	switch {
	case n == 2 && m.Den[1] != 0 && !math.IsNaN(tau):
		out.Den[0] = tau * m.Den[1]
	case n == 3 && (!math.IsNaN(tau) || hasKey(value, "tau2")):
		if math.IsNaN(tau) {
			tau = get("tau")
		}
		tau2 := get("tau2")
		out.Den[0], out.Den[1] = tau*tau2*m.Den[2], (tau+tau2)*m.Den[2]
	case n == 3 && (hasKey(value, "natural_frequency") || hasKey(value, "damping")):
		w, zeta := get("natural_frequency"), get("damping")
		out.Den[0], out.Den[1] = m.Den[2]/(w*w), 2*zeta/w*m.Den[2]
	}
	return out
}

func hasKey(m map[string]float64, key string) bool { _, ok := m[key]; return ok }

// vary changes inertia, gain and temperature of a motor. From the motor's
// equations with little viscous friction: every lag coefficient of the
// denominator grows with J/(Ke·Kt), that of s also with R; the gain falls with Ke.
// For more than two poles this takes the mechanical lag as the longest by far.
func vary(m model.Linear, inertia, gain, warmK, magnetPerKelvin float64) model.Linear {
	copper := 1 + model.CopperPerKelvin*warmK
	flux := 1 + magnetPerKelvin*warmK
	den := append([]float64(nil), m.Den...)
	last := len(den) - 1
	if den[last] == 0 { // an integrating motor: its slope is Kt/(J·R)
		m = m.Scale(gain * flux / (inertia * copper))
		m.Den = den
		return m
	}
	for i := range last {
		den[i] *= inertia / (flux * flux)
		if i == last-1 {
			den[i] *= copper
		}
	}
	m = m.Scale(gain / flux)
	m.Den = den
	return m
}

// cholesky returns the lower factor of a covariance; directions without any
// spread are allowed.
func cholesky(a [][]float64) ([][]float64, error) {
	n := len(a)
	l := make([][]float64, n)
	for i := range n {
		l[i] = make([]float64, n)
		for j := 0; j <= i; j++ {
			sum := a[i][j]
			for k := range j {
				sum -= l[i][k] * l[j][k]
			}
			switch {
			case i == j && (sum < -1e-9*math.Abs(a[i][i]) || math.IsNaN(sum)):
				return nil, fmt.Errorf("design: the covariance is not one: row %d", i)
			case i == j:
				l[i][i] = math.Sqrt(math.Max(0, sum))
			case l[j][j] > 0:
				l[i][j] = sum / l[j][j]
			}
		}
	}
	return l, nil
}

// ProposeFor95 designs by our own rule so that Ms stays within o.MsMax for 95 %
// of the spread, by asking for a lower Ms on m itself. It returns the proposal
// and its worst case. Even the most careful gains may not do; then the proposal
// says so in Refused.
func ProposeFor95(m model.Linear, o Options, s Spread) (Proposal, Worst, error) {
	o, err := o.complete()
	if err != nil {
		return Proposal{}, Worst{}, err
	}
	o.Rule = RuleLargestKi
	bound := o.MsMax
	coarse := s
	coarse.Draws = 250 // enough to steer by; the outcome is judged on all draws
	attempt := func(target float64, s Spread) (Proposal, Worst, error) {
		o.MsMax = target
		ps, chosen, err := Propose(m, o)
		if err != nil || chosen < 0 {
			if len(ps) > 0 {
				return ps[0], Worst{}, err
			}
			return Proposal{}, Worst{}, err
		}
		w, err := worstCase(m, ps[chosen].Gains, s)
		return ps[chosen], w, err
	}
	if s.Draws < DrawsMin {
		s.Draws = DrawsMin
	}
	p, w, err := attempt(bound, s)
	if err != nil || p.Refused != "" || w.Ms <= Value(bound)*(1+1e-6) {
		return p, w, err
	}
	lo, hi := 1.1, bound
	for range 7 {
		mid := (lo + hi) / 2
		_, c, err := attempt(mid, coarse)
		if err != nil {
			return p, w, err
		}
		if c.Ms.Known() && c.Ms <= Value(bound)*0.995 {
			lo = mid
		} else {
			hi = mid
		}
	}
	p, w, err = attempt(lo, s)
	if err == nil && p.Refused == "" {
		if !w.Ms.Known() || w.Ms > Value(bound)*1.001 {
			p.Refused = fmt.Sprintf("no gains keep Ms at or under %.3g for 95 %% of the motors in the stated range: narrow the range, or fit with more data", bound)
			return p, w, nil
		}
		p.Notes = append(p.Notes, fmt.Sprintf("designed for Ms ≤ %.3g so that 95 %% of the stated range keep Ms ≤ %.3g", lo, bound))
	}
	return p, w, err
}
