package job

import (
	"fmt"
	"math"

	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// StepMotor is worked out with the model: no run of its own.
const StepMotor StepID = "motor"

// boxBelow is the current-free bound on an electrical time constant that the data
// do not show, as a share of the mechanical one (our choice).
const boxBelow = 0.05

// boxGain is by how much the equations may miss the gain of the model (our choice).
const boxGain = 0.08

// motorBox puts what is known of the motor equations together: from the levels of
// the staircase with their currents, the ramps of the breakaway test and the model.
func (j *Job) motorBox() error {
	best := j.Fit.Best()
	if best == nil {
		return nil
	}
	set := ExperimentSettings{Experiment: StepMotor, Model: &best.Model, Numbers: map[string]float64{}}
	put := func(name string, v, sd float64) {
		if v > 0 && !math.IsInf(v, 0) {
			set.Numbers[name] = v
			if sd > 0 && !math.IsInf(sd, 0) {
				set.Numbers[name+"_sd"] = sd
			}
		}
	}
	for _, n := range []string{"gain", "tau", "tau2"} {
		if v, sd, ok := best.Value(n); ok {
			put(n, v, sd)
		}
	}
	if e := j.electric; e != nil {
		put("resistance", e.R, e.RSD)
		put("ke", e.Ke, e.KeSD)
	}
	if rec, ok := j.Experiments[StepResistance]; ok && rec.Verdict == string(identify.Believed) {
		if v, sd, ok := paramOf(rec, "resistance"); ok {
			put("resistance_locked", v, sd)
		}
	}
	if j.hasCurrent() {
		for i, l := range j.Levels {
			key := fmt.Sprintf("level%02d_", i+1)
			set.Numbers[key+"speed"], set.Numbers[key+"current"] = l.Speed, l.Current
		}
	}
	if n := len(j.BreakForward); n > 0 {
		put("breakaway_forward", mean(j.BreakForward), spread(j.BreakForward)/math.Sqrt(float64(n)))
	}
	if n := len(j.BreakReverse); n > 0 {
		put("breakaway_reverse", mean(j.BreakReverse), spread(j.BreakReverse)/math.Sqrt(float64(n)))
	}
	if s := j.Static; s != nil {
		put("coulomb_volts_forward", s.CoulombForward, s.CoulombForwardSD)
		put("coulomb_volts_reverse", s.CoulombReverse, s.CoulombReverseSD)
		put("speed_low", s.SpeedMin, 0)
		put("speed_high", s.SpeedMax, 0)
	}
	_, err := j.experiment(set, nil, nil)
	return err
}

// analyseMotor is the motor gray box: Ke, R, L, J, viscous and Coulomb friction a
// way. Numbers: as motorBox puts them, in SI units. With K and T the gain and the sum
// of the time constants, J = T·Ke/(K·R) and bR + Ke² = Ke/K; L = T1·T2·(bR + Ke²)/J.
// Without a current only K, T and friction in volts are identifiable.
func analyseMotor(set ExperimentSettings, _ []*trace.Trace, rec *sheet.ExperimentRecord) error {
	n := set.Numbers
	gain, tau, tau2 := n["gain"], n["tau"], n["tau2"]
	if gain > 0 {
		quantity(rec, "gain", "rad/s/V", gain, n["gain_sd"], "the model")
	}
	if tau > 0 {
		quantity(rec, "mechanical time constant", "s", tau, n["tau_sd"], "slower pole of the model")
	}
	for _, way := range []string{"forward", "reverse"} {
		if v := n["coulomb_volts_"+way]; v > 0 {
			quantity(rec, "sliding friction "+way, "V", v, n["coulomb_volts_"+way+"_sd"], "staircase: volts at which the line of speed over volts meets zero")
		}
		if v := n["breakaway_"+way]; v > 0 {
			quantity(rec, "breakaway "+way, "V", v, n["breakaway_"+way+"_sd"], "mean of the ramps")
		}
	}
	if tau2 == 0 && tau > 0 {
		rec.Reasons = append(rec.Reasons, fmt.Sprintf("not identifiable: the electrical time constant L/R, the data show one lag only (it is likely under %.2g ms)", boxBelow*tau*1e3))
	}
	if n["ke"] == 0 || n["resistance"] == 0 {
		rec.Reasons = append(rec.Reasons, "not identifiable without a measured current: R, L, Ke, Kt, J and friction as torque. Gain and time constants alone fit any R with some Ke, J and b")
		if n["speed_high"] > n["speed_low"] && n["speed_low"] > 0 {
			linearRange(n["speed_low"], n["speed_high"], rec)
		}
		rec.Finding = fmt.Sprintf("gain %.4g rad/s/V, time constant %.4g ms, friction in volts; torques are not identifiable without a current", gain, tau*1e3)
		return nil
	}
	return withCurrent(set, rec)
}

// withCurrent adds what a measured current makes identifiable.
func withCurrent(set ExperimentSettings, rec *sheet.ExperimentRecord) error {
	n := set.Numbers
	gain, tau, tau2 := n["gain"], n["tau"]+n["tau2"], n["tau2"]
	r, rSD, ke, keSD := n["resistance"], n["resistance_sd"], n["ke"], n["ke_sd"]
	if v, sd := n["resistance_locked"], n["resistance_locked_sd"]; v > 0 && sd > 0 && (sd < rSD || rSD == 0) {
		r, rSD = v, sd
	}
	quantity(rec, "R", "ohm", r, rSD, "winding with leads and driver, the better known of the ramps before first motion and the locked rotor")
	quantity(rec, "Ke", "V s/rad", ke, keSD, "V − R·I over speed on the levels; Kt is the same number in SI units")
	m := model.Motor{R: r, Ke: ke, Kt: ke}
	if gain > 0 && tau > 0 {
		m.J = tau * ke / (gain * r)
		rel := math.Sqrt(sq(n["tau_sd"]/n["tau"]) + sq(n["gain_sd"]/gain) + sq(keSD/ke) + sq(rSD/r))
		quantity(rec, "J", "kg m²", m.J, m.J*rel, "T·Ke/(K·R) with T the sum of the time constants")
	}
	low, high := math.Inf(1), 0.0
	for k, way := range []string{"forward", "reverse"} {
		var speed, torque []float64
		for i := 1; i < 100; i++ {
			key := fmt.Sprintf("level%02d_", i)
			w, ok := n[key+"speed"]
			if !ok {
				break
			}
			if dir := float64(1 - 2*k); w*dir > 0 {
				speed, torque = append(speed, w*dir), append(torque, ke*n[key+"current"]*dir)
				low, high = math.Min(low, w*dir), math.Max(high, w*dir)
			}
		}
		f, err := identify.FitFriction(speed, torque)
		if err != nil {
			continue
		}
		coulomb := math.Max(0, f.Coulomb)
		quantity(rec, "Coulomb friction "+way, "N m", f.Coulomb, math.Hypot(f.CoulombSD, f.Coulomb*keSD/ke), fmt.Sprintf("Ke·I over speed on %d levels, drawn to speed 0", f.N))
		quantity(rec, "viscous friction "+way, "N m s/rad", f.Viscous, f.ViscousSD, "slope of the same line")
		if k == 0 {
			m.CoulombForward, m.Viscous = coulomb, math.Max(0, f.Viscous)
		} else {
			m.CoulombReverse = coulomb
		}
		if f.Viscous < -3*f.ViscousSD {
			doubt(rec, identify.Care, "%s: friction falls with speed: the levels are too slow for a straight line (Stribeck), or the current's zero is off", way)
		}
	}
	if tau2 > 0 && m.J > 0 {
		l := n["tau"] * tau2 * (m.Viscous*r + ke*ke) / m.J
		rel := math.Hypot(n["tau2_sd"]/tau2, n["tau_sd"]/n["tau"])
		quantity(rec, "L", "H", l, l*rel, "T1·T2·(bR + Ke²)/J")
		m.L = l
	}
	rec.Finding = fmt.Sprintf("R %.3g Ω, Ke %.4g V·s/rad, J %.3g kg·m², Coulomb %.3g and %.3g N·m", r, ke, m.J, m.CoulombForward, m.CoulombReverse)
	boxAgainstModel(m, gain, low, high, rec)
	return nil
}

// boxAgainstModel linearises the motor equations at the middle of the levels and
// holds their gain against the model's, which came from other records.
func boxAgainstModel(m model.Motor, gain, low, high float64, rec *sheet.ExperimentRecord) {
	if !(m.J > 0) || m.Validate() != nil || !(high > low) {
		return
	}
	lin := m.Linearise((low+high)/2, 0)
	ratio := lin.DCGain() / gain
	quantity(rec, "gain of the equations over the model's", "1", ratio, 0, fmt.Sprintf("Ke/(bR + Ke²) at %s", rpm((low+high)/2)))
	linearRange(low, high, rec)
	if math.Abs(ratio-1) > boxGain {
		doubt(rec, identify.Care, "the gain that R, Ke and b give is x%.2f of the model's: a scale of current or volts is off, or Ke is not constant", ratio)
	}
}

// linearRange says from which speed to which the linear model is to be used.
func linearRange(low, high float64, rec *sheet.ExperimentRecord) {
	quantity(rec, "linear model from", "rad/s", low, 0, "slowest level: below it friction takes over (common practice, no source)")
	quantity(rec, "linear model to", "rad/s", high, 0, "fastest level")
}

func sq(x float64) float64 { return x * x }
