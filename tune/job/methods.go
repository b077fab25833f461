package job

import (
	"fmt"
	"math"
	"strings"

	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// What two methods may differ by before it is said, in shares (the same test in the
// same hour repeats to about these: common practice, no source), and in standard
// deviations of the difference.
var methodShares = map[string]float64{"gain": 0.02, "time constant": 0.05, "dead time": 0.5, "sliding friction forward": 0.2, "sliding friction reverse": 0.2}

const (
	methodSigmas  = 4.0
	methodDeadLag = 0.5 // of a loop period: what dead times may differ by at least
)

// said is one quantity by one method.
type said struct {
	method    string
	value, sd float64
}

// methods sets against one another what different tests say of the same numbers,
// as far as they were done. Step test and second test are fitted each by itself.
func (j *Job) methods() error {
	if j.Fit == nil || j.Fit.Best() == nil || j.StepTrace == nil {
		return nil
	}
	set := ExperimentSettings{Experiment: StepMethods, Model: &j.Fit.Best().Model,
		Numbers: map[string]float64{"loop": j.ID.Loop.Seconds(), "bus_nominal": j.fitTold.Bus, "edges": boolNumber(j.fitTold.Edges)}}
	for _, step := range []StepID{StepRelay, StepFrequency, StepCoast} {
		rec, ok := j.Experiments[step]
		if !ok || rec.Verdict == string(identify.Refused) {
			continue
		}
		for name := range methodShares {
			if v, sd, ok := paramOf(rec, name); ok && step != StepCoast {
				set.Numbers[string(step)+" "+name], set.Numbers[string(step)+" "+name+" sd"] = v, sd
			}
		}
	}
	j.coastVoltsOf(set.Numbers)
	if s := j.Static; s != nil {
		put := func(name string, v, sd float64) {
			if v > 0 && sd > 0 {
				set.Numbers["staircase "+name], set.Numbers["staircase "+name+" sd"] = v, sd
			}
		}
		put("gain", s.Gain, s.GainSD)
		put("sliding friction forward", s.CoulombForward, s.CoulombForwardSD)
		put("sliding friction reverse", s.CoulombReverse, s.CoulombReverseSD)
	}
	traces, files := []*trace.Trace{j.StepTrace}, []string{j.StepFile}
	if j.SecondTrace != nil {
		traces, files = append(traces, j.SecondTrace), append(files, j.SecondFile)
	}
	if _, err := j.experiment(set, traces, files); err != nil {
		return err
	}
	j.showModel()
	return nil
}

// judged is a verdict with its reasons after the other methods had their say: what
// they contradict is used with care at most, whatever its own record says.
func judged(own identify.Verdict, why []string, methods *sheet.ExperimentRecord) (identify.Verdict, []string) {
	if methods == nil || methods.Verdict == string(identify.Believed) || own == identify.Refused {
		return own, why
	}
	out := append([]string(nil), why...)
	for _, r := range methods.Reasons {
		out = append(out, "methods disagree: "+r)
	}
	return identify.Care, out
}

// judgedOf is judged for a fit of this job.
func (j *Job) judgedOf(f *identify.Fit) (identify.Verdict, []string) {
	if rec, ok := j.Experiments[StepMethods]; ok {
		return judged(f.Verdict, f.Reasons, &rec)
	}
	return f.Verdict, f.Reasons
}

// coastVoltsOf adds the dry friction of the coast-down in volts at the drive:
// (T0/J)·T/K with T the sum of the model's time constants, since K/T is Ke/(J·R).
func (j *Job) coastVoltsOf(n map[string]float64) {
	rec, ok := j.Experiments[StepCoast]
	gain, gainSD, okGain := j.Fit.Best().Value("gain")
	tau, tauSD, okTau := j.Fit.Best().Value("tau")
	tau2, _, _ := j.Fit.Best().Value("tau2")
	if !ok || !okGain || !okTau || rec.Verdict == string(identify.Refused) {
		return
	}
	for _, way := range []string{"forward", "reverse"} {
		if a, sd, ok := paramOf(rec, "dry friction over inertia "+way); ok && a > 0 {
			v := a * (tau + tau2) / gain
			key := string(StepCoast) + " sliding friction " + way
			n[key], n[key+" sd"] = v, v*math.Sqrt(sq(sd/a)+sq(gainSD/gain)+sq(tauSD/tau))
		}
	}
}

func boolNumber(b bool) float64 {
	if b {
		return 1
	}
	return 0
}

// analyseMethods fits each record by itself and compares. Numbers: loop in s,
// bus_nominal in V and edges as the fit was told, and "method quantity" with
// "method quantity sd" of every other method.
func analyseMethods(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	if set.Model == nil {
		return identify.ErrData
	}
	all := map[string][]said{}
	for i, tr := range traces {
		name := []string{"step test", "second test"}[min(i, 1)]
		fit := FitSettings{Kind: set.Model.Kind, FreeStart: true, Bus: set.Numbers["bus_nominal"], Edges: set.Numbers["edges"] != 0}
		res, err := fit.Identify(tr, nil)
		if err != nil {
			doubt(rec, identify.Care, "%s by itself: %v", name, err)
			continue
		}
		f := res.Models[0]
		for param, as := range map[string]string{"gain": "gain", "tau": "time constant", "dead_time": "dead time"} {
			if v, sd, ok := f.Value(param); ok {
				all[as] = append(all[as], said{name, v, sd})
			}
		}
	}
	for _, m := range []string{"staircase", string(StepRelay), string(StepFrequency), string(StepCoast)} {
		for q := range methodShares {
			if v, ok := set.Numbers[m+" "+q]; ok {
				all[q] = append(all[q], said{m, v, set.Numbers[m+" "+q+" sd"]})
			}
		}
	}
	var worst []string
	for _, q := range []string{"gain", "time constant", "dead time", "sliding friction forward", "sliding friction reverse"} {
		if len(all[q]) > 1 {
			worst = append(worst, compareMethods(q, all[q], set.Numbers["loop"], rec))
		}
	}
	rec.Finding = strings.Join(worst, "; ")
	if rec.Finding == "" {
		rec.Finding = "one method only: nothing to compare"
	}
	return nil
}

// compareMethods adds every method's number of a quantity and says how far the two
// farthest apart are from each other, in percent and in units of their own ±.
func compareMethods(q string, list []said, loop float64, rec *sheet.ExperimentRecord) string {
	unit := map[string]string{"gain": "rad/s/V", "time constant": "s", "dead time": "s"}[q]
	if unit == "" {
		unit = "V"
	}
	var a, b said
	apart := -1.0
	for i, x := range list {
		quantity(rec, q+", "+x.method, unit, x.value, x.sd, "by this method alone")
		for _, y := range list[i+1:] {
			if d := math.Abs(x.value - y.value); d > apart {
				apart, a, b = d, x, y
			}
		}
	}
	if i := indexOf(list, string(StepCoast)); i >= 0 && len(list) == 2 {
		return driverLoss(q, list[1-i], list[i], rec)
	}
	own := math.Hypot(a.sd, b.sd)
	sigmas := apart / math.Max(own, 1e-300)
	share := apart / math.Max(math.Abs(a.value+b.value)/2, 1e-300)
	room := methodShares[q] * math.Abs(a.value+b.value) / 2
	if q == "dead time" {
		room = math.Max(room, methodDeadLag*loop)
	}
	if sigmas > methodSigmas && apart > room {
		doubt(rec, identify.Care, "%s: %s says %.4g, %s says %.4g %s: %.1f %% apart, %.1f times the ± of the difference", q, a.method, a.value, b.method, b.value, unit, 100*share, sigmas/1.96)
	}
	return fmt.Sprintf("%s: %d methods within %.2g %%, %.1f of their ±", q, len(list), 100*share, sigmas/1.96)
}

func indexOf(list []said, method string) int {
	for i := range list {
		if list[i].method == method {
			return i
		}
	}
	return -1
}

// driverLoss is what the staircase's friction has over that of the coast-down: with
// the output off the driver's own drop does not come in.
func driverLoss(q string, stairs, coast said, rec *sheet.ExperimentRecord) string {
	loss, sd := stairs.value-coast.value, math.Hypot(stairs.sd, coast.sd)
	quantity(rec, "lost by the driver, "+strings.TrimPrefix(q, "sliding friction "), "V", loss, sd, "sliding friction of the staircase less that of the coast-down, where no current flows")
	if loss < -methodSigmas*sd && -loss > methodShares[q]*stairs.value {
		doubt(rec, identify.Care, "%s: the coast-down says %.3g V, the staircase %.3g V only: something brakes when the output is off", q, coast.value, stairs.value)
	}
	return fmt.Sprintf("%s: %.3g V, of which %.2g ± %.2g V is the driver's", q, stairs.value, loss, 1.96*sd)
}
