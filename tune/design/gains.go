package design

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"

	"gainwright/protocol/si"
)

// Forms that gains are written in.
const (
	FormParallel = "parallel" // kp·e + ki·∫e + kd·de/dt
	FormIdeal    = "ideal"    // kp·(e + ∫e/ti + td·de/dt), the ISA standard form
	FormSeries   = "series"   // kc·(1 + 1/(ti·s))·(1 + td·s)
)

// Sampled laws.
const (
	BackwardEuler = "backward-euler"
	ForwardEuler  = "forward-euler"
	Tustin        = "tustin"
	Incremental   = "incremental" // backward Euler, summed at the output
)

// What the derivative acts on.
const (
	OnMeasurement = "measurement"
	OnError       = "error"
)

// What keeps the integral from winding up while the drive is saturated.
const (
	AntiWindupNone            = "none"
	AntiWindupClamp           = "clamp"            // the integral stands still while it would drive further into the limit
	AntiWindupBackCalculation = "back-calculation" // the integral is led back with TrackingTime
)

// ErrGains is what every refusal of ill-formed gains wraps.
var ErrGains = errors.New("design: gains not usable")

// Gains is a speed controller as a board runs it:
//
//	u = Kp·(SetpointWeight·r − y) + Ki·∫(r − y) + D,  D = −Kd·s/(1 + DerivativeFilter·s)·y
//
// r and y in rad/s, u in V. In the ideal and series forms Kp (Kc), Ti and Td
// stand for Kp, Ki and Kd; Parallel converts. The filter acts on the derivative
// alone in every form.
//
// The zero value of SetpointWeight is a controller whose proportional part does
// not see the setpoint; gains that are decoded without the key have 1.
type Gains struct {
	Form             string
	Kp               float64 // V per rad/s; parallel and ideal
	Ki               float64 // V per rad; parallel
	Kd               float64 // V·s² per rad; parallel
	Kc               float64 // V per rad/s; series
	Ti               float64 // s; ideal and series; +Inf means no integral
	Td               float64 // s; ideal and series
	DerivativeFilter float64 // s, ≥ 0
	SetpointWeight   float64 // 1 as a rule; ≥ 0
	SampleTime       float64 // s; 0 means continuous
	ComputeDelay     float64 // s, from the latched speed to the drive that follows from it
	DerivativeOn     string  // OnMeasurement (also empty) or OnError
	Discretisation   string  // BackwardEuler (also empty), ForwardEuler, Tustin, Incremental
	UMin, UMax       *float64
	AntiWindup       string  // empty where not known
	TrackingTime     float64 // s, for back-calculation; 0: none takes place
	Feedforward      *Feedforward
}

// Feedforward is what a board adds to the drive from the setpoint alone.
type Feedforward struct {
	Speed         float64 `json:"speed"`          // V per rad/s of setpoint
	StaticForward float64 `json:"static_forward"` // V added for a setpoint above 0
	StaticReverse float64 `json:"static_reverse"` // V taken away for a setpoint below 0
}

// PI returns parallel gains without derivative, setpoint weight 1.
func PI(kp, ki, sampleTime, computeDelay float64) Gains {
	return Gains{Form: FormParallel, Kp: kp, Ki: ki, SetpointWeight: 1, SampleTime: sampleTime, ComputeDelay: computeDelay}
}

// Validate reports the first reason why g cannot be used; it wraps ErrGains and
// names the JSON key at fault.
func (g Gains) Validate() error {
	for _, c := range []struct {
		key   string
		value float64
		low   float64
	}{
		{"kp", g.Kp, math.Inf(-1)}, {"ki", g.Ki, math.Inf(-1)}, {"kd", g.Kd, math.Inf(-1)}, {"kc", g.Kc, math.Inf(-1)},
		{"td", g.Td, 0}, {"derivative_filter", g.DerivativeFilter, 0}, {"setpoint_weight", g.SetpointWeight, 0},
		{"sample_time", g.SampleTime, 0}, {"compute_delay", g.ComputeDelay, 0}, {"tracking_time", g.TrackingTime, 0},
	} {
		if !si.Finite(c.value) {
			return badGains("%s is not a finite number", c.key)
		}
		if c.value < c.low {
			return badGains("%s is %g: it must be 0 or more", c.key, c.value)
		}
	}
	if err := g.validateWords(); err != nil {
		return err
	}
	if (g.Form == FormIdeal || g.Form == FormSeries) && !(g.Ti > 0) {
		return badGains("ti is %g s: it must be above 0 (leave it out for no integral)", g.Ti)
	}
	if g.UMin != nil && g.UMax != nil && !(*g.UMin < *g.UMax) {
		return badGains("u_min is %g and u_max %g: the drive has no range", *g.UMin, *g.UMax)
	}
	p := g.Parallel()
	if p.Kd != 0 && p.SampleTime > 0 && p.DerivativeFilter == 0 && (p.Discretisation == Tustin || p.Discretisation == ForwardEuler) {
		return badGains("derivative_filter is 0: the %s derivative rings or does not exist without one", p.Discretisation)
	}
	if p.Kd != 0 && p.Discretisation == ForwardEuler && p.SampleTime > 2*p.DerivativeFilter {
		return badGains("derivative_filter of %g s is under half the sample time: the forward-euler filter is unstable", p.DerivativeFilter)
	}
	return nil
}

func (g Gains) validateWords() error {
	for _, c := range []struct {
		key, value string
		known      []string
	}{
		{"form", g.Form, []string{"", FormParallel, FormIdeal, FormSeries}},
		{"derivative_on", g.DerivativeOn, []string{"", OnMeasurement, OnError}},
		{"discretisation", g.Discretisation, []string{"", BackwardEuler, ForwardEuler, Tustin, Incremental}},
		{"anti_windup", g.AntiWindup, []string{"", AntiWindupNone, AntiWindupClamp, AntiWindupBackCalculation}},
	} {
		found := false
		for _, k := range c.known {
			found = found || k == c.value
		}
		if !found {
			return badGains("%s is %q: it must be one of %q", c.key, c.value, c.known[1:])
		}
	}
	return nil
}

func badGains(format string, args ...any) error {
	return fmt.Errorf("%w: %s", ErrGains, fmt.Sprintf(format, args...))
}

// Parallel returns g in the parallel form. Conversions after Åström & Hägglund,
// PID Controllers, 2nd ed., section 3.4 (from memory).
func (g Gains) Parallel() Gains {
	kp, ti, td := g.Kp, g.Ti, g.Td
	switch g.Form {
	case FormIdeal:
	case FormSeries:
		f := 1 + g.Td/g.Ti
		kp, ti, td = g.Kc*f, g.Ti+g.Td, 0
		if g.Td > 0 {
			td = g.Td / f
		}
	default:
		g.Form = FormParallel
		return g
	}
	g.Form, g.Kp, g.Ki, g.Kd = FormParallel, kp, kp/ti, kp*td
	g.Kc, g.Ti, g.Td = 0, 0, 0
	return g
}

// To returns g in the given form. It refuses the ideal and series forms where
// kp is 0 but ki or kd is not, and the series form where ti < 4·td, for which
// the two factors would have to be complex.
func (g Gains) To(form string) (Gains, error) {
	p := g.Parallel()
	if form == FormParallel {
		return p, nil
	}
	if p.Kp == 0 && (p.Ki != 0 || p.Kd != 0) {
		return Gains{}, badGains("kp is 0: the %s form cannot hold an integral or a derivative without it; keep the parallel form", form)
	}
	ti, td := math.Inf(1), 0.0
	if p.Ki != 0 {
		ti = p.Kp / p.Ki
	}
	if p.Kd != 0 {
		td = p.Kd / p.Kp
	}
	p.Form, p.Ki, p.Kd = form, 0, 0
	switch form {
	case FormIdeal:
		p.Ti, p.Td = ti, td
		return p, nil
	case FormSeries:
		if ti < 4*td {
			return Gains{}, badGains("ti is %g s and td %g s: the series form needs ti of at least 4·td; keep the ideal or parallel form", ti, td)
		}
		if math.IsInf(ti, 1) {
			p.Kc, p.Kp, p.Ti, p.Td = p.Kp, 0, ti, td
			return p, nil
		}
		root := 1 + math.Sqrt(1-4*td/ti)
		p.Kc, p.Kp, p.Ti, p.Td = p.Kp*root/2, 0, ti*root/2, 2*td/root
		return p, nil
	}
	return Gains{}, badGains("form %q is not known: use parallel, ideal or series", form)
}

// gainsJSON is the shape of gains in a file.
type gainsJSON struct {
	Form             string       `json:"form"`
	Kp               *float64     `json:"kp,omitempty"`
	Ki               *float64     `json:"ki,omitempty"`
	Kd               *float64     `json:"kd,omitempty"`
	Kc               *float64     `json:"kc,omitempty"`
	Ti               *float64     `json:"ti,omitempty"`
	Td               *float64     `json:"td,omitempty"`
	DerivativeFilter float64      `json:"derivative_filter"`
	SetpointWeight   *float64     `json:"setpoint_weight"`
	SampleTime       float64      `json:"sample_time"`
	ComputeDelay     float64      `json:"compute_delay"`
	DerivativeOn     string       `json:"derivative_on,omitempty"`
	Discretisation   string       `json:"discretisation,omitempty"`
	UMin             *float64     `json:"u_min,omitempty"`
	UMax             *float64     `json:"u_max,omitempty"`
	AntiWindup       string       `json:"anti_windup,omitempty"`
	TrackingTime     float64      `json:"tracking_time,omitempty"`
	Feedforward      *Feedforward `json:"feedforward,omitempty"`
}

// MarshalJSON writes the keys of the form that g is in; no integral is an
// absent ti.
func (g Gains) MarshalJSON() ([]byte, error) {
	j := gainsJSON{
		Form: g.Form, DerivativeFilter: g.DerivativeFilter, SetpointWeight: &g.SetpointWeight,
		SampleTime: g.SampleTime, ComputeDelay: g.ComputeDelay, DerivativeOn: g.DerivativeOn,
		Discretisation: g.Discretisation, UMin: g.UMin, UMax: g.UMax,
		AntiWindup: g.AntiWindup, TrackingTime: g.TrackingTime, Feedforward: g.Feedforward,
	}
	switch g.Form {
	case FormIdeal:
		j.Kp, j.Td = &g.Kp, &g.Td
	case FormSeries:
		j.Kc, j.Td = &g.Kc, &g.Td
	default:
		j.Form, j.Kp, j.Ki, j.Kd = FormParallel, &g.Kp, &g.Ki, &g.Kd
	}
	if j.Td != nil && !math.IsInf(g.Ti, 1) {
		j.Ti = &g.Ti
	}
	return json.Marshal(j)
}

// UnmarshalJSON decodes and validates g. Absent keys: form parallel, setpoint
// weight 1, no integral, no derivative, continuous.
func (g *Gains) UnmarshalJSON(b []byte) error {
	var j gainsJSON
	if err := json.Unmarshal(b, &j); err != nil {
		return err
	}
	or := func(p *float64, def float64) float64 {
		if p == nil {
			return def
		}
		return *p
	}
	*g = Gains{
		Form: j.Form, DerivativeFilter: j.DerivativeFilter, SetpointWeight: or(j.SetpointWeight, 1),
		SampleTime: j.SampleTime, ComputeDelay: j.ComputeDelay, DerivativeOn: j.DerivativeOn,
		Discretisation: j.Discretisation, UMin: j.UMin, UMax: j.UMax,
		AntiWindup: j.AntiWindup, TrackingTime: j.TrackingTime, Feedforward: j.Feedforward,
	}
	if g.Form == "" {
		g.Form = FormParallel
	}
	var stray string
	check := func(key string, p *float64, ok bool) {
		if p != nil && !ok {
			stray = key
		}
	}
	ideal, series := g.Form == FormIdeal, g.Form == FormSeries
	check("kp", j.Kp, !series)
	check("ki", j.Ki, !ideal && !series)
	check("kd", j.Kd, !ideal && !series)
	check("kc", j.Kc, series)
	check("ti", j.Ti, ideal || series)
	check("td", j.Td, ideal || series)
	if stray != "" {
		return badGains("%s does not belong to the %s form", stray, g.Form)
	}
	if series && j.Kc == nil || !series && j.Kp == nil && j.Ki == nil {
		return badGains("no gain is given for the %s form", g.Form)
	}
	g.Kp, g.Ki, g.Kd, g.Kc = or(j.Kp, 0), or(j.Ki, 0), or(j.Kd, 0), or(j.Kc, 0)
	if ideal || series {
		g.Ti, g.Td = or(j.Ti, math.Inf(1)), or(j.Td, 0)
	}
	return g.Validate()
}
