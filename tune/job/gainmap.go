package job

import (
	"fmt"
	"math"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// Operating points of the gain map, as shares of the drive free above friction, and
// from where on a linear model is not what it was (our choice).
var mapPoints = []float64{0.2, 0.42, 0.7}

const (
	mapRepeats = 2
	mapGain    = 0.10
	mapTau     = 0.20
)

// doMap makes small steps about several speeds, each way the drive goes.
func (j *Job) doMap() (result, error) {
	best := j.Fit.Best()
	set := ExperimentSettings{Experiment: StepMap, Model: &best.Model, Numbers: map[string]float64{"bus_nominal": j.fitTold.Bus}}
	var traces []*trace.Trace
	var files []string
	ways := []float64{1, -1}
	if !j.Env.Reverse {
		ways = ways[:1]
	}
	for _, way := range ways {
		friction := j.slidingVolts()
		if s := j.Static; way < 0 && s != nil && s.CoulombReverse > 0 {
			friction = s.CoulombReverse
		}
		top := math.Min(float64(j.Env.VoltsMax)*0.9, friction+0.8*float64(j.Env.SpeedMax)/j.Gain)
		for _, share := range mapPoints {
			bias := way * (friction + share*(top-friction))
			size := math.Min(j.Amplitude, 0.6*share*(top-friction))
			k, plan := j.braked(func(k excite.Known) safety.Plan { return excite.Step(k, bias, size, mapRepeats) })
			if way < 0 && (k.Dips || k.FallSlope > 0) {
				break // what braking gives back is bounded forward only
			}
			plan.Name = fmt.Sprintf("map %.3g V", bias)
			if plan.Duration() > j.Env.RunTimeMax {
				plan = excite.Step(k, bias, size, 1)
			}
			tr, file, _, err := j.record(StepMap, plan, nil)
			if err != nil {
				return "", err
			}
			traces, files = append(traces, tr), append(files, file)
		}
	}
	return j.experiment(set, traces, files)
}

// analyseMap fits each record by itself. Numbers: bus_nominal in V as the fit was
// told.
func analyseMap(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	if set.Model == nil {
		return identify.ErrData
	}
	cols := []sheet.Series{{Name: "drive", Unit: "V"}, {Name: "speed", Unit: "rad/s"}, {Name: "gain", Unit: "rad/s/V"}, {Name: "±", Unit: "rad/s/V"}, {Name: "time constant", Unit: "s"}, {Name: "±", Unit: "s"}}
	gain, tau := set.Model.DCGain(), dominant(*set.Model)
	low, high := math.Inf(1), math.Inf(-1)
	worst, worstAt := 0.0, 0.0
	for i, tr := range traces {
		fit := FitSettings{Kind: model.KindFirstOrder, FreeStart: true, Bus: set.Numbers["bus_nominal"]}
		res, err := fit.Identify(tr, nil)
		if err != nil {
			return fmt.Errorf("operating point %d: %w", i+1, err)
		}
		f := res.Models[0]
		k, kSD, _ := f.Value("gain")
		t, tSD, _ := f.Value("tau")
		part := about(tr)
		v, w := mean(part.Voltage), mean(part.Speed)
		for c, x := range []float64{v, w, k, 1.96 * kSD, t, 1.96 * tSD} {
			cols[c].Values = append(cols[c].Values, sheet.Known(x))
		}
		off := math.Abs(k/gain - 1)
		if off-2*kSD/gain < mapGain && math.Abs(t/tau-1)-2*tSD/tau < mapTau {
			low, high = math.Min(low, w), math.Max(high, w)
		}
		if off > worst {
			worst, worstAt = off, w
		}
		quantity(rec, fmt.Sprintf("gain at %s", rpm(w)), "rad/s/V", k, kSD, fmt.Sprintf("first order, steps about %.3g V, %d samples", v, f.Used))
		quantity(rec, fmt.Sprintf("time constant at %s", rpm(w)), "s", t, tSD, "the same")
	}
	rec.Columns = cols
	if low > high {
		doubt(rec, identify.Care, "the model holds at none of the %d operating points", len(traces))
		rec.Finding = "the model holds nowhere that was tried"
		return nil
	}
	quantity(rec, "believed from", "rad/s", low, 0, fmt.Sprintf("slowest operating point with the gain within %.0f %% and the time constant within %.0f %% of the model's", 100*mapGain, 100*mapTau))
	quantity(rec, "believed to", "rad/s", high, 0, "fastest one")
	rec.Finding = fmt.Sprintf("%d operating points: gain at most %.1f %% from the model (at %s); it holds from %s to %s", len(traces), 100*worst, rpm(worstAt), rpm(low), rpm(high))
	if worst > mapGain {
		doubt(rec, identify.Care, "at %s the gain is %.0f %% from the model: gains that are right at the middle are not there", rpm(worstAt), 100*worst)
	}
	return nil
}

// dominant is the sum of the time constants of a model's real poles, which is what
// one lag fitted in its place comes near to.
func dominant(m model.Linear) float64 {
	sum := 0.0
	for _, p := range m.Poles() {
		if real(p) < 0 {
			sum += -real(p) / (real(p)*real(p) + imag(p)*imag(p))
		}
	}
	return sum
}
