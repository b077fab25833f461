package job

import (
	"fmt"
	"math"
	"math/cmplx"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// Sizes of the multisine (our choice).
const (
	sinePeriodTaus = 14.0 // length of a period, in time constants
	sinePeriodMin  = 1.0  // s
	sinePeriods    = 6    // the first swings in
	sinePeriodsMin = 3
	sineHighTaus   = 14.0 // highest frequency, times the time constant, in rad
	sineEarly      = 0.1  // of a period
	coherentLeast  = 0.8
	piecesLeast    = 6.0
	shareOfClock   = 0.4 // of the rate at which the drive changes: above it there is little of it
)

// doFrequency measures the frequency response with a sum of sines, where the drive
// may fall at once, and from the second test's record.
func (j *Job) doFrequency() (result, error) {
	best := j.Fit.Best()
	set := ExperimentSettings{Experiment: StepFrequency, Numbers: map[string]float64{"tau": j.Tau}, Model: &best.Model}
	var traces []*trace.Trace
	var files []string
	k, _ := j.braked(func(k excite.Known) safety.Plan { return excite.Step(k, j.Bias, j.Amplitude, stepRepeats) })
	if !k.Dips && k.FallSlope == 0 {
		clock := excite.SineClock.Seconds()
		n := int(math.Ceil(math.Max(sinePeriodMin, sinePeriodTaus*j.Tau) / clock))
		period := float64(n) * clock
		highest := int(math.Min(sineHighTaus/j.Tau*period/(2*math.Pi), float64(n)/5))
		room := 0.7*j.Env.RunTimeMax.Seconds() - 10*j.Tau
		periods := max(sinePeriodsMin, min(sinePeriods, int(room/period)))
		plan, lead := excite.Multisine(k, j.Bias, j.Amplitude, highest, n, periods)
		tr, file, _, err := j.recordLearning(StepFrequency, plan, nil, j.sineLearner(period, periods))
		if err != nil {
			return "", err
		}
		set.Numbers["period"], set.Numbers["periods"], set.Numbers["highest"], set.Numbers["lead"] = period, float64(periods), float64(highest), lead.Seconds()
		traces, files = append(traces, tr), append(files, file)
	}
	if j.SecondTrace != nil {
		traces, files = append(traces, j.SecondTrace), append(files, j.SecondFile)
	}
	if len(traces) == 0 {
		return "", refuse(772, "frequency response", "the supply takes nothing back, and there is no record of the second test", "do the second test first")
	}
	return j.experiment(set, traces, files)
}

// analyseFrequency makes the response from periods of sines (Numbers: period in s,
// periods, highest line, lead in s; tau in s), or from the last trace by pieces
// where there are none, and lays it over the model.
func analyseFrequency(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	if len(traces) == 0 || set.Model == nil {
		return fmt.Errorf("%w: no trace or no model", identify.ErrData)
	}
	var points []identify.FreqPoint
	if set.Numbers["period"] > 0 {
		points = sinePoints(set, traces[0])
		addResponse(rec, "sines", points, set)
	}
	if set.Numbers["period"] == 0 || len(traces) > 1 {
		tau := set.Numbers["tau"]
		part := about(traces[len(traces)-1])
		length := math.Min(part.Duration()/piecesLeast, math.Max(12*tau, 0.25))
		low := 4 * math.Pi / length
		top := math.Max(2*low, math.Min(8/tau, 2*math.Pi*shareOfClock/excite.SineClock.Seconds()))
		var omega []float64
		for i := range 10 {
			omega = append(omega, low*math.Pow(top/low, float64(i)/9))
		}
		other := identify.Local(part, part.Time[0], part.Time[part.Len()-1], omega)
		addResponse(rec, "second test", other, set)
		if points == nil {
			points = other
		}
	}
	var good []identify.FreqPoint
	for _, q := range points {
		if q.Coherence > coherentLeast {
			good = append(good, q)
		}
	}
	if len(good) < 4 {
		doubt(rec, identify.Refused, "%d of %d frequencies have a coherence over %.1f: noise or something nonlinear covers the rest", len(good), len(points), coherentLeast)
		rec.Finding = "no frequency response"
		return nil
	}
	return judgeResponse(set, good, len(points), rec)
}

// sinePoints is the response at the lines, over all whole periods but the first.
func sinePoints(set ExperimentSettings, tr *trace.Trace) []identify.FreqPoint {
	period := set.Numbers["period"]
	begin := 0.0
	for i, v := range tr.Voltage {
		if v != 0 {
			begin = tr.Time[i]
			break
		}
	}
	var starts, ends, omega []float64
	for p := 1; p < int(set.Numbers["periods"]); p++ {
		// A little early: in a periodic state any beginning is as good, and the last
		// period keeps clear of the end.
		a := begin + set.Numbers["lead"] + (float64(p)-sineEarly)*period
		if a+period <= tr.Time[tr.Len()-1] {
			starts, ends = append(starts, a), append(ends, a+period)
		}
	}
	for _, l := range excite.SineLines(int(set.Numbers["highest"])) {
		omega = append(omega, 2*math.Pi*float64(l)/period)
	}
	return identify.Periods(tr, starts, ends, omega)
}

// addResponse adds a response as columns, with the model beside it.
func addResponse(rec *sheet.ExperimentRecord, name string, points []identify.FreqPoint, set ExperimentSettings) {
	cols := []sheet.Series{{Name: name + ": frequency", Unit: "Hz"}, {Name: "gain", Unit: "rad/s/V"}, {Name: "phase", Unit: "deg"}, {Name: "coherence", Unit: "1"},
		{Name: "model gain", Unit: "rad/s/V"}, {Name: "model phase", Unit: "deg"}}
	last, lastModel := 0.0, 0.0
	for _, q := range points {
		m := set.Model.At(q.Omega)
		last, lastModel = unwrapped(q.G, last), unwrapped(m, lastModel)
		for i, v := range []float64{q.Omega / (2 * math.Pi), cmplx.Abs(q.G), last, q.Coherence, cmplx.Abs(m), lastModel} {
			cols[i].Values = append(cols[i].Values, sheet.Known(v))
		}
	}
	rec.Columns = append(rec.Columns, cols...)
}

// unwrapped is the phase of g in degrees, next to the one before.
func unwrapped(g complex128, before float64) float64 {
	p := cmplx.Phase(g) * 180 / math.Pi
	return p - 360*math.Round((p-before)/360)
}

// judgeResponse fits gain, time constant and dead time to the response, and says
// how far the model is from it.
func judgeResponse(set ExperimentSettings, points []identify.FreqPoint, all int, rec *sheet.ExperimentRecord) error {
	order := 1
	if set.Model.Order() > 1 {
		order = 2
	}
	f, err := identify.FitFrequency(points, order)
	if err != nil {
		return err
	}
	const why = "weighted least squares of K·e^(−Ls)/(1+Ts)… on the complex response, ± from the scatter of the periods or pieces"
	quantity(rec, "gain", "rad/s/V", f.Gain, f.GainSD, why)
	quantity(rec, "time constant", "s", f.Tau, f.TauSD, why)
	if order == 2 {
		quantity(rec, "second time constant", "s", f.Tau2, f.Tau2SD, why)
	}
	quantity(rec, "dead time", "s", f.Dead, f.DeadSD, why)
	worst, at := 0.0, 0.0
	for _, q := range points {
		m := set.Model.At(q.Omega)
		if d := (cmplx.Abs(q.G-m) - 2*q.SD) / cmplx.Abs(m); d > worst {
			worst, at = d, q.Omega
		}
	}
	quantity(rec, "farthest from the model", "%", 100*worst, 0, fmt.Sprintf("|G − model|/|model| less two standard deviations, the worst of %d frequencies, at %.3g Hz", len(points), at/(2*math.Pi)))
	for i, p := range identify.Peaks(points, *set.Model) {
		quantity(rec, fmt.Sprintf("peak %d", i+1), "Hz", p.Omega/(2*math.Pi), 0, fmt.Sprintf("|G| is %.2f of the model's there", p.Ratio))
		doubt(rec, identify.Care, "a peak at %.3g Hz, %.2f of the model: a resonance that the model does not have", p.Omega/(2*math.Pi), p.Ratio)
	}
	if worst > 0.15 {
		doubt(rec, identify.Care, "the model is off by %.0f %% at %.3g Hz", 100*worst, at/(2*math.Pi))
	}
	rec.Finding = fmt.Sprintf("%d of %d frequencies from %.3g to %.3g Hz, at most %.1f %% from the model; gain %.4g ± %.2g rad/s/V, time constant %.4g ± %.2g ms", len(points), all,
		points[0].Omega/(2*math.Pi), points[len(points)-1].Omega/(2*math.Pi), 100*worst, f.Gain, 1.96*f.GainSD, f.Tau*1e3, 1.96*f.TauSD*1e3)
	return nil
}
