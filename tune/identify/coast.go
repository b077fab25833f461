package identify

import (
	"fmt"
	"math"
	"slices"

	"gainwright/tune/trace"
)

// Coast is what one coast-down with the winding open tells. Without current the
// motor obeys J·dω/dt = −T0 − b·ω, so the two numbers are T0/J and b/J: torques
// themselves need the inertia.
type Coast struct {
	Dry, DrySD         float64 // rad/s², dry friction over inertia: the straight part
	Viscous, ViscousSD float64 // 1/s, viscous friction over inertia: the curve
	Start, End         float64 // rad/s, magnitudes over which it was fitted
	RMSE               float64 // rad/s
	Bend               float64 // standard deviations that a quadratic in speed is away from none
	N                  int
	Direction          float64 // +1 or −1
}

// Shares of the starting speed between which a coast-down is fitted: below the
// lower one friction rises again towards breakaway (common practice, no source).
const (
	coastFrom  = 0.97
	coastTo    = 0.12
	coastLeast = 20 // samples
	coastSteps = 4  // of the reported speed that the slowest sample used must have
)

// coastGrid are rates c tried, times the length of the record.
var coastGrid = []float64{-2, -1, -0.5, 0, 0.5, 1, 1.5, 2, 3, 4, 6, 8, 12, 16, 24, 36, 60}

// FitCoast fits the speed of one coast-down: the last part of the trace in which
// the voltage is zero. The solution of the equation above is
//
//	ω(t) = ω0·e^(−ct) − a·(1 − e^(−ct))/c  with a = T0/J, c = b/J
//
// linear in ω0 and a, so that only c is searched. Standard deviations allow for
// coloured residuals. The error wraps ErrData.
func FitCoast(tr *trace.Trace) (Coast, error) {
	if err := tr.Validate(); err != nil {
		return Coast{}, err
	}
	t, y, dir, err := coastPart(tr)
	if err != nil {
		return Coast{}, err
	}
	out := Coast{Start: y[0], End: y[len(y)-1], N: len(y), Direction: dir}
	long := t[len(t)-1]
	// The cost in c is smooth and has one minimum: a grid finds its valley, and
	// thirds of it close in.
	cost := func(c float64) float64 {
		_, _, rss := coastLinear(t, y, c)
		return rss
	}
	best, lowest := 1, math.Inf(1)
	for i := 1; i < len(coastGrid)-1; i++ {
		if v := cost(coastGrid[i] / long); v < lowest {
			best, lowest = i, v
		}
	}
	lo, hi := coastGrid[best-1]/long, coastGrid[best+1]/long
	for range 32 {
		a, b := lo+(hi-lo)/3, hi-(hi-lo)/3
		if cost(a) < cost(b) {
			hi = b
		} else {
			lo = a
		}
	}
	c := (lo + hi) / 2
	w0, a, rss := coastLinear(t, y, c)
	out.Dry, out.Viscous = a, c
	out.RMSE = math.Sqrt(rss / float64(len(y)))
	var jac, res []float64
	for i := range t {
		e, phi, slope := coastTerms(t[i], c)
		jac = append(jac, e, -phi, -t[i]*w0*e-a*slope)
		res = append(res, y[i]-w0*e+a*phi)
	}
	pt := NewPoint(3)
	Compress(slices.Clone(jac), 3, slices.Clone(res), pt)
	if pt.dependent() {
		return out, fmt.Errorf("%w: the coast-down is too short to tell dry from viscous friction", ErrData)
	}
	cov, grow := pt.Covariance(), longRun(res)
	s2 := rss / float64(len(y)-3) * grow
	out.DrySD, out.ViscousSD = math.Sqrt(cov[4]*s2), math.Sqrt(cov[8]*s2)
	out.Bend = coastBend(t, y, res, jac)
	return out, nil
}

// coastPart cuts the samples that are fitted: time from their first, speed as a
// magnitude.
func coastPart(tr *trace.Trace) (t, y []float64, dir float64, err error) {
	n := tr.Len()
	off := n
	for off > 0 && tr.Voltage[off-1] == 0 {
		off--
	}
	if off >= n-coastLeast {
		return nil, nil, 0, fmt.Errorf("%w: %d samples with the output off, at least %d are needed", ErrData, n-off, coastLeast)
	}
	top := 0.0
	for _, w := range tr.Speed[off:] {
		if math.Abs(w) > math.Abs(top) {
			top = w
		}
	}
	dir = math.Copysign(1, top)
	low := coastTo * math.Abs(top)
	if tr.Window > 0 {
		low = math.Max(low, coastSteps*tr.RadPerCount/tr.Window)
	}
	begun := false
	for i := off; i < n; i++ {
		w := tr.Speed[i] * dir
		if tr.Time[i]-tr.Time[off] < 2*tr.Window || !begun && w > coastFrom*math.Abs(top) && tr.Time[i]-tr.Time[off] < 0.02 {
			continue
		}
		if w < low {
			break
		}
		begun = true
		if tr.At(i) != trace.Used {
			continue
		}
		t, y = append(t, tr.Time[i]), append(y, w)
	}
	if len(t) < coastLeast {
		return nil, nil, dir, fmt.Errorf("%w: the shaft comes to rest within %d samples: too quick for a coast-down, or the winding is shorted when off", ErrData, len(t))
	}
	t0 := t[0]
	for i := range t {
		t[i] -= t0
	}
	return t, y, dir, nil
}

// coastTerms returns e^(−ct), (1 − e^(−ct))/c and the derivative of the second by c.
func coastTerms(t, c float64) (e, phi, slope float64) {
	e = math.Exp(-c * t)
	if math.Abs(c*t) < 1e-3 {
		x := c * t
		return e, t * (1 - x/2 + x*x/6), t * t * (-0.5 + x/3 - x*x/8)
	}
	phi = -math.Expm1(-c*t) / c
	return e, phi, (t*e - phi) / c
}

func coastLinear(t, y []float64, c float64) (w0, a, rss float64) {
	var ee, ep, pp, ye, yp, yy float64
	for i := range t {
		e, p, _ := coastTerms(t[i], c)
		p = -p
		ee, ep, pp = ee+e*e, ep+e*p, pp+p*p
		ye, yp, yy = ye+y[i]*e, yp+y[i]*p, yy+y[i]*y[i]
	}
	det := ee*pp - ep*ep
	if !(det > 0) {
		return 0, 0, math.Inf(1)
	}
	w0, a = (ye*pp-yp*ep)/det, (yp*ee-ye*ep)/det
	for i := range t {
		e, p, _ := coastTerms(t[i], c)
		r := y[i] - w0*e + a*p
		rss += r * r
	}
	return w0, a, rss
}

// coastBend tests for drag that grows with the square of the speed (a fan, air):
// the response of dω/dt = −x·ω² as one more column, with what the fit can explain
// taken out of it.
func coastBend(t, y, res, jac []float64) float64 {
	col, sum := make([]float64, len(t)), 0.0
	for i := 1; i < len(t); i++ {
		sum += (t[i] - t[i-1]) * (y[i]*y[i] + y[i-1]*y[i-1]) / 2
		col[i] = -sum
	}
	pt := NewPoint(3)
	Compress(slices.Clone(jac), 3, slices.Clone(col), pt)
	x := make([]float64, 3)
	if !backSubstitute(pt.R, 3, 3, pt.Qtr, x) {
		return 0
	}
	var cc, cr float64
	for i := range col {
		col[i] -= jac[3*i]*x[0] + jac[3*i+1]*x[1] + jac[3*i+2]*x[2]
		cc, cr = cc+col[i]*col[i], cr+col[i]*res[i]
	}
	if !(cc > 0) {
		return 0
	}
	rest, rss := make([]float64, len(res)), 0.0
	for i := range res {
		rest[i] = res[i] - cr/cc*col[i]
		rss += rest[i] * rest[i]
	}
	return cr / math.Sqrt(cc*rss/float64(len(res)-4)*longRun(rest))
}

// longRun is the factor on the variance of a mean that coloured residuals cost:
// 1 + 2·Σρk up to the first correlation that is not above zero, never under 1.
func longRun(res []float64) float64 {
	m, v := 0.0, 0.0
	for _, r := range res {
		m += r / float64(len(res))
	}
	for _, r := range res {
		v += (r - m) * (r - m)
	}
	if !(v > 0) {
		return 1
	}
	f := 1.0
	for k := 1; k < len(res)/4; k++ {
		c := 0.0
		for i := k; i < len(res); i++ {
			c += (res[i] - m) * (res[i-k] - m)
		}
		if c <= 0 {
			break
		}
		f += 2 * c / v
	}
	return f
}

// Mean is a weighted mean of repeats with its standard deviation, never smaller
// than what the scatter of the repeats says. Spread is the scatter over what the
// repeats' own standard deviations would give, about 1 where all is well.
type Mean struct {
	Value, SD, Spread float64
	N                 int
}

// MeanOf combines repeats. With sd nil or one of them 0 all weigh the same.
func MeanOf(values, sd []float64) Mean {
	m := Mean{N: len(values), SD: math.NaN(), Spread: math.NaN()}
	if m.N == 0 {
		m.Value = math.NaN()
		return m
	}
	sum := 0.0
	w := make([]float64, m.N)
	known := len(sd) == m.N
	for _, s := range sd {
		known = known && s > 0 && finite(s)
	}
	for i := range values {
		w[i] = 1
		if known {
			w[i] = 1 / (sd[i] * sd[i])
		}
		sum += w[i]
		m.Value += w[i] * values[i]
	}
	m.Value /= sum
	if known {
		m.SD = math.Sqrt(1 / sum)
	}
	if m.N > 1 {
		chi := 0.0
		for i := range values {
			chi += w[i] * (values[i] - m.Value) * (values[i] - m.Value)
		}
		scatter := math.Sqrt(chi / float64(m.N-1) / sum)
		if known {
			m.Spread = scatter / m.SD
		}
		if !(m.SD > scatter) {
			m.SD = scatter
		}
	}
	return m
}
