package design

import (
	"math"
	"math/cmplx"

	"gainwright/tune/model"
)

// Value is a number that may not be known: NaN, which is null in JSON.
type Value = model.Value

// Unknown is the Value that is not known.
var Unknown = model.Unknown

// Margins says how far a loop is from instability and how it answers. Every
// value but Stable is Unknown for a loop that is not stable.
type Margins struct {
	// GainMargin is the smallest factor above 1 that brings instability, Unknown
	// where none does; GainMarginDB is the same in dB.
	GainMargin   Value `json:"gain_margin"`
	GainMarginDB Value `json:"gain_margin_db"`
	// PhaseMargin is in degrees, at the gain crossover where it is smallest in
	// magnitude; Unknown where |L| never passes 1.
	PhaseMargin Value `json:"phase_margin_deg"`
	// DelayMargin is the least further dead time in s that brings instability,
	// over all gain crossovers.
	DelayMargin    Value `json:"delay_margin_s"`
	Crossover      Value `json:"crossover_rad_s"`       // the gain crossover of PhaseMargin
	PhaseCrossover Value `json:"phase_crossover_rad_s"` // the frequency of GainMargin
	// GainMarginLow is the largest factor below 1 that brings instability;
	// Unknown for all but conditionally stable loops.
	GainMarginLow Value     `json:"gain_margin_low"`
	Ms            Value     `json:"ms"` // largest |1/(1+L)|
	Mt            Value     `json:"mt"` // largest |L/(1+L)|
	MsAt          Value     `json:"ms_rad_s"`
	Crossovers    []float64 `json:"crossovers_rad_s,omitempty"` // every gain crossover
	Stable        bool      `json:"stable"`
	Step          Step      `json:"step"`
	LoadStep      LoadStep  `json:"load_step"`
}

// Step describes the answer to a unit step of the setpoint, time counted from
// the step, dead time included.
type Step struct {
	RiseTime     Value `json:"rise_time_s"`       // 10 % to 90 %
	Overshoot    Value `json:"overshoot_percent"` // 0 if the speed never exceeds the setpoint
	SettlingTime Value `json:"settling_time_s"`   // last instant outside ±2 %
	IAE          Value `json:"iae"`               // ∫|r − y|, in rad/s·s per rad/s
}

// LoadStep describes the answer to a unit step added to the drive.
type LoadStep struct {
	IAE  Value `json:"iae"`  // ∫|y|
	Peak Value `json:"peak"` // largest |y| in rad/s per V
}

func unknownMargins() Margins {
	u := Unknown
	return Margins{
		GainMargin: u, GainMarginDB: u, PhaseMargin: u, DelayMargin: u, Crossover: u, PhaseCrossover: u,
		GainMarginLow: u, Ms: u, Mt: u, MsAt: u,
		Step: Step{u, u, u, u}, LoadStep: LoadStep{u, u},
	}
}

// Judge returns the exact margins and the step responses of the loop that g
// closes around m. SampleTime > 0 makes it the sampled loop with a zero-order
// hold, compute delay and discrete law. A loop that is not stable is no error:
// Stable says so. Errors wrap model.ErrModel or ErrGains.
func Judge(m model.Linear, g Gains) (Margins, error) {
	l, err := newLoop(m, g)
	if err != nil {
		return unknownMargins(), err
	}
	margins, err := l.margins()
	if err != nil || !margins.Stable {
		return margins, err
	}
	margins.Step, margins.LoadStep, err = responses(m, g.Parallel())
	return margins, err
}

// JudgeFrequency is Judge without the step responses, which take most of its
// time.
func JudgeFrequency(m model.Linear, g Gains) (Margins, error) {
	l, err := newLoop(m, g)
	if err != nil {
		return unknownMargins(), err
	}
	return l.margins()
}

func (l *loop) margins() (Margins, error) {
	out := unknownMargins()
	pts, err := l.scan()
	if err != nil {
		return out, err
	}
	if !l.stable(pts) {
		return out, nil
	}
	out.Stable = true
	l.phaseMargins(&out, pts)
	l.gainMargins(&out, pts)
	l.peaks(&out, pts)
	return out, nil
}

// phaseMargins finds every gain crossover.
func (l *loop) phaseMargins(out *Margins, pts []point) {
	logAbs := func(w float64) float64 { return math.Log(cmplx.Abs(l.at(w))) }
	take := func(a, b float64) {
		w := root(logAbs, a, b)
		pm := cmplx.Phase(-l.at(w))
		out.Crossovers = append(out.Crossovers, w)
		if !out.PhaseMargin.Known() || math.Abs(pm)*180/math.Pi < math.Abs(float64(out.PhaseMargin)) {
			out.PhaseMargin, out.Crossover = Value(pm*180/math.Pi), Value(w)
		}
		if pm < 0 {
			pm += 2 * math.Pi
		}
		if dm := pm / w; !out.DelayMargin.Known() || dm < float64(out.DelayMargin) {
			out.DelayMargin = Value(dm)
		}
	}
	for i := 1; i < len(pts); i++ {
		a, b := cmplx.Abs(pts[i-1].l), cmplx.Abs(pts[i].l)
		if a > 1 != (b > 1) {
			take(pts[i-1].w, pts[i].w)
			continue
		}
		if i < 2 {
			continue
		}
		// A bump that just touches 1 can hide between two points.
		before := cmplx.Abs(pts[i-2].l)
		side := 1.0
		if a > 1 {
			side = -1
		}
		if side*(a-before) > 0 && side*(a-b) >= 0 && math.Abs(math.Log(a)) < 0.1 && before > 1 == (a > 1) {
			top := maximum(func(w float64) float64 { return side * cmplx.Abs(l.at(w)) }, pts[i-2].w, pts[i].w)
			if cmplx.Abs(l.at(top)) > 1 != (a > 1) {
				take(pts[i-2].w, top)
				take(top, pts[i].w)
			}
		}
	}
}

// gainMargins finds every crossing of the negative real axis.
func (l *loop) gainMargins(out *Margins, pts []point) {
	take := func(w, size float64) {
		gm := Value(1 / size)
		if gm > 1 && (!out.GainMargin.Known() || gm < out.GainMargin) {
			out.GainMargin, out.PhaseCrossover = gm, Value(w)
			out.GainMarginDB = Value(20 * math.Log10(float64(gm)))
		}
		if gm < 1 && (!out.GainMarginLow.Known() || gm > out.GainMarginLow) {
			out.GainMarginLow = gm
		}
	}
	im := func(w float64) float64 { v := l.at(w); return imag(v) / cmplx.Abs(v) }
	last := len(pts) - 1
	nyquist := !math.IsInf(l.end, 1)
	for i := 1; i < len(pts); i++ {
		if nyquist && i == last {
			break // the imaginary part at π/h is rounding noise
		}
		if crossesNegative(pts[i-1].l, pts[i].l) {
			w := root(im, pts[i-1].w, pts[i].w)
			take(w, cmplx.Abs(l.at(w)))
		}
	}
	if nyquist && real(pts[last].l) < 0 {
		take(pts[last].w, -real(pts[last].l))
		// The last step before π/h may hold a crossing of its own.
		if a := pts[last-1]; real(a.l) < 0 {
			near := l.end * (1 - 1e-6)
			if b := l.at(near); crossesNegative(a.l, b) {
				w := root(im, a.w, near)
				take(w, cmplx.Abs(l.at(w)))
			}
		}
	}
}

// peaks finds Ms and Mt. The limits ω → 0 and ω → ∞ belong to the supremum.
func (l *loop) peaks(out *Margins, pts []point) {
	s := func(w float64) float64 { return 1 / cmplx.Abs(1+l.at(w)) }
	t := func(w float64) float64 { v := l.at(w); return cmplx.Abs(v / (1 + v)) }
	ms, msAt := largest(s, pts)
	if math.IsInf(l.end, 1) && ms < 1 {
		ms = 1 // |S| tends to 1 where L dies away
	}
	mt, _ := largest(t, pts)
	if l.zero > 0 && mt < 1+1e-9 {
		mt = 1
	}
	out.Ms, out.MsAt, out.Mt = Value(ms), Value(msAt), Value(mt)
}

// largest returns the maximum of f over the scanned range and where it lies.
func largest(f func(float64) float64, pts []point) (value, at float64) {
	v := make([]float64, len(pts))
	for i, p := range pts {
		v[i] = f(p.w)
		if v[i] > value {
			value, at = v[i], p.w
		}
	}
	floor := value * 0.95
	for i := 1; i+1 < len(v); i++ {
		if v[i] >= floor && v[i] >= v[i-1] && v[i] >= v[i+1] {
			w := maximum(f, pts[i-1].w, pts[i+1].w)
			if x := f(w); x > value {
				value, at = x, w
			}
		}
	}
	return value, at
}
