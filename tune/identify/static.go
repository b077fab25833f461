package identify

import (
	"fmt"
	"math"
)

// Level is one settled step of a staircase.
type Level struct {
	Volts   float64 `json:"volts"`    // V, mean over the averaged part
	Speed   float64 `json:"speed"`    // rad/s, mean over the averaged part
	SpeedSD float64 `json:"speed_sd"` // rad/s, of the single samples
	N       int     `json:"n"`        // samples averaged
	Current float64 `json:"current"`  // A, mean; NaN is not used: 0 where not recorded
	Settled bool    `json:"settled"`
	From    float64 `json:"from"` // s, start of the averaged part
	To      float64 `json:"to"`   // s
}

// Static is what settled levels tell: speed = Gain·(volts ∓ friction voltage).
// Numbers for a direction that was not run are NaN. The friction voltage is
// Coulomb friction seen through the motor, R·Tc/Kt; without a current
// measurement R, Kt and the viscous part do not come apart: the gain holds
// Ke and viscous friction together, 1/(Ke + R·b/Kt).
type Static struct {
	Gain, GainSD             float64 // rad/s per V, both directions together
	GainForward, GainReverse float64 // rad/s per V
	CoulombForward           float64 // V, > 0
	CoulombForwardSD         float64
	CoulombReverse           float64 // V, > 0: what reverse running costs
	CoulombReverseSD         float64
	Nonlinearity             float64 // relative change of the slope from the slowest level to the fastest
	NonlinearitySD           float64
	Hysteresis               float64 // mean speed on the way down minus on the way up, over the mean speed; NaN for one way only
	RMSE                     float64 // rad/s
	Used, Stuck, Unsettled   int     // levels
	SpeedMin, SpeedMax       float64 // rad/s, magnitudes of the levels used
	Remarks                  []string
}

// Shares for telling a stuck level and for remarks. 5 % and 20 % for the
// directions and 10 % for hysteresis: common practice, no source.
const (
	stuckShare     = 0.02
	directionCare  = 0.20
	hysteresisCare = 0.10
	nonlinearCare  = 0.15
	levelFloor     = 0.002 // of the fastest level: no level is better known than that
	levelsLeast    = 3
)

// FitStaircase fits a common gain and a friction voltage for each direction to
// the levels that turn. It needs three of them, two of different speed. The
// error wraps ErrData.
func FitStaircase(levels []Level) (Static, error) {
	var out Static
	fast := 0.0
	for _, l := range levels {
		if !finite(l.Volts) || !finite(l.Speed) || !finite(l.SpeedSD) {
			return out, fmt.Errorf("%w: a level is not a finite number", ErrData)
		}
		fast = math.Max(fast, math.Abs(l.Speed))
	}
	var use []Level
	for _, l := range levels {
		switch {
		case math.Abs(l.Speed) <= stuckShare*fast || l.Speed*l.Volts <= 0:
			out.Stuck++
		default:
			if !l.Settled {
				out.Unsettled++
			}
			use = append(use, l)
		}
	}
	out.Used = len(use)
	if len(use) < levelsLeast {
		return out, fmt.Errorf("%w: %d levels turn, at least %d are needed: go to higher voltages", ErrData, len(use), levelsLeast)
	}
	if err := out.common(use, fast); err != nil {
		return out, err
	}
	out.GainForward, out.GainReverse = slopeOf(use, 1), slopeOf(use, -1)
	out.curvature(use, fast)
	out.Hysteresis = hysteresis(levels, fast)
	out.remark()
	return out, nil
}

// common solves speed = K·volts − F·[forward] + B·[reverse] by weighted least
// squares; the friction voltages are F/K and B/K.
func (s *Static) common(use []Level, fast float64) error {
	forward, reverse := false, false
	for _, l := range use {
		if l.Speed > 0 {
			forward = true
		} else {
			reverse = true
		}
	}
	var cols []func(Level) float64
	cols = append(cols, func(l Level) float64 { return l.Volts })
	if forward {
		cols = append(cols, func(l Level) float64 { return -step01(l.Speed) })
	}
	if reverse {
		cols = append(cols, func(l Level) float64 { return step01(-l.Speed) })
	}
	b, cov, rmse, err := levelRegression(use, fast, cols)
	if err != nil {
		return err
	}
	p := len(b)
	s.Gain, s.GainSD, s.RMSE = b[0], math.Sqrt(cov[0]), rmse
	volts := func(i int) (v, sd float64) {
		v = b[i] / b[0]
		variance := (cov[i*p+i] - 2*v*cov[i] + v*v*cov[0]) / (b[0] * b[0])
		return v, math.Sqrt(math.Max(variance, 0))
	}
	s.CoulombForward, s.CoulombForwardSD = math.NaN(), math.NaN()
	s.CoulombReverse, s.CoulombReverseSD = math.NaN(), math.NaN()
	at := 1
	if forward {
		s.CoulombForward, s.CoulombForwardSD = volts(at)
		at++
	}
	if reverse {
		s.CoulombReverse, s.CoulombReverseSD = volts(at)
	}
	s.SpeedMin, s.SpeedMax = math.Inf(1), 0
	for _, l := range use {
		s.SpeedMin = math.Min(s.SpeedMin, math.Abs(l.Speed))
		s.SpeedMax = math.Max(s.SpeedMax, math.Abs(l.Speed))
	}
	return nil
}

func step01(v float64) float64 {
	if v > 0 {
		return 1
	}
	return 0
}

// levelRegression solves the weighted problem and scales the covariance by the
// scatter actually seen.
func levelRegression(use []Level, fast float64, cols []func(Level) float64) (b, cov []float64, rmse float64, err error) {
	p, n := len(cols), len(use)
	if n < p {
		return nil, nil, 0, fmt.Errorf("%w: %d levels for %d numbers", ErrData, n, p)
	}
	a, rhs := make([]float64, n*p), make([]float64, n)
	for i, l := range use {
		floor := levelFloor * fast
		w := 1 / math.Sqrt(l.SpeedSD*l.SpeedSD/float64(max(l.N, 1))+floor*floor)
		for j, c := range cols {
			a[i*p+j] = w * c(l)
		}
		rhs[i] = w * l.Speed
	}
	pt := NewPoint(p)
	Compress(a, p, rhs, pt)
	b = make([]float64, p)
	if pt.dependent() || !backSubstitute(pt.R, p, p, pt.Qtr, b) {
		return nil, nil, 0, fmt.Errorf("%w: the levels do not differ enough in voltage", ErrData)
	}
	cov = pt.Covariance()
	sum, chi := 0.0, pt.Cost
	for _, q := range pt.Qtr {
		chi -= q * q
	}
	for _, l := range use {
		e := l.Speed
		for j, c := range cols {
			e -= b[j] * c(l)
		}
		sum += e * e
	}
	scale := 1.0
	if n > p {
		scale = math.Max(chi/float64(n-p), 0)
	}
	for i := range cov {
		if !finite(cov[i]) {
			return nil, nil, 0, fmt.Errorf("%w: the levels do not differ enough in voltage", ErrData)
		}
		cov[i] *= scale
	}
	return b, cov, math.Sqrt(sum / float64(n)), nil
}

// slopeOf is the gain of one direction alone, NaN with fewer than two levels.
func slopeOf(use []Level, sign float64) float64 {
	var n, mv, ms float64
	for _, l := range use {
		if l.Speed*sign > 0 {
			n, mv, ms = n+1, mv+l.Volts, ms+l.Speed
		}
	}
	if n < 2 {
		return math.NaN()
	}
	mv, ms = mv/n, ms/n
	var num, den float64
	for _, l := range use {
		if l.Speed*sign > 0 {
			num += (l.Volts - mv) * (l.Speed - ms)
			den += (l.Volts - mv) * (l.Volts - mv)
		}
	}
	return num / den
}

// curvature fits a slope that changes with the level and expresses the change
// from the slowest level to the fastest relative to the gain.
func (s *Static) curvature(use []Level, fast float64) {
	s.Nonlinearity, s.NonlinearitySD = math.NaN(), math.NaN()
	lo, hi := math.Inf(1), 0.0
	for _, l := range use {
		lo, hi = math.Min(lo, math.Abs(l.Volts)), math.Max(hi, math.Abs(l.Volts))
	}
	mid := (lo + hi) / 2
	cols := []func(Level) float64{
		func(l Level) float64 { return l.Volts },
		func(l Level) float64 { d := math.Abs(l.Volts) - mid; return math.Copysign(d*d/2, l.Volts) },
	}
	for _, sign := range []float64{1, -1} {
		any := false
		for _, l := range use {
			any = any || l.Speed*sign > 0
		}
		if any {
			sign := sign
			cols = append(cols, func(l Level) float64 { return step01(sign * l.Speed) })
		}
	}
	if len(use) < len(cols)+1 || hi == lo {
		return
	}
	b, cov, _, err := levelRegression(use, fast, cols)
	if err != nil {
		return
	}
	s.Nonlinearity = b[1] * (hi - lo) / b[0]
	s.NonlinearitySD = math.Sqrt(cov[len(b)+1]) * (hi - lo) / math.Abs(b[0])
}

// hysteresis compares levels of the same voltage reached from below and from
// above.
func hysteresis(levels []Level, fast float64) float64 {
	sum, mean, n := 0.0, 0.0, 0
	for i := 1; i < len(levels); i++ {
		for j := i + 1; j < len(levels); j++ {
			a, b := levels[i], levels[j]
			if math.Abs(a.Speed) <= stuckShare*fast || math.Abs(a.Volts-b.Volts) > 0.01*math.Abs(a.Volts) {
				continue
			}
			up := math.Abs(levels[i-1].Volts) < math.Abs(a.Volts)
			down := math.Abs(levels[j-1].Volts) > math.Abs(b.Volts)
			if up && down {
				sum += math.Abs(b.Speed) - math.Abs(a.Speed)
				mean += (math.Abs(b.Speed) + math.Abs(a.Speed)) / 2
				n++
			}
		}
	}
	if n == 0 {
		return math.NaN()
	}
	return sum / mean
}

func (s *Static) remark() {
	note := func(format string, args ...any) { s.Remarks = append(s.Remarks, fmt.Sprintf(format, args...)) }
	if d := s.GainForward/s.GainReverse - 1; math.Abs(d) > directionCare {
		note("gain forward and reverse differ by %.0f %%: look for rubbing or timing", 100*d)
	}
	if math.Abs(s.Hysteresis) > hysteresisCare {
		note("levels on the way down differ by %.0f %% from those on the way up: warm up and repeat", 100*s.Hysteresis)
	}
	if math.Abs(s.Nonlinearity) > nonlinearCare && math.Abs(s.Nonlinearity) > 3*s.NonlinearitySD {
		note("gain changes by %.0f %% from the slowest level to the fastest: a model holds near one level only", 100*s.Nonlinearity)
	}
	if s.Unsettled > 0 {
		note("%d levels had not settled: dwell longer", s.Unsettled)
	}
}

// Friction is shaft friction as torque = Viscous·speed + Coulomb·sign(speed).
type Friction struct {
	Viscous, ViscousSD float64 // N·m·s/rad
	Coulomb, CoulombSD float64 // N·m
	RMSE               float64 // N·m
	N                  int
}

// FitFriction fits friction to settled speeds in rad/s and the torques in N·m
// that hold them, such as Kt times the current. Speeds of exactly 0 are left
// out. The error wraps ErrData.
func FitFriction(speed, torque []float64) (Friction, error) {
	if len(speed) != len(torque) {
		return Friction{}, fmt.Errorf("%w: %d speeds and %d torques", ErrData, len(speed), len(torque))
	}
	var a, rhs, w []float64
	for i := range speed {
		if !finite(speed[i]) || !finite(torque[i]) {
			return Friction{}, fmt.Errorf("%w: sample %d is not a finite number", ErrData, i)
		}
		if speed[i] != 0 {
			a = append(a, speed[i], math.Copysign(1, speed[i]))
			rhs = append(rhs, torque[i])
		}
	}
	n := len(rhs)
	if n < levelsLeast {
		return Friction{}, fmt.Errorf("%w: %d turning samples, at least %d are needed", ErrData, n, levelsLeast)
	}
	pt := NewPoint(2)
	Compress(a, 2, rhs, pt)
	w = make([]float64, 2)
	if pt.dependent() || !backSubstitute(pt.R, 2, 2, pt.Qtr, w) {
		return Friction{}, fmt.Errorf("%w: all speeds are alike", ErrData)
	}
	rss := math.Max(pt.Cost-pt.Qtr[0]*pt.Qtr[0]-pt.Qtr[1]*pt.Qtr[1], 0)
	cov := pt.Covariance()
	s2 := rss / float64(max(n-2, 1))
	return Friction{
		Viscous: w[0], ViscousSD: math.Sqrt(cov[0] * s2),
		Coulomb: w[1], CoulombSD: math.Sqrt(cov[3] * s2),
		RMSE: math.Sqrt(rss / float64(n)), N: n,
	}, nil
}
