package identify

import (
	"fmt"
	"math"
	"math/cmplx"

	"gainwright/tune/trace"
)

// RelayRun is what one relay-feedback run in its limit cycle shows. Means and
// harmonics are over whole cycles; standard deviations come from their scatter.
type RelayRun struct {
	Cycle        // as measured
	PeriodSD     float64
	High, Low    float64 // V, mean levels
	MeanVolts    float64
	MeanVoltsSD  float64
	MeanSpeedSD  float64
	Delay        float64 // s, from a threshold to the switch
	Points       []FreqPoint
	Cycles       int
	From, To     float64 // s of the trace
	Amplitude    float64 // rad/s, half of largest less smallest
	DescribingKu float64 // V per rad/s, 4d/(π·√(a² − ε²)) at Period: with the relay's delay inside
	Upper, Lower float64 // rad/s, thresholds as given
}

// Bounds of a relay run (our choice).
const (
	relaySkip     = 2    // cycles left out while it swings in
	relayLeast    = 4    // cycles needed
	harmonicShare = 0.06 // of the fundamental of the drive that a harmonic must have to be used
	harmonicsMost = 3
)

// FitRelay cuts a relay-feedback record into whole cycles, from one rise of the
// drive through mid volts to the next (having been apart volts to either side), and takes means and harmonics of drive and
// speed over them: in a periodic state Y/U at each harmonic is the plant's
// frequency response, whatever its order, exactly. upper and lower are the relay's
// thresholds in rad/s. The error wraps ErrData.
func FitRelay(tr *trace.Trace, mid, apart, upper, lower float64) (RelayRun, error) {
	if err := tr.Validate(); err != nil {
		return RelayRun{}, err
	}
	rises, falls := switches(tr, mid, apart)
	if len(rises) < relaySkip+relayLeast+1 {
		return RelayRun{}, fmt.Errorf("%w: %d cycles of the relay, at least %d are needed", ErrData, max(0, len(rises)-1), relaySkip+relayLeast)
	}
	rises = rises[relaySkip:]
	n := len(rises) - 1
	out := RelayRun{Cycles: n, From: rises[0], To: rises[n], Upper: upper, Lower: lower}
	var periods, ups, volts, speeds, highs, lows, maxima, minima []float64
	for c := range n {
		fall := math.NaN()
		for _, f := range falls {
			if f > rises[c] && f < rises[c+1] {
				fall = f
				break
			}
		}
		if math.IsNaN(fall) {
			return out, fmt.Errorf("%w: cycle %d has no fall", ErrData, c+1)
		}
		periods, ups = append(periods, rises[c+1]-rises[c]), append(ups, fall-rises[c])
		u, y := Fourier(tr, rises[c], rises[c+1], []float64{0})
		volts, speeds = append(volts, real(u[0])), append(speeds, real(y[0]))
		hi, lo, vh, vl := extremesIn(tr, rises[c], rises[c+1], mid)
		highs, lows, maxima, minima = append(highs, vh), append(lows, vl), append(maxima, hi), append(minima, lo)
	}
	p, up := MeanOf(periods, nil), MeanOf(ups, nil)
	out.Up, out.Down, out.PeriodSD = up.Value, p.Value-up.Value, p.SD
	v, s := MeanOf(volts, nil), MeanOf(speeds, nil)
	out.MeanVolts, out.MeanVoltsSD, out.Mean, out.MeanSpeedSD = v.Value, v.SD, s.Value, s.SD
	out.High, out.Low = MeanOf(highs, nil).Value, MeanOf(lows, nil).Value
	out.Max, out.Min = MeanOf(maxima, nil).Value, MeanOf(minima, nil).Value
	out.Amplitude = (out.Max - out.Min) / 2
	out.Delay = relayDelay(tr, rises, falls, upper, lower)
	eps := (upper - lower) / 2
	if out.Amplitude > eps {
		out.DescribingKu = 4 * (out.High - out.Low) / 2 / (math.Pi * math.Sqrt(out.Amplitude*out.Amplitude-eps*eps))
	}
	out.Points = relayPoints(tr, rises)
	return out, nil
}

// switches lists the instants at which the drive goes from apart below mid to apart
// above it, and back. With a hold since the sample before, the change is at that
// sample.
func switches(tr *trace.Trace, mid, apart float64) (rises, falls []float64) {
	side := 0.0
	for i := 1; i < tr.Len(); i++ {
		at := tr.Time[i-1]
		if tr.Hold == trace.From {
			at = tr.Time[i]
		}
		d := tr.Voltage[i] - mid
		if math.Abs(d) < apart || d*side > 0 {
			continue
		}
		if side = math.Copysign(1, d); side > 0 {
			rises = append(rises, at)
		} else {
			falls = append(falls, at)
		}
	}
	return rises, falls
}

func extremesIn(tr *trace.Trace, from, to, mid float64) (hi, lo, high, low float64) {
	hi, lo = math.Inf(-1), math.Inf(1)
	var nh, nl float64
	for i, t := range tr.Time {
		if t <= from || t > to {
			continue
		}
		hi, lo = math.Max(hi, tr.Speed[i]), math.Min(lo, tr.Speed[i])
		if v := tr.Voltage[i]; v >= mid {
			high, nh = high+v, nh+1
		} else {
			low, nl = low+v, nl+1
		}
	}
	return hi, lo, high / math.Max(nh, 1), low / math.Max(nl, 1)
}

// relayDelay is the mean time from a crossing of a threshold to the switch that
// follows it. The reported speed is half a window late.
func relayDelay(tr *trace.Trace, rises, falls []float64, upper, lower float64) float64 {
	sum, n := 0.0, 0
	look := func(at, threshold, dir float64) {
		for i := tr.Len() - 1; i > 0; i-- {
			if tr.Time[i] > at {
				continue
			}
			a, b := (tr.Speed[i-1]-threshold)*dir, (tr.Speed[i]-threshold)*dir
			if a < 0 && b >= 0 {
				cross := tr.Time[i-1] + (tr.Time[i]-tr.Time[i-1])*a/(a-b) - tr.Window/2
				sum, n = sum+at-cross, n+1
				return
			}
		}
	}
	for _, f := range falls {
		if f > rises[0] && f < rises[len(rises)-1] {
			look(f, upper, 1)
		}
	}
	for _, r := range rises[1:] {
		look(r, lower, -1)
	}
	if n == 0 {
		return math.NaN()
	}
	return sum / float64(n)
}

// relayPoints is the frequency response at the harmonics of the cycle.
func relayPoints(tr *trace.Trace, rises []float64) []FreqPoint {
	n := len(rises) - 1
	base := 2 * math.Pi * float64(n) / (rises[n] - rises[0])
	omega := make([]float64, harmonicsMost)
	for h := range omega {
		omega[h] = base * float64(h+1)
	}
	u, y := Fourier(tr, rises[0], rises[n], omega)
	var out []FreqPoint
	for h := range omega {
		if cmplx.Abs(u[h]) < harmonicShare*cmplx.Abs(u[0]) {
			continue
		}
		g := y[h] / u[h]
		rest := 0.0
		for c := range n {
			uc, yc := Fourier(tr, rises[c], rises[c+1], []float64{2 * math.Pi * float64(h+1) / (rises[c+1] - rises[c])})
			d := yc[0]/uc[0] - g
			rest += real(d)*real(d) + imag(d)*imag(d)
		}
		sd := math.Sqrt(rest / 2 / float64(n-1) / float64(n))
		out = append(out, FreqPoint{Omega: omega[h], G: g, SD: math.Max(sd, relayFloor*cmplx.Abs(g)), Coherence: math.NaN()})
	}
	return out
}

// relayFloor is the least standard deviation of a point, of its size: cycles that
// repeat to the last digit are still sampled in time.
const relayFloor = 0.002

// RelayFit is the plant that two relay runs about different middles show.
type RelayFit struct {
	FreqFit
	Offset        float64 // V
	Order         int
	Period, Swing float64 // of the forecast by the exact equations over the measured, averaged over the runs
}

// FitRelays takes the gain from the means of two runs about different middles,
// ΔY/ΔU, and poles and dead time from the harmonics of both. A second pole is
// taken where the data ask for it. With what came out the exact equations of the
// limit cycle are solved and compared with what was measured.
func FitRelays(a, b RelayRun) (RelayFit, error) {
	du, dy := b.MeanVolts-a.MeanVolts, b.Mean-a.Mean
	if math.Abs(du) < 4*math.Hypot(a.MeanVoltsSD, b.MeanVoltsSD) || dy/du <= 0 {
		return RelayFit{}, fmt.Errorf("%w: the two middles, %.4g and %.4g V, are too near for a gain", ErrData, a.MeanVolts, b.MeanVolts)
	}
	gain := dy / du
	sd := math.Hypot(math.Hypot(a.MeanSpeedSD, b.MeanSpeedSD), gain*math.Hypot(a.MeanVoltsSD, b.MeanVoltsSD)) / math.Abs(du)
	points := append([]FreqPoint{{G: complex(gain, 0), SD: math.Max(sd, relayFloor*gain)}}, append(append([]FreqPoint(nil), a.Points...), b.Points...)...)
	one, err := FitFrequency(points, 1)
	if err != nil {
		return RelayFit{}, err
	}
	out := RelayFit{FreqFit: one, Order: 1}
	if two, err := FitFrequency(points, 2); err == nil && two.Tau2 > 3*two.Tau2SD && two.Misfit < 0.7*one.Misfit {
		out.FreqFit, out.Order = two, 2
	}
	out.Offset = (a.MeanVolts+b.MeanVolts)/2 - (a.Mean+b.Mean)/2/out.Gain
	for _, r := range []RelayRun{a, b} {
		p := Plant{Gain: out.Gain, Tau: out.Tau, Tau2: out.Tau2, Dead: math.Max(0, out.Dead), Offset: r.MeanVolts - r.Mean/out.Gain}
		c, err := p.LimitCycle(Relay{High: r.High, Low: r.Low, Upper: r.Upper, Lower: r.Lower, Delay: r.Delay})
		if err != nil {
			out.Period, out.Swing = math.NaN(), math.NaN()
			break
		}
		out.Period += c.Period() / r.Period() / 2
		out.Swing += (c.Max - c.Min) / (r.Max - r.Min) / 2
	}
	return out, nil
}
