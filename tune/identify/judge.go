package identify

import (
	"fmt"
	"math"

	"gainwright/tune/trace"
)

// Bounds of the verdict. VAF of 95 % and 80 %, and ±10 % for the gain and ±20 % for
// the time constant: common practice, no source. The rest is our choice.
const (
	nrmseBelieved         = 0.224 // VAF 95 %
	nrmseRefused          = 0.447 // VAF 80 %
	noiseAllowance        = 1.25  // hold-out RMSE over fit RMSE that chance explains
	gainCare, gainRefused = 0.10, 0.30
	tauCare, tauRefused   = 0.20, 0.60
	aiccSupport           = 10.0 // fall of AICc that a second time constant has to bring
)

// verdicts collects reasons; the worst one counts.
type verdicts struct {
	worst   Verdict
	reasons []string
	helps   string
}

func (v *verdicts) add(level Verdict, help, format string, args ...any) {
	rank := map[Verdict]int{"": 0, Believed: 0, Care: 1, Refused: 2}
	if rank[level] > rank[v.worst] {
		v.worst = level
		v.helps = help
	}
	if v.helps == "" {
		v.helps = help
	}
	v.reasons = append(v.reasons, fmt.Sprintf(format, args...))
}

// judged reports the estimate and judges it.
func (r *run) judged(e *estimate) Fit {
	f := e.report()
	f.Masked = r.masked
	r.holdout(e, &f)
	f.judge()
	return f
}

// judge makes the verdict from the numbers of the fit.
func (f *Fit) judge() {
	v := &verdicts{worst: Believed}
	judgeResponse(f, v)
	judgeWidths(f, v)
	judgePrediction(f, v)
	f.Verdict, f.Reasons, f.Helps = v.worst, v.reasons, v.helps
}

// holdout fills the hold-out measures, if anything was held out.
func (r *run) holdout(e *estimate, f *Fit) {
	steady := e.steady()
	switch {
	case r.split > 0:
		p := e.speeds(r.whole[0], steady, r.split, false).from(r.split)
		if len(p.y) > 0 {
			f.HoldoutNRMSE, f.HoldoutRMSE = p.nrmse()
		}
	case len(r.held) > 0:
		f.HoldoutNRMSE, f.HoldoutRMSE = e.judgeTraces(r.held)
	}
}

func (e *estimate) steady() bool {
	for _, s := range e.proj.pieces {
		for _, sp := range s.spans {
			if sp.steady {
				return true
			}
		}
	}
	return false
}

// judgeTraces simulates other records, each with its own offset and initial
// state, and returns the measures over all of them.
func (e *estimate) judgeTraces(held []*trace.Trace) (nrmse, rmse float64) {
	var num, den float64
	n := 0
	for _, tr := range held {
		p := e.speeds(tr, false, 0, true)
		for i := range p.y {
			d := p.y[i] - p.sim[i]
			num += d * d
		}
		s := deviation(p.y)
		den += s * s
		n += len(p.y)
	}
	if n == 0 {
		return math.NaN(), math.NaN()
	}
	return math.Sqrt(num / den), math.Sqrt(num / float64(n))
}

// judgeResponse refuses a motor that does not answer, or answers backwards.
func judgeResponse(f *Fit, v *verdicts) {
	p := f.Params[0]
	if p.SD > 0 && math.Abs(p.Value) < 4*p.SD {
		v.add(Refused, "a larger step, after a sign check", "the speed does not answer the voltage: %s %.3g ± %.2g %s", p.Name, p.Value, 1.96*p.SD, p.Unit)
		return
	}
	if p.Value < 0 {
		v.add(Refused, "sign check", "wrong sign: a positive voltage gives a negative speed (%s %.3g %s)", p.Name, p.Value, p.Unit)
	}
}

func judgeWidths(f *Fit, v *verdicts) {
	for _, p := range f.Params {
		care, refused := 0.0, 0.0
		switch p.Name {
		case "gain", "slope":
			care, refused = gainCare, gainRefused
		case "tau", "natural_frequency":
			care, refused = tauCare, tauRefused
		default:
			continue
		}
		half := 1.96 * p.SD / math.Abs(p.Value)
		switch {
		case half > refused:
			v.add(Refused, "more repeats, a larger step, or a longer record", "%s is known to ±%.0f %% only", p.Name, 100*half)
		case half > care:
			v.add(Care, "more repeats or a larger step", "%s is known to ±%.0f %% only", p.Name, 100*half)
		}
	}
}

// judgePrediction holds the fit, and the hold-out where there is one, against the
// bounds. A hold-out error that the noise seen in the fit explains is not held
// against the model; it is then said that the hold-out decides nothing.
func judgePrediction(f *Fit, v *verdicts) {
	if !finite(f.HoldoutNRMSE) {
		v.add(Care, "a second record, of another kind if there is one", "not judged on data it has not seen")
		judgeLevel(f.NRMSE, "on the data of the fit", v)
		return
	}
	if f.HoldoutNRMSE > nrmseBelieved && f.HoldoutRMSE <= noiseAllowance*f.RMSE {
		v.add(Care, "a hold-out with larger motion", "the hold-out moves too little against the noise to judge by (NRMSE %.2f, of which noise alone gives %.2f)",
			f.HoldoutNRMSE, f.HoldoutNRMSE*f.RMSE/f.HoldoutRMSE)
		judgeLevel(f.NRMSE, "on the data of the fit", v)
		return
	}
	judgeLevel(f.HoldoutNRMSE, "on the hold-out", v)
}

func judgeLevel(nrmse float64, where string, v *verdicts) {
	switch {
	case nrmse > nrmseRefused:
		v.add(Refused, "steps of the same size at other speeds, to find what the model misses", "simulated speed misses %s: NRMSE %.2f is over %.3f", where, nrmse, nrmseRefused)
	case nrmse > nrmseBelieved:
		v.add(Care, "a second kind of excitation (PRBS after steps)", "simulated speed is rough %s: NRMSE %.2f is over %.3f", where, nrmse, nrmseBelieved)
	}
}
