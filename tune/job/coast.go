package job

import (
	"fmt"
	"math"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// Coast-downs a way (our choice): three at least, more while the dry friction is
// not known to coastWidth.
const (
	coastRuns, coastRunsMost = 3, 5
	coastWidth               = 0.05 // half of the 95 % interval, of the value
	coastLongest             = 60.0 // s
)

// doCoast lets the motor coast from a middle speed, some times each way.
func (j *Job) doCoast() (result, error) {
	set := ExperimentSettings{Experiment: StepCoast, Numbers: map[string]float64{"gain": j.Gain, "tau": j.Tau}}
	if m, ok := j.Motor(); ok && m.J > 0 {
		set.Numbers["inertia"] = m.J
	}
	ways := []float64{1, -1}
	if !j.Env.Reverse {
		ways = ways[:1]
	}
	var traces []*trace.Trace
	var files []string
	for _, way := range ways {
		for n := 0; n < coastRuns || n < coastRunsMost && !j.coastEnough(set, traces, way); n++ {
			k := j.sizing()
			plan := excite.Coast(k, way*j.coastVolts(k))
			plan.Name = fmt.Sprintf("coast-down %d", len(traces)+1)
			r, err := j.run(StepCoast, plan, nil)
			if err != nil {
				return "", err
			}
			if r.Reason != safety.EndDone {
				return "", j.notDone(r)
			}
			rest, err := j.untilRest(coastLongest)
			if err != nil {
				return "", err
			}
			tr := j.traceOf(plan.Name, follow(r.Samples, rest))
			file, err := j.h.KeepTrace(plan.Name+"-to-rest", tr)
			if err != nil {
				return "", err
			}
			traces, files = append(traces, tr), append(files, file)
		}
	}
	return j.experiment(set, traces, files)
}

// coastVolts is a drive that brings about half of the speed limit.
func (j *Job) coastVolts(k excite.Known) float64 {
	return math.Min(0.75*float64(j.Env.VoltsMax), k.StartForward+0.5*float64(j.Env.SpeedMax)/j.Gain)
}

// coastEnough reports whether the dry friction of a way is known well enough, and
// says what one more repeat would buy.
func (j *Job) coastEnough(set ExperimentSettings, traces []*trace.Trace, way float64) bool {
	var dry, sd []float64
	for _, tr := range traces {
		if f, err := identify.FitCoast(tr); err == nil && f.Direction == way {
			dry, sd = append(dry, f.Dry), append(sd, f.DrySD)
		}
	}
	m := identify.MeanOf(dry, sd)
	enough := 1.96*m.SD <= coastWidth*math.Abs(m.Value)
	words := fmt.Sprintf("dry friction over inertia %.4g ± %.2g rad/s²; one more run: ± %.2g", m.Value, 1.96*m.SD, 1.96*m.SD*math.Sqrt(float64(m.N)/float64(m.N+1)))
	j.learnt(words)
	j.h.Say("coast-down: %s", words)
	return enough
}

// learnt shows how well the number is known that an experiment is for.
func (j *Job) learnt(words string) {
	j.h.Show(func(v *View) {
		if v.Live != nil {
			l := *v.Live
			l.Learn = words
			v.Live = &l
		}
	})
}

// shortedShare is the part of the electrical braking rate that a coast-down may
// show before the winding counts as shorted by the switched-off driver.
const shortedShare = 0.5

// analyseCoast takes friction from coast-downs. Numbers: gain in rad/s per V and
// tau in s of the motor under drive, inertia in kg·m² where known. K/τ is
// Ke/(J·R), so that (T0/J)·τ/K is the dry friction in volts at the drive.
func analyseCoast(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	gain, tau, inertia := set.Numbers["gain"], set.Numbers["tau"], set.Numbers["inertia"]
	dry, drySD, visc, viscSD := [2][]float64{}, [2][]float64{}, [2][]float64{}, [2][]float64{}
	bend, spreadMost := 0.0, 0.0
	for i, tr := range traces {
		f, err := identify.FitCoast(tr)
		if err != nil {
			return fmt.Errorf("run %d: %w", i+1, err)
		}
		k := 0
		if f.Direction < 0 {
			k = 1
		}
		dry[k], drySD[k] = append(dry[k], f.Dry), append(drySD[k], f.DrySD)
		visc[k], viscSD[k] = append(visc[k], f.Viscous), append(viscSD[k], f.ViscousSD)
		bend += f.Bend / float64(len(traces))
	}
	for k, way := range []string{"forward", "reverse"} {
		if len(dry[k]) == 0 {
			continue
		}
		a, c := identify.MeanOf(dry[k], drySD[k]), identify.MeanOf(visc[k], viscSD[k])
		spreadMost = math.Max(spreadMost, a.Spread)
		why := fmt.Sprintf("J·dω/dt = −T0 − b·ω fitted to %d coast-downs with the output off; ± from the fits and from their scatter", a.N)
		quantity(rec, "dry friction over inertia "+way, "rad/s²", a.Value, a.SD, "T0/J: "+why)
		quantity(rec, "viscous friction over inertia "+way, "1/s", c.Value, c.SD, "b/J: "+why)
		if gain > 0 && tau > 0 {
			quantity(rec, "sliding friction "+way, "V", a.Value*tau/gain, a.SD*tau/gain, "(T0/J)·τ/K, since K/τ = Ke/(J·R)")
		}
		if inertia > 0 {
			quantity(rec, "Coulomb friction "+way, "N m", a.Value*inertia, a.SD*inertia, "T0/J times J from the model and the current")
			quantity(rec, "viscous friction "+way, "N m s/rad", c.Value*inertia, c.SD*inertia, "b/J times J from the model and the current")
		}
		if tau > 0 && c.Value > shortedShare/tau && c.Value > 4*c.SD {
			doubt(rec, identify.Care, "%s: it slows by %.3g a second, as with the winding shorted (1/τ is %.3g): the driver brakes when off, and the viscous part is the brake", way, c.Value, 1/tau)
		}
		if a.Value < -2*a.SD {
			doubt(rec, identify.Refused, "%s: dry friction comes out below zero: something drives the shaft", way)
		}
		if rec.Finding != "" {
			rec.Finding += "; "
		}
		rec.Finding += fmt.Sprintf("%s: T0/J %.4g ± %.2g rad/s², b/J %.3g ± %.2g /s", way, a.Value, 1.96*a.SD, c.Value, 1.96*c.SD)
	}
	if math.Abs(bend) > 3.5 {
		doubt(rec, identify.Care, "drag that grows with the square of the speed shows (%.1f of its own standard deviation): a fan or air, viscous friction is an average", bend)
	}
	if spreadMost > 4 {
		doubt(rec, identify.Care, "the runs scatter %.1f times as much as each allows: warm up, or look for something that rubs now and then", spreadMost)
	}
	return nil
}
