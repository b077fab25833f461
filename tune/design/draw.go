package design

import (
	"fmt"
	"math"
	"math/rand/v2"
	"sort"

	"gainwright/protocol/si"
	"gainwright/tune/model"
)

// newRand returns the generator that a seed stands for.
func newRand(seed uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, 0x9e3779b97f4a7c15)) }

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
	corner := d.n < cornersOf
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

// cornersOf is how many of the first motors of a drawer are corners.
const cornersOf = 8

// Likely returns n motors drawn from the covariance of s alone, its ranges left
// out: what the motor that was fitted may be.
func Likely(m model.Linear, s Spread, n int) ([]model.Linear, error) {
	d, err := newDrawer(m, Spread{Seed: s.Seed, Names: s.Names, Values: s.Values, Cov: s.Cov})
	if err != nil {
		return nil, err
	}
	d.n = cornersOf
	out := make([]model.Linear, n)
	for i := range out {
		out[i] = d.next()
	}
	return out, nil
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
