package job

import (
	"fmt"
	"math"
	"time"

	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/trace"
)

// operating chooses the middle and the size of the small-signal tests: 40 % of
// the reachable speed, steps of 30 % of that, never so low that friction or the
// dead band decide (common practice, no source).
func (j *Job) operating() (bias, amplitude float64) {
	k := j.sizing()
	coulomb := 0.85 * k.StartForward
	if j.Static != nil && j.Static.CoulombForward > 0 {
		coulomb = j.Static.CoulombForward
	}
	top := math.Min(float64(j.Env.VoltsMax)*0.9, coulomb+0.8*float64(j.Env.SpeedMax)/j.Gain)
	free := top - coulomb
	bias = coulomb + 0.42*free
	amplitude = 0.14 * free
	// The swing should be at least 25 steps of the reported speed, if there is room.
	if need := 25 * k.SpeedStep / (2 * j.Gain); amplitude < need {
		amplitude = math.Min(need, 0.3*free)
	}
	return bias, amplitude
}

// slowShare is the percentage of the longest run that steps with slow ways down
// may take.
const slowShare = 40

// stepRepeats is how many steps each way the step test makes.
const stepRepeats = 3

// doStep records small steps about the middle, at loop rate where the board can.
func (j *Job) doStep() (result, error) {
	j.Bias, j.Amplitude = j.operating()
	n := stepRepeats
	k, plan := j.braked(func(k excite.Known) safety.Plan { return excite.Step(k, j.Bias, j.Amplitude, n) })
	if k.FallSlope > 0 {
		// The ways down are slow: as large as the time for a run allows.
		for plan.Duration() > slowShare*j.Env.RunTimeMax/100 && j.Amplitude > 8*k.SpeedStep/j.Gain {
			j.Amplitude *= 0.8
			plan = excite.Step(k, j.Bias, j.Amplitude, n)
		}
		if plan.Duration() > j.Env.RunTimeMax {
			n = 1
			plan = excite.Step(k, j.Bias, j.Amplitude, n)
		}
	}
	for range 8 { // the largest size that fits
		if _, _, err := j.forecast(plan); err == nil && !j.tight(plan) {
			break
		}
		j.Amplitude *= 0.8
		k, plan = j.braked(func(k excite.Known) safety.Plan { return excite.Step(k, j.Bias, j.Amplitude, stepRepeats) })
	}
	resized := func(size float64) safety.Plan {
		if size == 1 {
			return plan
		}
		_, p := j.braked(func(k excite.Known) safety.Plan { return excite.Step(k, j.Bias, size*j.Amplitude, n) })
		return p
	}
	learner := j.stepLearner(n, 0)
	tr, file, size, err := j.recordLearning(StepStep, plan, resized, learner.sample)
	if err != nil {
		return "", err
	}
	j.Amplitude *= size
	j.StepTrace, j.StepFile = tr, file
	if err := j.stepMore(learner, n); err != nil {
		return "", err
	}
	tr = j.StepTrace
	return result(fmt.Sprintf("%d samples, steps of ±%.3g V about %.3g V", tr.Len(), j.Amplitude, j.Bias)), nil
}

// doSecond records a pseudo-random sequence about the same middle.
func (j *Job) doSecond() (result, error) {
	clock := time.Duration(math.Ceil(math.Max(0.02, 0.35*j.Tau)*200)) * 5 * time.Millisecond
	longest := min(time.Duration(math.Max(4, 45*j.Tau)*float64(time.Second)), j.Env.RunTimeMax-8*time.Second)
	bits := j.prbsBits(clock)
	k, plan := j.braked(func(k excite.Known) safety.Plan {
		return excite.PRBS(k, j.Bias, j.Amplitude, clock, bits, j.opt.Seed, longest)
	})
	words := fmt.Sprintf("pseudo-random ±%.3g V, one bit %s, seed %#x", j.Amplitude, milliseconds(clock), j.opt.Seed)
	if k.FallSlope > 0 || k.Dips {
		_, plan = j.braked(func(k excite.Known) safety.Plan { return excite.Heights(k, j.Bias, j.Amplitude, heights, j.opt.Seed) })
		words = fmt.Sprintf("steps of different heights up to ±%.3g V, seed %#x", j.Amplitude, j.opt.Seed)
	}
	resized := func(size float64) safety.Plan {
		if size == 1 {
			return plan
		}
		if k.FallSlope > 0 || k.Dips {
			_, p := j.braked(func(k excite.Known) safety.Plan {
				return excite.Heights(k, j.Bias, size*j.Amplitude, heights, j.opt.Seed)
			})
			return p
		}
		_, p := j.braked(func(k excite.Known) safety.Plan {
			return excite.PRBS(k, j.Bias, size*j.Amplitude, clock, bits, j.opt.Seed, longest)
		})
		return p
	}
	tr, file, size, err := j.recordLearning(StepSecond, plan, resized, j.secondLearner(plan, k))
	if err != nil {
		return "", err
	}
	if size != 1 {
		words += fmt.Sprintf(", at %.0f %% of that size", 100*size)
	}
	j.SecondTrace, j.SecondFile = tr, file
	return result(fmt.Sprintf("%d samples, %s", tr.Len(), words)), nil
}

// heights is how many steps the second test makes where the drive may not fall
// at once.
const heights = 5

// prbsBits is the longest register whose sequence the board's memory holds at
// ten samples a time constant.
func (j *Job) prbsBits(clock time.Duration) int {
	for _, n := range []int{7, 6} {
		seconds := float64(int(1)<<n) * clock.Seconds()
		if !j.ID.Can("capture") || float64(j.ID.CaptureN)*j.Tau/10 > seconds || float64(j.ID.CaptureN)*j.ID.Loop.Seconds() > seconds {
			return n
		}
	}
	return 5
}

// captureLeast is how many samples a capture has to have to be worth more than
// telemetry.
const captureLeast = 100

// record runs a plan and returns the best trace of it, cut to the part where it
// drove about its middle.
// sized makes it in another size; the size that it was run at is returned.
func (j *Job) record(step StepID, plan safety.Plan, sized func(float64) safety.Plan) (tr *trace.Trace, file string, size float64, err error) {
	return j.recordLearning(step, plan, sized, nil)
}

// recordLearning is record with something that is told of every sample.
func (j *Job) recordLearning(step StepID, plan safety.Plan, sized func(float64) safety.Plan, learn func(Sample) (string, bool)) (tr *trace.Trace, file string, size float64, err error) {
	r, size, err := j.runSized(step, sized, Run{Plan: plan, Capture: j.capture(plan), Learn: learn})
	if err != nil {
		return nil, "", size, err
	}
	if r.Reason != safety.EndDone {
		return nil, "", size, j.notDone(r)
	}
	if r.Capture != nil && r.Capture.Len() > captureLeast {
		return r.Capture, r.CaptureFile, size, nil
	}
	return j.traceOf(plan.Name, r.Samples), r.File, size, nil
}

// capture asks for board memory at loop rate, thinned so that the plan fits. A
// capture that would be slower than telemetry is not asked for.
func (j *Job) capture(plan safety.Plan) *Capture {
	if !j.ID.Can("capture") || j.ID.CaptureN < 100 {
		return nil
	}
	loops := plan.Duration().Seconds() / j.ID.Loop.Seconds()
	before := j.ID.CaptureN / 50
	dec := int(math.Ceil(loops / float64(j.ID.CaptureN-before)))
	if j.Hz > 0 && float64(dec)*j.ID.Loop.Seconds() > 0.9/float64(j.Hz) {
		return nil
	}
	return &Capture{Decimation: dec, Before: before, Count: j.ID.CaptureN}
}
