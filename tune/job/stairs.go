package job

import (
	"errors"
	"fmt"
	"math"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

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
		j.lookMotor()
		words, err := j.keepStairs(static, runs[0].Result)
		if bad := j.noise(runs); bad != nil {
			j.h.Say("noise of the staircase: %v", bad)
		}
		return words, errors.Join(err, j.gravity(runs), j.lostMotion(), j.motorCheck())
	}
}

// stairRun is a run of a staircase with its levels.
type stairRun struct {
	Result
	stairs []excite.Stair
}

// climb runs the staircase one way at a time, up and down; where the supply takes
// nothing back up only, and the run ends in a coast.
func (j *Job) climb(k excite.Known, top float64) ([]stairRun, error) {
	ways, down := []float64{1, -1}, j.Rig.Drive.SupplySinks || !j.Env.Brake
	if !j.Env.Reverse {
		ways = ways[:1]
	}
	var runs []stairRun
	j.Levels, j.rising = nil, nil
	for _, w := range ways {
		made := func(size float64) (safety.Plan, []excite.Stair) {
			// The lowest level is over breakaway whatever the size.
			low := 1.3 * math.Max(k.StartForward, k.StartReverse)
			plan, stairs := excite.Staircase(k, 5, math.Max(size*top, math.Min(low, top)), w, down)
			if d := plan.Duration(); d > j.Env.RunTimeMax {
				plan, stairs = excite.Staircase(k, 3, math.Max(size*top, math.Min(low, top)), w, down)
			}
			return plan, stairs
		}
		r, size, err := j.runSized(StepStaircase, func(size float64) safety.Plan { p, _ := made(size); return p }, Run{})
		if err != nil {
			return nil, err
		}
		_, stairs := made(size)
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
	words := fmt.Sprintf("gain about %.4g rad/s per V, sliding friction %.3g V forward, %.3g V reverse, time constant about %.3g s",
		static.Gain, static.CoulombForward, static.CoulombReverse, j.Tau)
	j.showStairs(words)
	return result(words), j.h.Keep("fit", "staircase", rec)
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
