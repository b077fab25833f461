package job

import (
	"fmt"
	"math"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// Sizes of the relay runs (our choice). High and low levels are not alike, so that
// the second harmonic of the drive is there as well.
const (
	relayHigh, relayLow = 1.2, 0.8 // of the amplitude of the step test
	relayShift          = 0.5      // of it, between the two middles
	relayHysteresis     = 0.25     // of the swing that the amplitude would bring
	relayCycles         = 24
	relayApart          = 0.4  // of the amplitude, that the drive must be from the middle to count as high or low
	relayEnough         = 8    // cycles at least
	relayWidth          = 0.01 // of the period, half of its 95 % interval
)

// doRelay runs a relay about two middles.
func (j *Job) doRelay() (result, error) {
	k, _ := j.braked(func(k excite.Known) safety.Plan { return excite.Step(k, j.Bias, j.Amplitude, stepRepeats) })
	if k.Dips || k.FallSlope > 0 {
		return "", refuse(771, "relay refused", "the supply takes nothing back and the drive may not fall at once: a relay would not be one",
			"use the steps of different heights, or a supply or brake resistor that takes the energy")
	}
	set := ExperimentSettings{Experiment: StepRelay, Numbers: map[string]float64{"loop_delay": j.loopDelay()}}
	hyst := math.Max(relayHysteresis*j.Amplitude*j.Gain, 3*math.Max(k.Noise, k.SpeedStep))
	var traces []*trace.Trace
	var files []string
	for i, shift := range []float64{-relayShift, relayShift} {
		bias := j.Bias + shift*j.Amplitude
		centre := j.steadySpeed(bias)
		spec := excite.RelaySpec{Bias: bias, High: bias + relayHigh*j.Amplitude, Low: bias - relayLow*j.Amplitude,
			Upper: centre + hyst, Lower: centre - hyst, Cycles: relayCycles}
		plan := excite.Relay(k, spec)
		plan.Name = fmt.Sprintf("relay %d", i+1)
		learner := relayLearner(bias, relayApart*j.Amplitude)
		if plan.HasPattern() {
			learner = patternOver(plan, j.Hz)
			set.Numbers["relay_delay"] = j.loopDelay() // the board sees its window late, as its own loop does
		}
		r, err := j.runLearning(StepRelay, plan, j.capture(plan), learner)
		if err != nil {
			return "", err
		}
		if r.Reason != safety.EndDone {
			return "", j.notDone(r)
		}
		tr, file := j.traceOf(plan.Name, r.Samples), r.File
		if r.Capture != nil && r.Capture.Len() > captureLeast {
			tr, file = r.Capture, r.CaptureFile
		}
		n := fmt.Sprint(i + 1)
		set.Numbers["apart_"+n], set.Numbers["middle_"+n], set.Numbers["upper_"+n], set.Numbers["lower_"+n] = relayApart*j.Amplitude, bias, spec.Upper, spec.Lower
		traces, files = append(traces, tr), append(files, file)
	}
	return j.experiment(set, traces, files)
}

// steadySpeed is the speed that the staircase gives for a drive forward.
func (j *Job) steadySpeed(volts float64) float64 {
	if s := j.Static; s != nil && s.Gain > 0 {
		return s.Gain * (volts - s.CoulombForward)
	}
	return j.Gain * (volts - 0.85*j.StartForward)
}

// loopDelay is what the board's loop adds to the motor's own dead time: half a
// period of its hold, the computation, and half of the speed window.
func (j *Job) loopDelay() float64 {
	return j.ID.Loop.Seconds()/2 + j.ID.ComputeDelay.Seconds() + j.ID.Window().Seconds()/2
}

// patternOver ends a run once the board's pattern is over: the drive has been off its
// middle and is on it again for longer than a cycle could make it look so.
func patternOver(plan safety.Plan, hz int) func(Sample) (string, bool) {
	s := plan.Segments[len(plan.Segments)-1]
	settled, begun, quiet := false, false, 0
	return func(x Sample) (string, bool) {
		off := math.Abs(float64(x.Volts) - s.From)
		if quiet++; off > 0.05*s.Pattern.Amplitude {
			quiet = 0
		}
		settled = settled || quiet > 0
		begun = begun || settled && off > s.Pattern.Amplitude/2
		if !begun {
			return "", false
		}
		return "the board's loop drives: " + s.Pattern.Kind.String(), quiet > max(12, hz/10)
	}
}

// relayLearner counts the cycles and ends the run when their length is known.
func relayLearner(mid, apart float64) func(Sample) (string, bool) {
	var rises, periods []float64
	high := false
	return func(s Sample) (string, bool) {
		v := float64(s.Volts)
		rose := !high && v > mid+apart
		high = high && v > mid-apart || rose
		if !rose || s.State == protocol.Off {
			return "", false
		}
		rises = append(rises, float64(s.BoardUS)*1e-6)
		n := len(rises)
		if n < 4 { // the first two swing in
			return fmt.Sprintf("cycle %d", n), false
		}
		periods = append(periods, rises[n-1]-rises[n-2])
		m := identify.MeanOf(periods, nil)
		half := 1.96 * m.SD
		words := fmt.Sprintf("cycle %d: period %.4g ± %.2g ms; one more: ± %.2g", n, m.Value*1e3, half*1e3, half*1e3*math.Sqrt(float64(m.N)/float64(m.N+1)))
		return words, len(periods) >= relayEnough && half < relayWidth*m.Value
	}
}

// analyseRelay takes gain, poles, dead time and the ultimate point from two relay
// runs. Numbers: middle_1 and middle_2 in V, upper_ and lower_ in rad/s, loop_delay
// in s; relay_delay in s where the board's loop was the relay.
func analyseRelay(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	if len(traces) != 2 {
		return fmt.Errorf("%w: %d relay runs, two are needed", identify.ErrData, len(traces))
	}
	var runs [2]identify.RelayRun
	for i, tr := range traces {
		n := fmt.Sprint(i + 1)
		r, err := identify.FitRelay(tr, set.Numbers["middle_"+n], set.Numbers["apart_"+n], set.Numbers["upper_"+n], set.Numbers["lower_"+n])
		if err != nil {
			return fmt.Errorf("run %d: %w", i+1, err)
		}
		if d, known := set.Numbers["relay_delay"]; known {
			r.Delay = d
		}
		runs[i] = r
	}
	f, err := identify.FitRelays(runs[0], runs[1])
	if err != nil {
		return err
	}
	quantity(rec, "gain", "rad/s/V", f.Gain, f.GainSD, "difference of the mean speeds over that of the mean volts of two runs about different middles, and harmonics")
	quantity(rec, "time constant", "s", f.Tau, f.TauSD, "Y/U at the harmonics of the limit cycle: exact in a periodic state, nothing neglected")
	if f.Order == 2 {
		quantity(rec, "second time constant", "s", f.Tau2, f.Tau2SD, "as the time constant; the data ask for a second pole")
	}
	quantity(rec, "dead time", "s", f.Dead, f.DeadSD, "phase of Y/U at the harmonics; the speed window is taken out")
	for i, r := range runs {
		n := fmt.Sprint(i + 1)
		quantity(rec, "period "+n, "s", r.Period(), r.PeriodSD, fmt.Sprintf("%d cycles, %.4g to %.4g s of the trace; with a delay of %.3g s from threshold to drive", r.Cycles, r.From, r.To, r.Delay))
		quantity(rec, "swing "+n, "rad/s", r.Amplitude, 0, "half of largest less smallest, mean of the cycles")
	}
	m := f.Model()
	if ku, pu, ok := m.Ultimate(set.Numbers["loop_delay"]); ok {
		quantity(rec, "ultimate gain", "V/(rad/s)", ku, 0, "1/|G| where the phase of the model with the delays of the board's loop is −180°")
		quantity(rec, "ultimate period", "s", pu, 0, "of the same point")
		quantity(rec, "4d/(π·a) of the describing function", "V/(rad/s)", runs[0].DescribingKu, 0, "for comparison: at the period of the limit cycle, that delay inside; off by what it neglects")
	}
	quantity(rec, "forecast period over measured", "1", f.Period, 0, "exact equations of the limit cycle, solved for the plant found")
	quantity(rec, "forecast swing over measured", "1", f.Swing, 0, "the same; the speed window rounds the peaks off")
	rec.Finding = fmt.Sprintf("gain %.4g ± %.2g rad/s/V, time constant %.4g ± %.2g ms, dead time %.3g ± %.2g ms", f.Gain, 1.96*f.GainSD, f.Tau*1e3, 1.96*f.TauSD*1e3, f.Dead*1e3, 1.96*f.DeadSD*1e3)
	if !(math.Abs(f.Period-1) < 0.15) {
		doubt(rec, identify.Care, "the limit cycle of the plant found would have %.2f of the period that was measured: it is not what one or two lags with dead time do", f.Period)
	}
	if f.Misfit > 6 {
		doubt(rec, identify.Care, "the harmonics miss one another by %.1f times their scatter", f.Misfit)
	}
	return nil
}
