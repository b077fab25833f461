package identify

import (
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"
)

// Finding is what one test of the residuals found: how strongly the data ask for
// an effect that the model does not have, others being refitted at the same
// time.
type Finding struct {
	Test   string  `json:"test"`
	Effect float64 `json:"effect"` // relative size of the effect, in the unit of the test
	SD     float64 `json:"sd"`
}

// z is the effect in its own standard deviations.
func (f Finding) z() float64 { return math.Abs(f.Effect) / f.SD }

// Names of the tests, and what their effect means.
const (
	testDrift       = "gain-drift"   // relative change of the gain from the start of the record to its end
	testBreak       = "gain-break"   // relative change of the gain at the worst moment
	testJump        = "offset-jump"  // jump of the speed at the worst moment, over the spread of the speed
	testLevel       = "gain-level"   // relative change of the slope from the lowest voltage to the highest
	testTop         = "top"          // relative loss of slope above the knee that fits best
	testDirection   = "rise-fall"    // log of the ratio of the time constants rising and falling
	testReversal    = "reversal"     // friction voltage at the change of direction, over the largest voltage
	testDynamics    = "dynamics"     // speed that past voltages still explain, over the spread of the model's speed
	testResonance   = "resonance"    // speed in the residual's sharpest peak, over that spread
	testSystematic  = "systematic"   // slow part of the residual, over that spread
	testThroughZero = "through-zero" // the same, where the record goes through zero speed
	testSlip        = "slip"         // jump of the speed between two samples, over that spread
)

// examiner holds what the tests share.
type examiner struct {
	e        *estimate
	jac      [][]float64 // orthonormal basis of what the model can already explain
	residual []float64
	begins   []int
	gain     float64
	spread   float64 // standard deviation of the simulated speed
}

// examine runs every test that applies. The estimate must have been fitted to
// speeds.
func (e *estimate) examine() []Finding {
	if e.dof < 30 || e.proj.samples == 0 {
		return nil
	}
	x := &examiner{e: e, residual: e.residual, gain: e.linear[0]}
	raw, begins := e.jacobian()
	x.begins = begins
	x.jac = orthonormal(raw)
	sim := e.simulated()
	x.spread = deviation(sim) / math.Sqrt(float64(len(sim)))
	if !(x.spread > 0) {
		return nil
	}
	var out []Finding
	for _, f := range []func() []Finding{x.drift, x.breaks, x.level, x.direction, x.reversal, x.dynamics, x.spectrum} {
		for _, found := range f() {
			if finite(found.Effect) && finite(found.SD) && found.SD > 0 {
				out = append(out, found)
			}
		}
	}
	return out
}

// simulated returns the simulated output at the used samples.
func (e *estimate) simulated() []float64 {
	var out []float64
	at := 0
	p := e.proj
	p.each(e.params, false, func(gm *spanGram, s *stretch, sp span, cols [][]float64) {
		out = append(out, pick(combine(gm.lay, cols, e.linear, e.locals[at]), sp)...)
		at++
	})
	return out
}

// column gathers one value per used sample from a function of the span and the
// sample of the stretch.
func (x *examiner) column(value func(s *stretch, cols [][]float64, sp span, i int) float64) []float64 {
	var out []float64
	x.e.proj.each(x.e.params, true, func(_ *spanGram, s *stretch, sp span, cols [][]float64) {
		col := make([]float64, sp.to-sp.from)
		for i := range col {
			col[i] = value(s, cols, sp, i)
		}
		out = append(out, pick(col, sp)...)
	})
	return out
}

// response simulates the fitted structure on another drive, built from the
// voltage of each stretch.
func (x *examiner) response(change func(float64) float64) []float64 {
	p := x.e.proj
	keep := make([]*drive, len(p.pieces))
	for k, s := range p.pieces {
		keep[k] = s.drive
		u := make([]float64, len(s.drive.u))
		for j, v := range s.drive.u {
			u[j] = change(v)
		}
		s.drive = newDrive(s.drive.t, u, change(keep[k].before))
	}
	defer func() {
		for k, s := range p.pieces {
			s.drive = keep[k]
		}
	}()
	return x.column(func(_ *stretch, cols [][]float64, _ span, i int) float64 { return cols[0][i] })
}

// clean takes out of col what the model can explain.
func (x *examiner) clean(col []float64) {
	for _, q := range x.jac {
		floats.AddScaled(col, -floats.Dot(q, col), q)
	}
}

// test estimates the coefficient of an extra column, with a standard deviation
// that allows for coloured residuals. ok is false where the model itself can
// imitate the column.
func (x *examiner) test(col []float64) (coef, sd float64, ok bool) {
	size := floats.Norm(col, 2)
	c := append([]float64(nil), col...)
	x.clean(c)
	energy := floats.Dot(c, c)
	if !(energy > 1e-6*size*size) {
		return 0, 0, false
	}
	coef = floats.Dot(c, x.residual) / energy
	rest := append([]float64(nil), x.residual...)
	floats.AddScaled(rest, -coef, c)
	variance := floats.Dot(rest, rest) / float64(max(x.e.dof-1, 1))
	sd = math.Sqrt(variance / energy)
	if p := ljungBox(rest, 0); p < colourLevel {
		ar := fitAutoregression(rest, min(8, len(rest)/20))
		x.colour(ar, c)
		sd = math.Max(sd, math.Sqrt(ar.variance*floats.Dot(c, c))/energy)
	}
	return coef, sd, sd > 0
}

// colour runs a column through the noise model, span by span.
func (x *examiner) colour(ar autoregression, col []float64) {
	for k, from := range x.begins {
		to := len(col)
		if k+1 < len(x.begins) {
			to = x.begins[k+1]
		}
		ar.backColour(col[from:to])
	}
}

// effect runs test and scales its result.
func (x *examiner) effect(name string, col []float64, scale float64) []Finding {
	coef, sd, ok := x.test(col)
	if !ok {
		return nil
	}
	return []Finding{{name, coef / scale, sd / math.Abs(scale)}}
}

// responseColumn is the unit-gain response at the used samples.
func (x *examiner) responseColumn() []float64 {
	return x.column(func(_ *stretch, cols [][]float64, _ span, i int) float64 { return cols[0][i] })
}

// times returns the time of every used sample as a fraction of the record, −½ to ½.
func (x *examiner) times() []float64 {
	last := 0.0
	for _, s := range x.e.proj.pieces {
		last = math.Max(last, s.lag+s.drive.t[len(s.drive.t)-1])
	}
	return x.column(func(s *stretch, _ [][]float64, sp span, i int) float64 {
		return (s.lag+s.drive.t[sp.from+i])/last - 0.5
	})
}

func (x *examiner) drift() []Finding {
	col := x.responseColumn()
	floats.Mul(col, x.times())
	return x.effect(testDrift, col, x.gain)
}

// breaks looks for a moment at which the gain changes, and for one at which the
// speed jumps.
func (x *examiner) breaks() []Finding {
	const moments = 24
	base, n := x.responseColumn(), len(x.residual)
	var best [2]Finding
	for k := 1; k < moments; k++ {
		cut := k * n / moments
		gain, jump := make([]float64, n), make([]float64, n)
		copy(gain[cut:], base[cut:])
		for i := cut; i < n; i++ {
			jump[i] = 1
		}
		for t, f := range [][]Finding{x.effect(testBreak, gain, x.gain), x.effect(testJump, jump, x.spread)} {
			if len(f) > 0 && (best[t].Test == "" || f[0].z() > best[t].z()) {
				best[t] = f[0]
			}
		}
	}
	var out []Finding
	for _, f := range best {
		if f.Test != "" {
			out = append(out, f)
		}
	}
	return out
}

// voltages returns the range of the voltage that acts on the used stretches.
func (x *examiner) voltages() (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, s := range x.e.proj.pieces {
		for _, u := range s.drive.u {
			lo, hi = math.Min(lo, u), math.Max(hi, u)
		}
	}
	return lo, hi
}

// level tests for a slope that changes steadily with the voltage, and for one
// that is lost above a knee.
func (x *examiner) level() []Finding {
	lo, hi := x.voltages()
	if !(hi > lo) {
		return nil
	}
	mid, span := (lo+hi)/2, hi-lo
	out := x.effect(testLevel, x.response(func(u float64) float64 { return (u - mid) * (u - mid) / (2 * span) }), x.gain)
	var knee Finding
	for _, share := range []float64{0.5, 0.65, 0.8} {
		at := lo + share*span
		f := x.effect(testTop, x.response(func(u float64) float64 { return math.Max(u-at, 0) }), x.gain)
		if len(f) > 0 && (knee.Test == "" || f[0].z() > knee.z()) {
			knee = f[0]
		}
	}
	if knee.Test != "" {
		out = append(out, knee)
	}
	return out
}

// direction tests whether the time constant differs between rising and falling
// speed.
func (x *examiner) direction() []Finding {
	p := x.e.proj
	if p.kern.shapes() == 0 {
		return nil
	}
	col := x.column(func(s *stretch, cols [][]float64, sp span, i int) float64 {
		l := p.layout(s, sp)
		base := l.globals + l.locals
		slope := -cols[base+l.shapes-1][i] // by time
		tau := cols[base][i]
		return math.Copysign(0.5, slope) * tau
	})
	return x.effect(testDirection, col, x.gain)
}

// reversal tests for friction that changes sign with the speed, where the record
// goes through zero: the response to a voltage that follows the sign of the
// simulated speed.
func (x *examiner) reversal() []Finding {
	if !x.reverses() || x.e.proj.kern.shapes() == 0 {
		return nil
	}
	sim := x.e.simulated()
	top := math.Max(-floats.Min(sim), floats.Max(sim))
	p := x.e.proj
	keep := make([]*drive, len(p.pieces))
	for k, s := range p.pieces {
		keep[k] = s.drive
	}
	at, piece := 0, 0
	p.each(x.e.params, false, func(gm *spanGram, s *stretch, sp span, cols [][]float64) {
		for p.pieces[piece] != s {
			piece++
		}
		y := combine(gm.lay, cols, x.e.linear, x.e.locals[at])
		at++
		u := make([]float64, len(s.drive.u))
		for i := sp.from; i < sp.to; i++ {
			u[i] = math.Tanh(y[i-sp.from] / (0.05 * top))
		}
		keep[piece] = newDrive(s.drive.t, u, u[0])
	})
	for k, s := range p.pieces {
		s.drive, keep[k] = keep[k], s.drive
	}
	col := x.responseColumn()
	for k, s := range p.pieces {
		s.drive = keep[k]
	}
	lo, hi := x.voltages()
	return x.effect(testReversal, col, -x.gain*math.Max(math.Abs(lo), math.Abs(hi)))
}

// reverses reports whether the simulated speed takes both signs.
func (x *examiner) reverses() bool {
	sim := x.e.simulated()
	lo, hi := floats.Min(sim), floats.Max(sim)
	top := math.Max(-lo, hi)
	return lo < -0.1*top && hi > 0.1*top
}

// dynamics asks whether past voltages explain anything that is left over, by
// eight delayed copies of the drive; effect is the speed they explain, and SD is
// such that z is the size of the test statistic in its own spread.
func (x *examiner) dynamics() []Finding {
	const taps = 8
	h, long := x.e.proj.extent()
	reach := math.Min(4*x.timescale()+6*h, long/6)
	var cols [][]float64
	for k := 0; k < taps; k++ {
		delay := reach * float64(k) / taps
		c := x.column(func(s *stretch, _ [][]float64, sp span, i int) float64 {
			return s.drive.at(s.drive.t[sp.from+i] - delay)
		})
		x.clean(c)
		for _, q := range cols {
			floats.AddScaled(c, -floats.Dot(q, c), q)
		}
		if n := floats.Norm(c, 2); n > 1e-6 {
			floats.Scale(1/n, c)
			cols = append(cols, c)
		}
	}
	if len(cols) == 0 {
		return nil
	}
	rest := append([]float64(nil), x.residual...)
	sum := 0.0
	for _, q := range cols {
		d := floats.Dot(q, x.residual)
		sum += d * d
		floats.AddScaled(rest, -d, q)
	}
	ar := fitAutoregression(rest, min(8, len(rest)/20))
	mean := 0.0
	for _, q := range cols {
		c := append([]float64(nil), q...)
		x.colour(ar, c)
		mean += ar.variance * floats.Dot(c, c)
	}
	if !(mean > 0) {
		return nil
	}
	k := float64(len(cols))
	stat := sum / (mean / k) // about chi-squared with k degrees of freedom
	effect := math.Sqrt(math.Max(sum-mean, 0)/float64(len(x.residual))) / x.spread
	z := (stat - k) / math.Sqrt(2*k)
	x.e.inputP = distuv.ChiSquared{K: k}.Survival(stat)
	return []Finding{{testDynamics, effect, effect / math.Max(z, 1e-9)}}
}

// timescale is the sum of the fitted time constants and the dead time.
func (x *examiner) timescale() float64 {
	shapes := x.e.proj.kern.shapes()
	t := x.e.params[shapes]
	if shapes > 0 {
		t += math.Exp(x.e.params[0])
	}
	return t
}

// at returns the voltage applied at time t of the stretch.
func (d *drive) at(t float64) float64 {
	lo, hi := 0, len(d.t)
	for lo < hi {
		m := (lo + hi) / 2
		if d.t[m] < t {
			lo = m + 1
		} else {
			hi = m
		}
	}
	if lo == 0 {
		return d.before
	}
	return d.u[lo-1]
}
