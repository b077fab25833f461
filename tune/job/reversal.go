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

// reversalPairs is how many pairs of ramps the reversal test makes.
const reversalPairs = 8

// doReversal looks for lost motion on turning round.
func (j *Job) doReversal() (result, error) {
	if !j.Env.Reverse {
		return "", refuse(775, "reversal", "this drive turns one way only", "nothing: there is no turning round")
	}
	if !j.hasCurrent() || j.electric == nil || j.electric.Ke == 0 {
		return "", refuse(775, "reversal", "without a measured current and Ke, motion that the encoder does not see is not seen at all", "turn the shaft to and fro by hand and feel, or fit a current sensor")
	}
	pairs := reversalPairs
	plan := excite.Reversal(j.sizing(), pairs)
	for ; pairs > 4 && plan.Duration() > j.Env.RunTimeMax; pairs-- {
		plan = excite.Reversal(j.sizing(), pairs-1)
	}
	r, err := j.run(StepReversal, plan, nil)
	if err != nil {
		return "", err
	}
	if r.Reason != safety.EndDone {
		return "", j.notDone(r)
	}
	set := ExperimentSettings{Experiment: StepReversal, Numbers: map[string]float64{"resistance": j.electric.R, "ke": j.electric.Ke, "rad_per_count": j.ID.RadPerCount()}}
	return j.experiment(set, []*trace.Trace{j.traceOf(plan.Name, r.Samples)}, []string{r.File})
}

// analyseReversal compares ramps that turn round with ramps that do not. Numbers:
// resistance in Ω, ke in V·s/rad, rad_per_count in rad.
func analyseReversal(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	if len(traces) != 1 {
		return identify.ErrData
	}
	m, err := identify.FitLostMotion(traces[0], set.Numbers["resistance"], set.Numbers["ke"])
	if err != nil {
		return fmt.Errorf("%w: no ramp that could be judged", err)
	}
	turned, same := identify.MeanOf(m.Turned, nil), identify.MeanOf(m.Same, nil)
	lost, sd := turned.Value-same.Value, math.Hypot(turned.SD, same.SD)
	count := set.Numbers["rad_per_count"]
	why := fmt.Sprintf("back-EMF (V − R·I) over Ke before the first count, %d ramps that turn round less %d that do not", turned.N, same.N)
	quantity(rec, "lost motion", "rad", lost, sd, why)
	if count > 0 {
		quantity(rec, "lost motion", "counts", lost/count, sd/count, why)
	}
	rec.Finding = fmt.Sprintf("lost motion %.3g ± %.2g rad of the motor shaft", lost, 1.96*sd)
	if math.IsNaN(lost) {
		doubt(rec, identify.Refused, "ramps of both sorts are needed, %d and %d could be judged", turned.N, same.N)
		rec.Finding = "lost motion is not known"
		return nil
	}
	if lost > playLeast && lost > 4*sd && lost > playCounts*count {
		doubt(rec, identify.Care, "on turning round the motor turns %.2g rad before the encoder sees it: coupling, keys, gear; a loop closed over free play hunts", lost)
	}
	return nil
}
