package job

import (
	"fmt"
	"math"

	"gainwright/safety"
	"gainwright/tune/forecast"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
)

// known is what a forecast may rest on: the fit if there is one, else what the
// staircase showed, else the nameplate.
func (j *Job) known() forecast.Known {
	m, env := j.Rig.Motor, j.Env
	k := forecast.Known{VoltsRated: m.VoltageRated, SpeedMax: float64(env.SpeedMax), Resistance: m.Resistance, Ke: m.Ke, Inertia: m.Inertia,
		BusNominal: j.Rig.Drive.BusNominal, BusCapacitance: j.Rig.Drive.BusCapacitance * 1e-6, SupplyCanSink: j.Rig.Drive.SupplySinks,
		CanBrake: env.Brake, RadPerCount: env.RadPerCount, Loop: j.ID.Loop.Seconds()}
	if j.Margins != nil && j.Margins.Crossover.Known() && j.Pushed {
		k.LoopTau, k.LoopOvershoot = 1/float64(j.Margins.Crossover), orZero(float64(j.Margins.Step.Overshoot))/100
	}
	if j.electric != nil && j.Tau > 0 {
		// Before the time constant is known, a resistance alone would forecast the
		// current of a stalled shaft.
		k.Resistance = j.electric.R
		if j.electric.Ke > 0 {
			k.Ke = j.electric.Ke
		}
	}
	f := j.friction()
	k.CoulombForward, k.CoulombReverse, k.BreakawayForward, k.BreakawayReverse = f.CoulombForward, f.CoulombReverse, f.BreakawayForward, f.BreakawayReverse
	if k.BreakawayForward == 0 {
		k.BreakawayForward, k.BreakawayReverse = j.StartForward, j.StartReverse
		k.CoulombForward, k.CoulombReverse = 0.8*j.StartForward, 0.8*j.StartReverse
	}
	if j.Fit != nil && j.Fit.Best() != nil {
		best := j.Fit.Best().Model
		k.Model = &best
	} else if j.Tau > 0 && j.Gain > 0 {
		first := model.FirstOrder(j.Gain, j.Tau, 0)
		k.Model = &first
	}
	return k
}

// forecast is what the person sees of a plan before it is armed, and the same
// for the record.
func (j *Job) forecast(p safety.Plan) (PlanView, []sheet.Quantity, error) {
	mode, unit := modeWords(p)
	v := PlanView{Name: p.Name, Purpose: p.Purpose, Segments: len(p.Segments), Mode: mode, Unit: unit, Drive: profile(p), Size: 1}
	f, err := forecast.Of(p, j.known())
	if err != nil {
		v.Facts = append(v.Facts, Fact{Name: "time at most", Value: fmt.Sprintf("%.1f s", p.Duration().Seconds())},
			Fact{Name: "forecast", Value: "none", Why: err.Error()})
		return v, nil, nil
	}
	if r, over, top, ok := j.loopCourse(p); ok {
		// The sampled loop with its gains says more than a lag.
		f.TopSpeed, f.Basis = model.Value(top), f.Basis+", closed loop simulated"
		f.Line.Time, f.Line.Speed = r.Time, r.Speed
		if ohms := j.ohms(); ohms > 0 {
			f.PeakCurrent = model.Value(over / ohms)
		}
		if f.BusRise.Known() && !j.Rig.Drive.SupplySinks && j.Env.Brake {
			f.BusRise = model.Value(j.loopBus(r))
		}
	}
	v.Band = f.Band
	v.Expect = thin(f.Line.Time, f.Line.Speed)
	var q []sheet.Quantity
	add := func(name, unit string, value model.Value, shown, limit string, over bool) {
		x := float64(value)
		if !value.Known() {
			shown = "not known"
		}
		verdict := ""
		if over {
			verdict = "over"
		}
		v.Facts = append(v.Facts, Fact{Name: name, Value: shown, Limit: limit, Why: f.Basis, Verdict: verdict})
		q = append(q, sheet.Quantity{Name: name, Value: sheet.Known(x), Unit: unit, Why: f.Basis})
	}
	top := float64(j.Env.SpeedMax)
	if p.SpeedMax > 0 {
		top = math.Min(top, p.SpeedMax)
	}
	add("top speed", "rad/s", f.TopSpeed, rpm(float64(f.TopSpeed)), rpm(top), float64(f.TopSpeed) > top)
	add("unloaded", "rad/s", f.TopSpeedUnloaded, rpm(float64(f.TopSpeedUnloaded)), rpm(float64(j.Env.SpeedMax)), false)
	add("peak current", "A", f.PeakCurrent, fmt.Sprintf("%.2g A", float64(f.PeakCurrent)), fmt.Sprintf("%.3g A", float64(j.Env.CurrentMax)), float64(f.PeakCurrent) > float64(j.Env.CurrentMax))
	add("heat", "J", f.Heat, fmt.Sprintf("%.2g J", float64(f.Heat)), "", false)
	bus := j.Rig.Drive.BusNominal + float64(f.BusRise)
	add("bus when stopping", "V", model.Value(bus), fmt.Sprintf("%.1f V", bus), fmt.Sprintf("%.3g V", float64(j.Env.BusMax)), bus > float64(j.Env.BusMax) && j.Env.BusMax > 0)
	add("turns", "1", f.Turns, fmt.Sprintf("%.3g", float64(f.Turns)), fmt.Sprintf("%.3g", j.Env.TurnsMax), float64(f.Turns) > j.Env.TurnsMax)
	v.Facts = append(v.Facts, Fact{Name: "time at most", Value: fmt.Sprintf("%.1f s", p.Duration().Seconds())})
	if x := p.Segments[len(p.Segments)-1].Pattern; p.HasPattern() {
		v.Facts = append(v.Facts, Fact{Name: "in the board's loop", Value: fmt.Sprintf("%s ±%.3g V", x.Kind, x.Amplitude)})
	}
	return v, q, j.overForecast(p, v)
}

// overForecast refuses a run whose forecast passes a limit. A check at creep is
// judged by its own ceiling, and the limit check is to pass one on purpose.
func (j *Job) overForecast(p safety.Plan, v PlanView) error {
	if p.Check == safety.CheckLimit || p.Check == safety.CheckSign {
		return nil
	}
	for _, f := range v.Facts {
		if f.Verdict == "over" {
			return refuse(724, p.Name+" refused", fmt.Sprintf("forecast %s is %s, the limit %s (%s)", f.Name, f.Value, f.Limit, f.Why),
				"make the run smaller, or change the limit in the rig file with a reason")
		}
	}
	return nil
}

// nameplateGain is what the nameplate says of the gain, in rad/s per V.
func (j *Job) nameplateGain() float64 {
	if ke := j.Rig.Motor.Ke; ke > 0 {
		return 1 / ke
	}
	return float64(j.Env.SpeedMax) / float64(j.Env.VoltsMax)
}
