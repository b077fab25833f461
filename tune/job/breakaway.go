package job

import (
	"fmt"
	"math"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/sheet"
)

// roughModel takes a first gain and time constant from a run that crept, if it
// says anything.
func (j *Job) roughModel(r Result) {
	if len(r.Samples) == 0 {
		return
	}
	last := r.Samples[len(r.Samples)-1]
	for i := len(r.Samples) - 1; i >= 0 && r.Samples[i].Volts == 0; i-- {
		last = r.Samples[i]
	}
	if v := float64(last.Volts); v > j.StartForward*0.8 && last.Speed > 0 && j.Gain == 0 {
		j.Gain = float64(last.Speed) / v
	}
}

// breakRepeats is how many ramps each way the breakaway test makes.
const breakRepeats = 4

// breakTries is how often they are repeated where the shaft started before
// earlyStart of what was expected.
const (
	breakTries = 3
	earlyStart = 0.72
)

// doBreakaway finds the voltage at which the shaft starts, each way.
func (j *Job) doBreakaway() (result, error) {
	// A first ramp each way, to know where the others have to be slow.
	r, fwd, rev, err := j.ramps(1, false)
	if err != nil {
		return "", err
	}
	for try := 0; try < breakTries; try++ {
		if len(fwd) > 0 && (len(rev) > 0 || !j.Env.Reverse) {
			j.BreakForward, j.BreakReverse = fwd, rev
		}
		k := j.sizing()
		if r, fwd, rev, err = j.ramps(breakRepeats, k.Coarse()); err != nil {
			return "", err
		}
		// A start before the slow part of the ramp was met too quickly.
		if len(fwd) > 0 && mean(fwd) > earlyStart*k.StartForward && (len(rev) == 0 || mean(rev) > earlyStart*k.StartReverse) {
			break
		}
	}
	if len(fwd) < 2 || j.Env.Reverse && len(rev) < 2 {
		return "", refuse(722, "breakaway", "the shaft did not start in most ramps", "is it free? Do the sign check again")
	}
	j.BreakForward, j.BreakReverse, j.breakRun = fwd, rev, r.Samples
	rec := sheet.BreakawayRecord{ForwardV: fwd, ReverseV: rev, Params: []sheet.Quantity{breakQuantity("breakaway forward", fwd, r.File)}}
	words := fmt.Sprintf("%.3g ± %.2g V forward", mean(fwd), 2*spread(fwd))
	if len(rev) > 0 {
		rec.Params = append(rec.Params, breakQuantity("breakaway reverse", rev, r.File))
		words += fmt.Sprintf(", %.3g ± %.2g V reverse", mean(rev), 2*spread(rev))
	}
	if j.electric = standstill(r.Samples); j.electric != nil {
		rec.Params = append(rec.Params, j.electric.resistance(r.File))
		words += fmt.Sprintf("; R %.3g ± %.2g Ω", j.electric.R, 1.96*j.electric.RSD)
	}
	j.showBreakaway()
	return result(words), j.h.Keep("fit", "breakaway", rec)
}

// ramps runs n breakaway ramps each way.
func (j *Job) ramps(n int, slow bool) (r Result, fwd, rev []float64, err error) {
	if r, err = j.run(StepBreakaway, excite.Breakaway(j.sizing(), n, slow), nil); err != nil {
		return r, nil, nil, err
	}
	if r.Reason != safety.EndDone {
		return r, nil, nil, j.notDone(r)
	}
	fwd, rev = j.starts(r.Samples)
	return r, fwd, rev, nil
}

func breakQuantity(name string, v []float64, file string) sheet.Quantity {
	m, pm := mean(v), 2*spread(v)
	return sheet.Quantity{Name: name, Value: &m, Unit: "V", PlusMinus: &pm,
		Why: fmt.Sprintf("mean of %d ramps, drive at the first count that led to motion; ± two standard deviations; %s", len(v), file)}
}

// starts finds the drive at which each ramp first moved the shaft. A ramp that
// starts with less than half the drive of its fellows was pushed by hand or came
// before rest, and is left out.
func (j *Job) starts(s []Sample) (fwd, rev []float64) {
	for i := 0; i < len(s); {
		if s[i].Volts == 0 {
			i++
			continue
		}
		dir := math.Copysign(1, float64(s[i].Volts))
		k := i
		for k < len(s) && float64(s[k].Volts)*dir > 0 {
			k++
		}
		if v, ok := startOf(s[max(i-1, 0):k], dir); ok && dir > 0 {
			fwd = append(fwd, v)
		} else if ok {
			rev = append(rev, v)
		}
		i = k
	}
	return fwd, rev
}

// Counts at which a start is timed. Edges lie anywhere, so that a count is seen
// half a count early on average.
const (
	earlyCounts = 2
	lateCounts  = 8
)

// startOf is the drive at which one ramp set the shaft moving; s begins with the
// last sample at rest. A heavy shaft takes its time to the first counts, and the
// ramp goes on meanwhile: under a constant acceleration the way grows with the
// square of the time, and the two times say when it was none. A ramp that makes the
// acceleration grow has begun earlier still, so that this never goes too far back.
func startOf(s []Sample, dir float64) (volts float64, ok bool) {
	base := s[0].Counts
	last, early, late := 0, -1, -1 // last sample within the noise of an edge
	for n := 1; n < len(s); n++ {
		d := float64(s[n].Counts-base) * dir
		if math.Abs(d) <= 1 {
			last = n
		}
		if early < 0 && d >= earlyCounts {
			early = n
		}
		if d >= lateCounts {
			late = n
			break
		}
		ok = ok || d >= 4
	}
	if !ok && late < 0 {
		return 0, false
	}
	volts = float64(s[last].Volts) * dir
	if early < 0 || late <= early {
		return volts, true
	}
	at := func(n int) float64 { return float64(s[n].BoardUS-s[0].BoardUS) * 1e-6 }
	ratio := (float64(s[late].Counts-base)*dir - 0.5) / (float64(s[early].Counts-base)*dir - 0.5)
	start := at(early) - (at(late)-at(early))/(math.Sqrt(ratio)-1)
	for n := last; n > 0 && at(n) > start; n-- {
		volts = float64(s[n].Volts) * dir
	}
	return volts, true
}
