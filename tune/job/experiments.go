package job

import (
	"errors"
	"fmt"
	"math"
	"time"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
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

// doBreakaway finds the voltage at which the shaft starts, each way.
func (j *Job) doBreakaway() (result, error) {
	if j.sizing().Coarse() {
		// Quick ramps first, to know where the slow ones have to be slow.
		if _, fwd, rev, err := j.ramps(2, false); err != nil {
			return "", err
		} else if len(fwd) > 0 && (len(rev) > 0 || !j.Env.Reverse) {
			j.BreakForward, j.BreakReverse = fwd, rev
		}
	}
	r, fwd, rev, err := j.ramps(breakRepeats, j.sizing().Coarse())
	if err != nil {
		return "", err
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

// stairShare is the share of the voltage limit and of the speed limit that the
// staircase climbs to.
const stairShare = 0.6

// doStaircase finds steady speed against voltage, and a first time constant.
func (j *Job) doStaircase() (result, error) {
	for try := 0; ; try++ {
		k := j.sizing()
		start := math.Max(k.StartForward, k.StartReverse)
		top := math.Min(stairShare*float64(j.Env.VoltsMax), start+stairShare*float64(j.Env.SpeedMax)/j.Gain)
		if top < 1.6*start {
			top = math.Min(1.6*start+0.2*float64(j.Env.VoltsMax), 0.8*float64(j.Env.VoltsMax))
		}
		runs, err := j.climb(k, top)
		if err != nil {
			return "", err
		}
		tr := j.traceOf("staircase", runs[0].Samples)
		gain, tau, err := firstLook(tr)
		if err != nil {
			return "", refuse(723, "staircase", err.Error(), "look at the trace in the record; a larger top or a slower load may be needed")
		}
		dwell := math.Max(0.4, 5*j.Tau)
		j.Gain, j.Tau = gain, tau
		if 5*tau > 1.1*dwell && try < 2 {
			j.h.Say("staircase: a time constant of about %.2g s needs longer levels; once more", tau)
			continue
		}
		static, err := identify.FitStaircase(j.Levels)
		if err != nil {
			return "", refuse(723, "staircase", err.Error(), "look at the trace in the record; a larger top may be needed")
		}
		j.Static = &static
		if j.electric != nil {
			j.electric.running(j.Levels)
		}
		words, err := j.keepStairs(static, runs[0].Result)
		return words, errors.Join(err, j.gravity(runs), j.lostMotion())
	}
}

// stairRun is a run of a staircase with its levels.
type stairRun struct {
	Result
	stairs []excite.Stair
}

// climb runs the staircase: both ways, up and down, in one plan; or, where the
// supply takes nothing back, one way at a time and up only, each run ending in a
// coast.
func (j *Job) climb(k excite.Known, top float64) ([]stairRun, error) {
	ways, down := [][]float64{{1, -1}}, true
	switch {
	case !j.Env.Reverse:
		ways = [][]float64{{1}}
	case !j.Rig.Drive.SupplySinks:
		ways = [][]float64{{1}, {-1}}
	}
	down = j.Rig.Drive.SupplySinks || !j.Env.Brake
	var runs []stairRun
	j.Levels, j.rising = nil, nil
	for _, w := range ways {
		plan, stairs := excite.Staircase(k, 5, top, w, down)
		if d := plan.Duration(); d > j.Env.RunTimeMax {
			plan, stairs = excite.Staircase(k, 3, top, w, down)
		}
		r, err := j.run(StepStaircase, plan, nil)
		if err != nil {
			return nil, err
		}
		if r.Reason != safety.EndDone {
			return nil, j.notDone(r)
		}
		l, up := levels(r, stairs)
		j.Levels, j.rising = append(j.Levels, l...), append(j.rising, up...)
		runs = append(runs, stairRun{r, stairs})
	}
	return runs, nil
}

func (j *Job) keepStairs(static identify.Static, r Result) (result, error) {
	rec := sheet.StaircaseRecord{TraceFile: r.File, Params: append(staticQuantities(static, r.File), j.electric.quantities(r.File)...)}
	var pts []Point
	for i, l := range j.Levels {
		rec.Levels = append(rec.Levels, sheet.Level{VoltageV: l.Volts, SpeedRadS: l.Speed, Rising: j.rising[i], SpeedSDRadS: ptr(l.SpeedSD), Samples: l.N,
			Settled: l.Settled, FromS: ptr(l.From), ToS: ptr(l.To), CurrentA: j.measuredCurrent(l)})
		pts = append(pts, Point{l.Volts, l.Speed})
	}
	j.h.Show(func(v *View) {
		m := ModelView{}
		if v.Model != nil {
			m = *v.Model
		}
		m.Stairs = pts
		v.Model = &m
	})
	return result(fmt.Sprintf("gain about %.4g rad/s per V, sliding friction %.3g V forward, %.3g V reverse, time constant about %.3g s",
		static.Gain, static.CoulombForward, static.CoulombReverse, j.Tau)), j.h.Keep("fit", "staircase", rec)
}

// staticQuantities is what a staircase tells, for the record.
func staticQuantities(s identify.Static, file string) []sheet.Quantity {
	why := fmt.Sprintf("weighted least squares on %d settled levels of %s", s.Used, file)
	q := func(name, unit string, v, sd float64) sheet.Quantity {
		out := sheet.Quantity{Name: name, Value: sheet.Known(v), Unit: unit, Why: why}
		if sd > 0 {
			out.PlusMinus = sheet.Known(1.96 * sd)
		}
		return out
	}
	return []sheet.Quantity{q("gain, both ways", "rad/s per V", s.Gain, s.GainSD), q("gain forward", "rad/s per V", s.GainForward, 0),
		q("gain reverse", "rad/s per V", s.GainReverse, 0), q("sliding friction forward", "V", s.CoulombForward, s.CoulombForwardSD),
		q("sliding friction reverse", "V", s.CoulombReverse, s.CoulombReverseSD), q("hysteresis", "1", s.Hysteresis, 0)}
}

// measuredCurrent is a level's current, nil where the board does not measure it.
func (j *Job) measuredCurrent(l identify.Level) *float64 {
	if j.ID.Scales.CurrentLSB == 0 {
		return nil
	}
	return ptr(l.Current)
}

// levelsOf turns recorded levels back into what a staircase is fitted on; nil
// where a level lacks its spread.
func levelsOf(rec sheet.StaircaseRecord) []identify.Level {
	var out []identify.Level
	for _, l := range rec.Levels {
		if l.SpeedSDRadS == nil || l.FromS == nil || l.ToS == nil {
			return nil
		}
		out = append(out, identify.Level{Volts: l.VoltageV, Speed: l.SpeedRadS, SpeedSD: *l.SpeedSDRadS, N: l.Samples, Settled: l.Settled, From: *l.FromS, To: *l.ToS})
	}
	return out
}

// levels averages the settled half of each stair.
func levels(r Result, stairs []excite.Stair) (out []identify.Level, rising []bool) {
	for _, st := range stairs {
		s := window(r, st.From, st.To)
		if len(s) < 5 {
			continue
		}
		v, w, c := make([]float64, len(s)), make([]float64, len(s)), make([]float64, len(s))
		for i := range s {
			v[i], w[i], c[i] = float64(s[i].Volts), float64(s[i].Speed), float64(s[i].Current)
		}
		// Settled: the two halves of the averaged part agree within their noise or
		// one percent.
		half := len(w) / 2
		drift := math.Abs(mean(w[half:]) - mean(w[:half]))
		settled := drift <= math.Max(3*spread(w)/math.Sqrt(float64(half)), 0.01*math.Abs(mean(w)))
		out = append(out, identify.Level{Volts: mean(v), Speed: mean(w), SpeedSD: spread(w), N: len(s), Current: mean(c), Settled: settled,
			From: st.From.Seconds(), To: st.To.Seconds()})
		rising = append(rising, st.Up)
	}
	return out, rising
}

// firstLook fits a first-order model to the part of a staircase that turns one
// way, to size what follows.
func firstLook(tr *trace.Trace) (gain, tau float64, err error) {
	c := *tr
	c.Mask = append([]trace.Mask(nil), tr.Mask...)
	moving := false
	for i := range c.Time {
		if c.Voltage[i] <= 0 {
			if moving {
				c = *c.Slice(0, i)
				break
			}
			c.Mask[i] = trace.Start
			continue
		}
		if !moving && c.Speed[i] <= 0 {
			c.Mask[i] = trace.FirstMotion
			continue
		}
		moving = true
	}
	res, err := identify.Run(&c, identify.Options{Kind: model.KindFirstOrder, FreeStart: true})
	if err != nil {
		return 0, 0, err
	}
	f := res.Models[0]
	gain, _, _ = f.Value("gain")
	tau, _, _ = f.Value("tau")
	if !(gain > 0) || !(tau > 0) {
		return 0, 0, fmt.Errorf("speed does not follow voltage: gain %.3g rad/s per V, time constant %.3g s", gain, tau)
	}
	return gain, tau, nil
}

// operating chooses the middle and the size of the small-signal tests: 40 % of
// the reachable speed, steps of 30 % of that, never so low that friction or the
// dead band decide (common practice, no source).
func (j *Job) operating() (bias, amplitude float64) {
	k := j.sizing()
	coulomb := 0.85 * k.StartForward
	if j.Static != nil && j.Static.CoulombForward > 0 {
		coulomb = j.Static.CoulombForward
	}
	top := math.Min(float64(j.Env.VoltsMax)*0.9, coulomb+0.8*float64(j.Env.SpeedMax)/j.Gain)
	free := top - coulomb
	bias = coulomb + 0.42*free
	amplitude = 0.14 * free
	// The swing should be at least 25 steps of the reported speed, if there is room.
	if need := 25 * k.SpeedStep / (2 * j.Gain); amplitude < need {
		amplitude = math.Min(need, 0.3*free)
	}
	return bias, amplitude
}

// slowShare is the percentage of the longest run that steps with slow ways down
// may take.
const slowShare = 40

// stepRepeats is how many steps each way the step test makes.
const stepRepeats = 3

// doStep records small steps about the middle, at loop rate where the board can.
func (j *Job) doStep() (result, error) {
	j.Bias, j.Amplitude = j.operating()
	k, plan := j.braked(func(k excite.Known) safety.Plan { return excite.Step(k, j.Bias, j.Amplitude, stepRepeats) })
	if k.FallSlope > 0 {
		// The ways down are slow: as large as the time for a run allows.
		for plan.Duration() > slowShare*j.Env.RunTimeMax/100 && j.Amplitude > 8*k.SpeedStep/j.Gain {
			j.Amplitude *= 0.8
			plan = excite.Step(k, j.Bias, j.Amplitude, stepRepeats)
		}
		if plan.Duration() > j.Env.RunTimeMax {
			plan = excite.Step(k, j.Bias, j.Amplitude, 1)
		}
	}
	for range 8 { // the largest size that fits
		if _, _, err := j.forecast(plan); err == nil {
			break
		}
		j.Amplitude *= 0.8
		k, plan = j.braked(func(k excite.Known) safety.Plan { return excite.Step(k, j.Bias, j.Amplitude, stepRepeats) })
	}
	tr, file, err := j.record(StepStep, plan)
	if err != nil {
		return "", err
	}
	j.StepTrace, j.StepFile = tr, file
	return result(fmt.Sprintf("%d samples, steps of ±%.3g V about %.3g V", tr.Len(), j.Amplitude, j.Bias)), nil
}

// doSecond records a pseudo-random sequence about the same middle.
func (j *Job) doSecond() (result, error) {
	clock := time.Duration(math.Ceil(math.Max(0.02, 0.35*j.Tau)*200)) * 5 * time.Millisecond
	longest := min(time.Duration(math.Max(4, 45*j.Tau)*float64(time.Second)), j.Env.RunTimeMax-8*time.Second)
	bits := j.prbsBits(clock)
	k, plan := j.braked(func(k excite.Known) safety.Plan {
		return excite.PRBS(k, j.Bias, j.Amplitude, clock, bits, j.opt.Seed, longest)
	})
	words := fmt.Sprintf("pseudo-random ±%.3g V, one bit %s, seed %#x", j.Amplitude, milliseconds(clock), j.opt.Seed)
	if k.FallSlope > 0 || k.Dips {
		_, plan = j.braked(func(k excite.Known) safety.Plan { return excite.Heights(k, j.Bias, j.Amplitude, heights, j.opt.Seed) })
		words = fmt.Sprintf("steps of different heights up to ±%.3g V, seed %#x", j.Amplitude, j.opt.Seed)
	}
	tr, file, err := j.record(StepSecond, plan)
	if err != nil {
		return "", err
	}
	j.SecondTrace, j.SecondFile = tr, file
	return result(fmt.Sprintf("%d samples, %s", tr.Len(), words)), nil
}

// heights is how many steps the second test makes where the drive may not fall
// at once.
const heights = 5

// prbsBits is the longest register whose sequence the board's memory holds at
// ten samples a time constant.
func (j *Job) prbsBits(clock time.Duration) int {
	for _, n := range []int{7, 6} {
		seconds := float64(int(1)<<n) * clock.Seconds()
		if !j.ID.Can("capture") || float64(j.ID.CaptureN)*j.Tau/10 > seconds || float64(j.ID.CaptureN)*j.ID.Loop.Seconds() > seconds {
			return n
		}
	}
	return 5
}

// record runs a plan and returns the best trace of it, cut to the part where it
// drove about its middle.
func (j *Job) record(step StepID, plan safety.Plan) (*trace.Trace, string, error) {
	r, err := j.run(step, plan, j.capture(plan))
	if err != nil {
		return nil, "", err
	}
	if r.Reason != safety.EndDone {
		return nil, "", j.notDone(r)
	}
	tr := j.traceOf(plan.Name, r.Samples)
	if r.Capture != nil && r.Capture.Len() > 100 {
		tr = r.Capture
	}
	return tr, r.File, nil
}

// capture asks for board memory at loop rate, thinned so that the plan fits. A
// capture that would be slower than telemetry is not asked for.
func (j *Job) capture(plan safety.Plan) *Capture {
	if !j.ID.Can("capture") || j.ID.CaptureN < 100 {
		return nil
	}
	loops := plan.Duration().Seconds() / j.ID.Loop.Seconds()
	before := j.ID.CaptureN / 50
	dec := int(math.Ceil(loops / float64(j.ID.CaptureN-before)))
	if j.Hz > 0 && float64(dec)*j.ID.Loop.Seconds() > 0.9/float64(j.Hz) {
		return nil
	}
	return &Capture{Decimation: dec, Before: before, Count: j.ID.CaptureN}
}
