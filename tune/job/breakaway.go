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
		base := s[max(i-1, 0)].Counts
		started := 0.0
		for n := i; n < k; n++ {
			d := float64(s[n].Counts-base) * dir
			if math.Abs(d) <= 1 { // the noise of an edge
				started = float64(s[n].Volts) * dir
			}
			if d < 4 {
				continue
			}
			if dir > 0 {
				fwd = append(fwd, started)
			} else {
				rev = append(rev, started)
			}
			break
		}
		i = k
	}
	return fwd, rev
}
