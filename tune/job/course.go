package job

import (
	"math"
	"slices"
	"time"

	"gainwright/protocol"
)

// course is one step of the setpoint as telemetry shows it, measured or forecast.
type course struct {
	from, to float64 // rad/s, setpoints
	period   float64 // s, of the telemetry
	t        []float64
	y        []float64 // speed as the board reports it, 0 at from and 1 at to
}

// setpointMoved is the share of the step by which the setpoint has moved.
const setpointMoved = 0.005

// courseMin is the least number of samples that a step is measured on.
const courseMin = 20

// newCourse takes a step from columns of telemetry: time in s, setpoint and speed
// in rad/s. Time counts from half way between the last sample with the setpoint
// from and the first with another: nothing tells nearer when it changed.
func newCourse(t, r, y []float64, from, to float64) (course, bool) {
	start := 0
	// Boards round what they report of the setpoint.
	for start < len(t) && !(math.Abs(r[start]-from) > setpointMoved*math.Abs(to-from)) {
		start++
	}
	if len(t)-start < courseMin {
		return course{}, false
	}
	c := course{from: from, to: to}
	gaps := make([]float64, 0, len(t))
	for i := start + 1; i < len(t); i++ {
		gaps = append(gaps, t[i]-t[i-1])
	}
	slices.Sort(gaps)
	c.period = gaps[len(gaps)/2]
	zero := t[start] - c.period/2
	for i := start; i < len(t); i++ {
		c.t, c.y = append(c.t, t[i]-zero), append(c.y, (y[i]-from)/(to-from))
	}
	return c, true
}

// courseOf takes a step from samples of a run.
func courseOf(s []Sample, from, to float64) (course, bool) {
	var t, r, y []float64
	for i := range s {
		if s[i].Has&protocol.HasSetpoint != 0 {
			t, r, y = append(t, float64(s[i].BoardUS)*1e-6), append(r, float64(s[i].Setpoint)), append(y, float64(s[i].Speed))
		}
	}
	return newCourse(t, r, y, from, to)
}

// meanCourse is the mean of several steps, sample by sample: what is the same in
// each stays, counts and noise go down with the root of their number.
func meanCourse(all []course) course {
	m := course{from: all[0].from, to: all[0].to, period: all[0].period}
	n := 0
	for _, c := range all {
		n = max(n, int(math.Ceil(c.t[len(c.t)-1]/m.period)))
	}
	sum, count := make([]float64, n+1), make([]float64, n+1)
	for _, c := range all {
		for i, t := range c.t {
			k := min(int(t/m.period), n)
			sum[k] += c.y[i]
			count[k]++
		}
	}
	for k := range sum {
		// The last samples are those of the longest step alone.
		if count[k] > 0.5*float64(len(all)) {
			m.t, m.y = append(m.t, (float64(k)+0.5)*m.period), append(m.y, sum[k]/count[k])
		}
	}
	return m
}

// tail is the second half of a step: at rest about the new setpoint.
func (c course) tail() []float64 { return c.y[len(c.y)/2:] }

// settleTimes is how many RMS of the speed at rest the settling band has at least,
// either way (our choice).
const settleTimes = 3.0

// settleShare is the half-width of the settling band, share of the step, where
// noise does not make it wider: the 2 % that is usual for settling times.
const settleShare = 0.02

// bandOf is the half-width of the settling band of a mean step, share of the step.
func (c course) bandOf() float64 { return math.Max(settleShare, settleTimes*spread(c.tail())) }

// overshoot is the peak over the setpoint, less what noise alone would show, in
// percent of the step.
func (c course) overshoot() float64 {
	return 100 * math.Max(0, slices.Max(c.y)-1-2*spread(c.tail()))
}

// settling is the time in s at which the step comes into the band for good, on the
// straight line between two samples. A single sample outside, with its neighbours
// inside, is noise.
func (c course) settling(band float64) float64 {
	last, before := -1, -1
	for i, v := range c.y {
		if math.Abs(v-1) > band {
			if before == i-1 {
				last = i
			}
			before = i
		}
	}
	if last < 0 {
		return 0
	}
	if last == len(c.y)-1 {
		return c.t[last]
	}
	out, in := math.Abs(c.y[last]-1), math.Abs(c.y[last+1]-1)
	return c.t[last] + (c.t[last+1]-c.t[last])*(out-band)/math.Max(out-in, 1e-12)
}

// StepMetrics is what the steps of a closed loop did, measured or forecast.
type StepMetrics struct {
	Step      float64 // rad/s, height
	Overshoot float64 // percent of the step, of the worst way: up or down, forward or reverse
	Settling  float64 // s, from the change of the setpoint
	Band      float64 // rad/s either way, in which it is settled
}

// measure measures steps: the overshoot of the mean of those that go the same way,
// the worst; the settling time of the mean of all. band is the half-width as a
// share of the step.
func measure(all []course, band float64) StepMetrics {
	ways := map[[2]bool][]course{}
	for _, c := range all {
		way := [2]bool{c.to > c.from, c.to > 0}
		ways[way] = append(ways[way], c)
	}
	size := math.Abs(all[0].to - all[0].from)
	m := StepMetrics{Step: size, Band: band * size, Settling: meanCourse(all).settling(band)}
	for _, w := range ways {
		m.Overshoot = math.Max(m.Overshoot, meanCourse(w).overshoot())
	}
	return m
}

// turning calls do with every step between two levels that turn the same way, and
// with the time of its beginning.
func turning(levels []float64, hold time.Duration, do func(from, to float64, at time.Duration)) {
	for i := 1; i < len(levels); i++ {
		if levels[i-1]*levels[i] > 0 {
			do(levels[i-1], levels[i], time.Duration(i)*hold)
		}
	}
}
