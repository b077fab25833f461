package design

import (
	"fmt"
	"math"
	"sort"

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

// WorstCase judges g on motors drawn from the spread about m. The corners of the
// stated ranges come first among the draws.
func WorstCase(m model.Linear, g Gains, s Spread) (Worst, error) {
	if s.Draws < DrawsMin {
		s.Draws = DrawsMin
	}
	return worstCase(m, g, s)
}

// WorstOf is WorstCase on as many draws as are given, to steer by.
func WorstOf(m model.Linear, g Gains, s Spread, draws int) (Worst, error) {
	s.Draws = draws
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
		p.apply(c.next(1, y, g.Feedforward.linear(1)))
	}
	return 100 * math.Max(0, top-1)
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
