package job

import (
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// Bounds of the clock and the zeros (our choice).
const (
	timingFor    = 1200 * time.Millisecond
	timingSlowHz = 25
	stampStep    = 1e-6 // s, of the board's time stamps
	jitterCare   = 0.05 // of the loop period
	clockCare    = 0.01
	zeroCare     = 0.03 // of the full range: current limit, nominal bus
)

// doTiming listens at rest, with quick and with slow telemetry: loop period and
// jitter on the board's own clock, and what the sensors read with the output off.
func (j *Job) doTiming() (result, error) {
	set := ExperimentSettings{Experiment: StepTiming, Numbers: map[string]float64{"loop": j.ID.Loop.Seconds(), "bus_nominal": j.Rig.Drive.BusNominal, "current_max": float64(j.Env.CurrentMax)}}
	if j.ID.BusMeasured && j.ID.Scales.BusLSB > 0 {
		meter, err := j.askNumber("Bus voltage by meter; enter takes the rig file's, 0 where there is no meter", "V", j.Rig.Drive.BusNominal, 0, 400)
		if err != nil {
			return "", err
		}
		set.Numbers["bus_meter"] = meter
	}
	var traces []*trace.Trace
	var files []string
	listen := func(name string) error {
		s, err := j.h.Watch(timingFor)
		if err != nil {
			return err
		}
		samples := make([]Sample, len(s))
		for i := range s {
			samples[i] = Sample{Sample: s[i]}
		}
		tr := j.traceOf(name, samples)
		if tr.Len() < 2 {
			return refuse(773, "clock and zeros", "too few samples came", "look at the line")
		}
		file, err := j.h.KeepTrace(name, tr)
		traces, files = append(traces, tr), append(files, file)
		return err
	}
	if err := listen("rest-quick"); err != nil {
		return "", err
	}
	if j.Hz > timingSlowHz {
		if _, err := j.h.Request(protocol.VerbRate, fmt.Sprintf("%d x tu", timingSlowHz)); err != nil {
			return "", err
		}
		err := listen("rest-slow")
		if _, back := j.h.Request(protocol.VerbRate, fmt.Sprintf("%d x tu", j.Hz)); back != nil {
			return "", back
		}
		if err != nil {
			return "", err
		}
	}
	return j.experiment(set, traces, files)
}

// analyseTiming works out clock and zeros. Numbers: loop in s as declared,
// bus_nominal and bus_meter in V (0: no meter), current_max in A.
func analyseTiming(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	loop := set.Numbers["loop"]
	for i, tr := range traces {
		name := []string{"quick telemetry", "slow telemetry"}[min(i, 1)]
		c, err := identify.ClockOf(tr, loop)
		if err != nil {
			return fmt.Errorf("%w: %d samples of %s", err, tr.Len(), name)
		}
		why := fmt.Sprintf("straight line through %d time stamps of the board, one every %d loop periods", c.N, c.Loops)
		quantity(rec, "loop period, "+name, "s", c.Loop, c.LoopSD, why)
		quantity(rec, "jitter, "+name, "s", c.Jitter, 0, "RMS of the stamps about that line; largest "+fmt.Sprintf("%.3g µs", c.JitterPeak*1e6))
		if d := c.Loop/loop - 1; math.Abs(d) > clockCare {
			doubt(rec, identify.Care, "%s: the loop period is %.4g ms on the board's own clock, it declares %.4g ms: every gain with a time in it is off by as much", name, c.Loop*1e3, loop*1e3)
		}
		if c.Jitter > jitterCare*loop {
			doubt(rec, identify.Care, "%s: the loop jitters by %.3g µs RMS, %.1f %% of its period", name, c.Jitter*1e6, 100*c.Jitter/loop)
		}
		if rec.Finding == "" {
			rec.Finding = fmt.Sprintf("loop period %.5g ms, jitter %.2g µs", c.Loop*1e3, c.Jitter*1e6)
			if c.Jitter < stampStep/2 {
				rec.Finding = fmt.Sprintf("loop period %.5g ms, jitter below the 1 µs of the stamps", c.Loop*1e3)
			}
		}
	}
	zeros(set, traces[0], rec)
	return nil
}

// zeros judges what the sensors read with the output off and the shaft at rest.
func zeros(set ExperimentSettings, tr *trace.Trace, rec *sheet.ExperimentRecord) {
	const why = "mean with the output off and the shaft at rest"
	v := identify.QuietOf(tr.Voltage)
	quantity(rec, "volts at rest", "V", v.Mean, v.RMS/math.Sqrt(float64(v.N)), why)
	if full := set.Numbers["bus_nominal"]; full > 0 && math.Abs(v.Mean) > zeroCare*full {
		doubt(rec, identify.Care, "the board says %.3g V with its output off", v.Mean)
	}
	speed := identify.QuietOf(tr.Speed)
	quantity(rec, "speed noise at rest", "rad/s", speed.RMS, 0, "RMS about its mean")
	if tr.Current != nil {
		c := identify.QuietOf(tr.Current)
		quantity(rec, "current at rest", "A", c.Mean, c.RMS/math.Sqrt(float64(c.N)), why)
		quantity(rec, "current noise", "A", c.RMS, 0, "RMS about its mean")
		if full := set.Numbers["current_max"]; full > 0 && math.Abs(c.Mean) > zeroCare*full {
			doubt(rec, identify.Care, "the current sensor reads %.3g A at no current: every torque is off by as much, R and Ke from slopes are not", c.Mean)
		}
		rec.Finding += fmt.Sprintf("; current reads %.3g A at rest", c.Mean)
	}
	if tr.Bus != nil {
		b := identify.QuietOf(tr.Bus)
		quantity(rec, "bus at rest", "V", b.Mean, b.RMS/math.Sqrt(float64(b.N)), why)
		if m := set.Numbers["bus_meter"]; m > 0 {
			quantity(rec, "bus reading over the meter", "1", b.Mean/m, 0, fmt.Sprintf("one known point: %.4g V by meter, or the rig file's where none was read", m))
			if math.Abs(b.Mean/m-1) > zeroCare {
				doubt(rec, identify.Care, "the bus reads %.4g V, the meter (or the rig file) says %.4g V: a duty worked out from it is off by %.1f %%", b.Mean, m, 100*(b.Mean/m-1))
			}
		}
		rec.Finding += fmt.Sprintf("; bus reads %.4g V", b.Mean)
	}
}
