package job

import (
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
)

// The second test is for judging gain and time constant on a record of another kind:
// it ends once its own record tells both as well as this, in halves of a 95 % interval
// as shares, and has had its least (our choice).
const (
	sequenceTau  = 0.01
	sequenceGain = 0.005
	sequencePart = 0.5  // of the sequence
	sequenceTaus = 20.0 // time constants
)

// sequenceLearner follows the ± of gain and time constant while a pattern about the
// middle runs. A record that one lag does not describe leaves more behind, its ± stays
// wide, and the run goes to its end.
type sequenceLearner struct {
	run             *identify.Running
	bias, amplitude float64
	gain, tau, dead float64
	ends            bool    // the run may end by itself
	whole           float64 // s, of the pattern
	began           uint64
	driven          bool
	shown           float64 // s
}

// sequenceLearner is for a pattern that lasts whole s; ends says whether what is known
// may end it.
func (j *Job) sequenceLearner(amplitude, whole float64, ends bool) *sequenceLearner {
	return &sequenceLearner{bias: j.Bias, amplitude: amplitude, gain: j.Gain, tau: j.Tau, dead: j.loopDelay(), ends: ends, whole: whole}
}

// sample is told of every sample of the run.
func (l *sequenceLearner) sample(s Sample) (string, bool) {
	off := math.Abs(float64(s.Volts) - l.bias)
	if s.State == protocol.Off {
		return "", false
	}
	if !l.driven && off <= 0.1*l.amplitude { // still settling at the middle
		l.run, l.began = identify.NewRunning(l.gain, l.tau, l.dead), s.BoardUS
	}
	if l.run == nil { // on the way there
		return "", false
	}
	l.driven = l.driven || off > 0.1*l.amplitude
	t := float64(s.BoardUS-l.began) * 1e-6
	l.run.Add(t, float64(s.Volts), float64(s.Speed))
	if !l.driven || t-l.shown < l.tau {
		return "", false
	}
	gain, tau, ok := l.run.Widths()
	if !ok {
		return "", false
	}
	l.shown = t
	gain, tau = 1.96*gain, 1.96*tau
	words := fmt.Sprintf("by telemetry: gain ± %.2g %%, time constant ± %.2g %%", 100*gain, 100*tau)
	if left := l.whole / t; left > 1 {
		words += fmt.Sprintf("; to its end: ± %.2g %%", 100*tau/math.Sqrt(left))
	}
	return words, l.ends && t >= sequencePart*l.whole && t >= sequenceTaus*l.tau && tau <= sequenceTau && gain <= sequenceGain
}

// patternTime is how long the part of a plan lasts that is not the way to its middle.
func patternTime(p safety.Plan, note string) float64 {
	var sum time.Duration
	for _, s := range p.Segments {
		if len(s.Note) >= len(note) && s.Note[:len(note)] == note {
			sum += s.Duration
		}
	}
	return sum.Seconds()
}

// sineWhole is the time from a settled middle after which whole periods of sines, the
// first to swing in, are enough in number.
func sineWhole(period float64, periods int) float64 {
	return period * (float64(periods) + sineEarly)
}

// sineLearner ends a multisine behind a whole period, once the response is known as
// well as is asked for.
func (j *Job) sineLearner(period float64, periods int) func(Sample) (string, bool) {
	l := j.sequenceLearner(j.Amplitude, float64(periods)*period, false)
	began := uint64(0)
	return func(s Sample) (string, bool) {
		words, _ := l.sample(s)
		if !l.driven {
			return words, false
		}
		if began == 0 {
			began = s.BoardUS
		}
		gain, tau, ok := l.run.Widths()
		t := float64(s.BoardUS-began) * 1e-6
		n := math.Floor(t / period)
		behind := t-n*period < 0.1*period && t >= sineWhole(period, sinePeriodsMin) // of a new period
		return words, ok && behind && 1.96*tau <= sequenceTau && 1.96*gain <= sequenceGain
	}
}

// secondLearner is the learner of the second test's plan.
func (j *Job) secondLearner(plan safety.Plan, k excite.Known) func(Sample) (string, bool) {
	if k.FallSlope > 0 || k.Dips {
		return j.sequenceLearner(j.Amplitude, plan.Duration().Seconds(), false).sample
	}
	return j.sequenceLearner(j.Amplitude, patternTime(plan, "prbs"), true).sample
}
