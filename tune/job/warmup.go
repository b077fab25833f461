package job

import (
	"fmt"
	"math"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// Bounds of the warm-up (our choice): repeats agree when three in a row lie within
// warmShare, as far as their noise lets that be seen.
const (
	warmShare  = 0.002
	warmRuns   = 4
	warmLast   = 3
	warmRepeat = 1.5  // s, at least
	warmTaus   = 15.0 // time constants, at least
)

// doWarmUp runs at a middle speed until repeats agree.
func (j *Job) doWarmUp() (result, error) {
	k := j.sizing()
	repeat := math.Max(warmRepeat, warmTaus*j.Tau)
	length := min(j.Env.RunTimeMax*8/10, seconds(40*repeat))
	drive := j.coastVolts(k)
	set := ExperimentSettings{Experiment: StepWarmUp, Numbers: map[string]float64{"repeat": repeat, "volts": drive, "skip": 10 * j.Tau}}
	var traces []*trace.Trace
	var files []string
	for range warmRuns {
		plan := excite.WarmUp(k, drive, length)
		plan.Name = fmt.Sprintf("warm-up %d", len(traces)+1)
		r, err := j.runLearning(StepWarmUp, plan, nil, warmLearner(set))
		if err != nil {
			return "", err
		}
		if r.Reason != safety.EndDone {
			return "", j.notDone(r)
		}
		traces, files = append(traces, j.traceOf(plan.Name, r.Samples)), append(files, r.File)
		if _, agreed := agree(warmRepeats(set, traces[len(traces)-1])); agreed {
			break
		}
	}
	return j.experiment(set, traces, files)
}

// repeat is one stretch of a warm-up: speed over volts and its standard deviation.
type repeat struct{ at, gain, sd float64 }

// warmLearner takes the repeats as they come and ends the run when they agree.
func warmLearner(set ExperimentSettings) func(Sample) (string, bool) {
	var w warmWindow
	var all []repeat
	return func(s Sample) (string, bool) {
		if s.State == protocol.Off {
			return "", false
		}
		r, ok := w.add(set, float64(s.BoardUS)*1e-6, float64(s.Volts), float64(s.Speed))
		if !ok {
			return "", false
		}
		all = append(all, r)
		spread, agreed := agree(all)
		return fmt.Sprintf("repeat %d: %.5g rad/s/V, the last %d within %.2f %%", len(all), r.gain, min(warmLast, len(all)), 100*spread), agreed
	}
}

// warmWindow collects samples of steady drive into repeats.
type warmWindow struct {
	began, from  float64
	steady       bool
	volts, speed []float64
}

func (w *warmWindow) add(set ExperimentSettings, t, volts, speed float64) (repeat, bool) {
	if math.Abs(volts-set.Numbers["volts"]) > 0.02*set.Numbers["volts"] {
		w.steady = false
		return repeat{}, false
	}
	if !w.steady {
		w.steady, w.began, w.from = true, t, t+set.Numbers["skip"]
		w.volts, w.speed = nil, nil
	}
	if t < w.from {
		return repeat{}, false
	}
	w.volts, w.speed = append(w.volts, volts), append(w.speed, speed)
	if t-w.from < set.Numbers["repeat"] {
		return repeat{}, false
	}
	q := identify.QuietOf(w.speed)
	r := repeat{at: t, gain: q.Mean / mean(w.volts), sd: q.RMS / mean(w.volts) / math.Sqrt(float64(q.N))}
	w.from, w.volts, w.speed = t, nil, nil
	return r, true
}

// warmRepeats are the repeats of a whole trace.
func warmRepeats(set ExperimentSettings, tr *trace.Trace) []repeat {
	var w warmWindow
	var out []repeat
	for i := range tr.Time {
		if r, ok := w.add(set, tr.Time[i], tr.Voltage[i], tr.Speed[i]); ok {
			out = append(out, r)
		}
	}
	return out
}

// agree is how far the last repeats lie apart, as a share, and whether that is
// within the bound or their noise.
func agree(all []repeat) (spread float64, agreed bool) {
	if len(all) < warmLast {
		return math.NaN(), false
	}
	lo, hi, sd := math.Inf(1), math.Inf(-1), 0.0
	for _, r := range all[len(all)-warmLast:] {
		lo, hi, sd = math.Min(lo, r.gain), math.Max(hi, r.gain), math.Max(sd, r.sd)
	}
	spread = (hi - lo) / hi
	return spread, spread < math.Max(warmShare, 4*sd/hi)
}

// analyseWarmUp says how far the speed moved and how well the last repeats agree.
// Numbers: repeat and skip in s, volts in V.
func analyseWarmUp(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	col := []sheet.Series{{Name: "run", Unit: "1"}, {Name: "time", Unit: "s"}, {Name: "speed over volts", Unit: "rad/s/V"}}
	var all []repeat
	agreed, spread := false, math.NaN()
	for n, tr := range traces {
		list := warmRepeats(set, tr)
		for _, r := range list {
			for k, v := range []float64{float64(n + 1), r.at, r.gain} {
				col[k].Values = append(col[k].Values, sheet.Known(v))
			}
		}
		all = append(all, list...)
		spread, agreed = agree(list)
	}
	if len(all) < warmLast {
		return fmt.Errorf("%w: %d repeats, at least %d are needed", identify.ErrData, len(all), warmLast)
	}
	rec.Columns = col
	moved := all[len(all)-1].gain/all[0].gain - 1
	quantity(rec, "moved while warming up", "%", 100*moved, 0, "speed over volts, last repeat over the first")
	quantity(rec, "last repeats within", "%", 100*spread, 0, fmt.Sprintf("largest less smallest of the last %d repeats of %.2g s", warmLast, set.Numbers["repeat"]))
	rec.Finding = fmt.Sprintf("%d repeats, moved by %.2f %%, the last %d within %.2f %%", len(all), 100*moved, warmLast, 100*spread)
	if !agreed {
		doubt(rec, identify.Care, "repeats do not agree yet: run it again, or something wanders")
	}
	return nil
}
