package job

import (
	"fmt"
	"math"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/trace"
)

// What the step test is for is the time constant; the width asked for is half of a
// 95 % interval as a share of it, and stepMost bounds what is spent on it (our
// choice).
const (
	stepWidth = 0.05
	stepMost  = 12 // repeats
)

// stepLearner follows the ± of the time constant while steps run. One repeat is up
// and down once.
type stepLearner struct {
	run     *identify.Running
	bias    float64
	apart   float64
	high    bool
	began   uint64
	repeats int
	planned int
	factor  float64 // of the running width, for what the fit will say; 0: only shown
	tau     float64
}

func (j *Job) stepLearner(planned int, factor float64) *stepLearner {
	return &stepLearner{run: identify.NewRunning(j.Gain, j.Tau, 0), bias: j.Bias, apart: 0.4 * j.Amplitude, planned: planned, factor: factor, tau: j.Tau}
}

// sample is told of every sample of the run.
func (l *stepLearner) sample(s Sample) (string, bool) {
	v := float64(s.Volts)
	if s.State == protocol.Off || v == 0 && l.repeats == 0 {
		return "", false
	}
	if l.began == 0 {
		l.began = s.BoardUS
	}
	l.run.Add(float64(s.BoardUS-l.began)*1e-6, v, float64(s.Speed))
	switch {
	case !l.high && v > l.bias+l.apart:
		l.high = true
	case l.high && v < l.bias-l.apart:
		l.high = false
		l.repeats++
		return "", false
	default:
		return "", false
	}
	// At the beginning of a repeat the one before is whole.
	w, ok := l.width()
	if !ok || l.repeats == 0 {
		return "", false
	}
	n := float64(l.repeats)
	words := fmt.Sprintf("repeat %d of %d: time constant %.3g ms ± %.2g %%; one more: ± %.2g %%", l.repeats, l.planned, l.tau*1e3, 100*w, 100*w*math.Sqrt(n/(n+1)))
	return words, l.factor > 0 && l.repeats >= stepRepeats && w <= stepWidth
}

// width is half of the 95 % interval of the time constant as a share of it.
func (l *stepLearner) width() (float64, bool) {
	_, w, ok := l.run.Widths()
	if l.factor > 0 {
		w *= l.factor
	}
	return 1.96 * w, ok
}

// stepMore repeats the step test with as many steps as the width asked for needs,
// where three leave it too wide. The run ends by itself as soon as it is reached.
func (j *Job) stepMore(first *stepLearner, made int) error {
	width, ok := j.tauWidth(j.StepTrace)
	if !ok || width <= stepWidth {
		return nil
	}
	n := min(stepMost, int(math.Ceil(1.3*float64(made)*sq(width/stepWidth))))
	of := func(k excite.Known) safety.Plan { return excite.Step(k, j.Bias, j.Amplitude, n) }
	_, plan := j.braked(of)
	for plan.Duration() > j.Env.RunTimeMax && n > made {
		n--
		_, plan = j.braked(of)
	}
	if n <= made {
		return nil
	}
	factor := 1.0
	if w, ok := first.width(); ok && w > 0 {
		factor = math.Max(1, width/w)
	}
	j.h.Say("step test: time constant ± %.1f %% after %d repeats, ± %.0f %% is asked for: once more with up to %d", 100*width, made, 100*stepWidth, n)
	plan.Name = "step test, more"
	r, err := j.runLearning(StepStep, plan, j.capture(plan), j.stepLearner(n, factor).sample)
	if err != nil {
		return err
	}
	if r.Reason != safety.EndDone {
		return j.notDone(r)
	}
	j.StepTrace, j.StepFile = j.traceOf(plan.Name, r.Samples), r.File
	if r.Capture != nil && r.Capture.Len() > captureLeast {
		j.StepTrace, j.StepFile = r.Capture, r.CaptureFile
	}
	return nil
}

// tauWidth is half of the 95 % interval of the slowest time constant, as a share of
// it, by a fit of that record alone.
func (j *Job) tauWidth(tr *trace.Trace) (float64, bool) {
	set := fitDefaults
	if !j.Rig.Drive.SupplySinks {
		set.Bus = j.Rig.Drive.BusNominal
	}
	set.Edges = coarse(tr, j.Tau)
	res, err := set.Identify(tr, nil)
	if err != nil {
		return 0, false
	}
	f := res.Best()
	if f == nil {
		f = &res.Models[0]
	}
	for _, name := range []string{"tau", "natural_frequency"} {
		if v, sd, ok := f.Value(name); ok && v > 0 && !math.IsNaN(sd) {
			return 1.96 * sd / v, true
		}
	}
	return 0, false
}
