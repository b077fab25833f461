package identify

import (
	"math"
	"slices"

	"gainwright/tune/trace"
)

// Quiet is the noise of a signal about its own slow course.
type Quiet struct {
	Mean, RMS, Peak float64
	Step            float64 // smallest difference between two values seen; 0: all alike
	N               int
}

// QuietOf measures noise about a straight line through the values.
func QuietOf(v []float64) Quiet {
	q := Quiet{N: len(v)}
	if q.N < 3 {
		return q
	}
	n := float64(q.N)
	var sx, sy, sxx, sxy float64
	for i, y := range v {
		x := float64(i) - (n-1)/2
		sy, sxx, sxy = sy+y, sxx+x*x, sxy+x*y
		sx += x
	}
	q.Mean = sy / n
	slope := sxy / sxx
	for i, y := range v {
		r := y - q.Mean - slope*(float64(i)-(n-1)/2)
		q.RMS += r * r / (n - 2)
		q.Peak = math.Max(q.Peak, math.Abs(r))
	}
	q.RMS = math.Sqrt(q.RMS)
	s := slices.Clone(v)
	slices.Sort(s)
	for i := 1; i < len(s); i++ {
		if d := s[i] - s[i-1]; d > 1e-9*math.Max(1, math.Abs(s[i])) && (q.Step == 0 || d < q.Step) {
			q.Step = d
		}
	}
	return q
}

// lowestShare is the part of a setpoint that one step of the reported speed, or
// twice its noise, may be (our choice).
const lowestShare = 0.1

// LowestSetpoint is the lowest speed at which one step of the reported speed and
// twice its noise stay under a tenth of it, in the unit given. It is what can be
// asked for honestly: a setpoint below it is steered by its own rounding.
func LowestSetpoint(step, rms float64) float64 { return math.Max(step, 2*rms) / lowestShare }

// Clock is what time stamps of samples at a steady rate say.
type Clock struct {
	Period     float64 // s, mean between samples
	Loops      int     // loop periods between samples
	Loop       float64 // s, loop period on the board's own clock
	LoopSD     float64
	Jitter     float64 // s, RMS of the stamps about an even row
	JitterPeak float64 // s
	N, Missing int
}

// ClockOf fits an even row to the time stamps of a trace and judges what is left.
// declared is the loop period that the board says it has, in s.
func ClockOf(tr *trace.Trace, declared float64) (Clock, error) {
	n := tr.Len()
	if n < 20 || !(declared > 0) {
		return Clock{}, ErrData
	}
	step := tr.Period()
	if !(step > 0) {
		return Clock{}, ErrData
	}
	out := Clock{Loops: max(1, int(math.Round(step/declared))), N: n}
	// Every stamp belongs to a whole number of steps from the first.
	k := make([]float64, n)
	for i := 1; i < n; i++ {
		d := math.Max(1, math.Round((tr.Time[i]-tr.Time[i-1])/step))
		k[i] = k[i-1] + d
		out.Missing += int(d) - 1
	}
	var mk, mt, kk, kt float64
	for i := range k {
		mk, mt = mk+k[i]/float64(n), mt+tr.Time[i]/float64(n)
	}
	for i := range k {
		kk, kt = kk+(k[i]-mk)*(k[i]-mk), kt+(k[i]-mk)*(tr.Time[i]-mt)
	}
	out.Period = kt / kk
	for i := range k {
		r := tr.Time[i] - mt - out.Period*(k[i]-mk)
		out.Jitter += r * r / float64(n-2)
		out.JitterPeak = math.Max(out.JitterPeak, math.Abs(r))
	}
	out.Loop = out.Period / float64(out.Loops)
	out.LoopSD = math.Sqrt(out.Jitter/kk) / float64(out.Loops)
	out.Jitter = math.Sqrt(out.Jitter)
	return out, nil
}

// Locked is the resistance at one angle of the shaft, which did not turn.
type Locked struct {
	R, RSD, Volts float64 // ohm; V of the slope's reach
	N             int
}

// FitLocked takes the resistance from a record of levels with the shaft held: the
// slope of current over volts through the settled half of each level, so that the
// sensor's zero and a driver's dead band of either sign fall out where levels of
// both signs are given alike. The error wraps ErrData.
func FitLocked(tr *trace.Trace, dwell float64) (Locked, error) {
	if err := tr.Validate(); err != nil {
		return Locked{}, err
	}
	if tr.Current == nil {
		return Locked{}, ErrData
	}
	// One slope for each sign with its own intercept: the dead band shifts, and
	// does not tilt.
	var sxx, sxy, rss float64
	out := Locked{}
	type point struct{ v, i float64 }
	var residual []float64
	for _, dir := range []float64{1, -1} {
		var p []point
		for _, l := range lockedLevels(tr, dwell, dir) {
			for k := l[0]; k < l[1]; k++ {
				p = append(p, point{tr.Voltage[k], tr.Current[k]})
			}
		}
		if len(p) < 10 {
			continue
		}
		var mv, mi float64
		for _, x := range p {
			mv, mi = mv+x.v/float64(len(p)), mi+x.i/float64(len(p))
		}
		for _, x := range p {
			sxx, sxy = sxx+(x.v-mv)*(x.v-mv), sxy+(x.v-mv)*(x.i-mi)
			out.Volts = math.Max(out.Volts, math.Abs(x.v))
			residual = append(residual, x.v-mv, x.i-mi)
		}
		out.N += len(p)
	}
	if out.N < 20 || !(sxx > 0) || !(sxy > 0) {
		return out, ErrData
	}
	slope := sxy / sxx
	for k := 0; k < len(residual); k += 2 {
		r := residual[k+1] - slope*residual[k]
		rss += r * r
	}
	sd := math.Sqrt(rss / float64(out.N-3) / sxx)
	out.R, out.RSD = 1/slope, sd/(slope*slope)
	return out, nil
}

// lockedLevels are the second halves of the steady levels of one sign, as ranges of
// samples.
func lockedLevels(tr *trace.Trace, dwell, dir float64) (out [][2]int) {
	n := tr.Len()
	for from := 0; from < n; {
		to := from + 1
		for to < n && math.Abs(tr.Voltage[to]-tr.Voltage[from]) <= 0.02*math.Abs(tr.Voltage[from]) {
			to++
		}
		if tr.Voltage[from]*dir > 0 && tr.Time[to-1]-tr.Time[from] >= dwell/2 {
			out = append(out, [2]int{(from + to) / 2, to})
		}
		from = to
	}
	return out
}

// LostMotion is the angle in rad that a motor turns before the encoder sees it,
// when a ramp sets out: back-EMF, as volts less R·I, that comes up before the first
// count, over Ke. One value for every ramp from rest, split by whether the ramp goes
// the way of the one before (Same) or the other (Turned).
type LostMotion struct{ Turned, Same []float64 }

// FitLostMotion looks at every ramp of a record with current and counts.
func FitLostMotion(tr *trace.Trace, ohms, ke float64) (LostMotion, error) {
	var out LostMotion
	if tr.Current == nil || tr.Counts == nil || !(ohms > 0) || !(ke > 0) {
		return out, ErrData
	}
	n, before := tr.Len(), 0.0
	for i := 0; i < n; {
		if tr.Voltage[i] == 0 {
			i++
			continue
		}
		dir := math.Copysign(1, tr.Voltage[i])
		from, base := i, tr.Counts[max(i-1, 0)]
		for i < n && tr.Voltage[i]*dir > 0 && tr.Counts[i] == base {
			i++
		}
		if x, ok := unseenTurn(tr, from, i, dir, ohms, ke); ok {
			if dir == before {
				out.Same = append(out.Same, x)
			} else if before != 0 {
				out.Turned = append(out.Turned, x)
			}
		}
		for i < n && tr.Voltage[i]*dir > 0 {
			i++
		}
		before = dir
	}
	if len(out.Turned)+len(out.Same) == 0 {
		return out, ErrData
	}
	return out, nil
}

// unseenTurn is the back-EMF of the last samples before the first count over that
// of the ones before, summed to an angle.
func unseenTurn(tr *trace.Trace, from, to int, dir, ohms, ke float64) (rad float64, ok bool) {
	const last, earlier = 0.12, 0.35 // s
	if to-from < 30 {
		return 0, false
	}
	end := tr.Time[to-1]
	emf := func(i int) float64 { return math.Abs(tr.Voltage[i]) - ohms*tr.Current[i]*dir }
	ref, n := 0.0, 0
	for i := from; i < to; i++ {
		if age := end - tr.Time[i]; age > last && age <= earlier {
			ref, n = ref+emf(i), n+1
		}
	}
	if n < 10 {
		return 0, false
	}
	ref /= float64(n)
	for i := from + 1; i < to; i++ {
		if end-tr.Time[i] <= last {
			rad += (emf(i) - ref) / ke * (tr.Time[i] - tr.Time[i-1])
		}
	}
	return rad, true
}
