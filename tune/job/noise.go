package job

import (
	"fmt"
	"math"

	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// StepNoise is analysed from the staircase: no run of its own.
const StepNoise StepID = "noise"

// Bounds of the noise findings (our choice).
const (
	noiseLevels  = 3
	badLineShare = 0.01 // of the lines, at a level
	badLineTimes = 3.0  // more than at rest
)

// noise takes noise and link errors from the levels of a staircase.
func (j *Job) noise(runs []stairRun) error {
	set := ExperimentSettings{Experiment: StepNoise, Numbers: map[string]float64{"speed_step": j.sizing().SpeedStep}}
	var traces []*trace.Trace
	var files []string
	for n, r := range runs {
		if n == 0 {
			set.Numbers["rest_bad"], set.Numbers["rest_lines"] = badLines(beforeDrive(r.Result))
		}
		for i, st := range r.stairs {
			bad, lines := badLines(window(r.Result, st.From-(st.To-st.From), st.To))
			key := fmt.Sprintf("run%d_level%02d_", n+1, i+1)
			set.Numbers[key+"volts"], set.Numbers[key+"bad"], set.Numbers[key+"lines"] = st.Volts, bad, lines
		}
		traces, files = append(traces, j.traceOf("staircase", r.Samples)), append(files, r.File)
	}
	_, err := j.experiment(set, traces, files)
	return err
}

// beforeDrive are the samples of a run before its first drive value.
func beforeDrive(r Result) []Sample {
	for i, s := range r.Samples {
		if s.At >= r.Begun {
			return r.Samples[:i]
		}
	}
	return nil
}

// badLines counts lines that were dropped while the samples came, and all lines.
func badLines(s []Sample) (bad, lines float64) {
	if len(s) < 2 {
		return 0, float64(len(s))
	}
	bad = float64(s[len(s)-1].Bad - s[0].Bad)
	return bad, float64(len(s)) + bad
}

// analyseNoise works out the noise at rest and at three speeds, the lowest honest
// setpoint, and lines lost against the drive. Numbers: speed_step in rad/s as the
// encoder and the window give it; runN_levelNN_volts, _bad and _lines, rest_bad and
// rest_lines as counted.
func analyseNoise(set ExperimentSettings, traces []*trace.Trace, rec *sheet.ExperimentRecord) error {
	if len(traces) == 0 {
		return identify.ErrData
	}
	tr := traces[0]
	first := 0
	for first < tr.Len() && tr.Voltage[first] == 0 {
		first++
	}
	rest := identify.QuietOf(tr.Speed[:first])
	quantity(rec, "noise at rest", "rad/s", rest.RMS, 0, fmt.Sprintf("RMS of the speed about its course, %d samples", rest.N))
	quantity(rec, "peak at rest", "rad/s", rest.Peak, 0, "largest deviation")
	levels := identify.Plateaus(tr, 0.3, 0.02*maxAbs(tr.Voltage))
	var turning []identify.Level
	for _, l := range levels {
		if l.Speed > 0 && l.Volts > 0 {
			turning = append(turning, l)
		}
	}
	step := set.Numbers["speed_step"]
	seen, worst := rest.Step, rest.RMS
	for i := range noiseLevels {
		if len(turning) < noiseLevels {
			break
		}
		l := turning[i*(upto(turning)-1)/(noiseLevels-1)]
		q := identify.QuietOf(between(tr, l.From, l.To))
		quantity(rec, "noise at "+rpm(l.Speed), "rad/s", q.RMS, 0, fmt.Sprintf("RMS about its course, %d samples; largest %.3g rad/s", q.N, q.Peak))
		if q.Step > 0 && (seen == 0 || q.Step < seen) {
			seen = q.Step
		}
		if i == 0 {
			worst = math.Max(worst, q.RMS)
		}
	}
	if step == 0 {
		step = seen
	}
	quantity(rec, "speed step", "rad/s", step, 0, fmt.Sprintf("angle of one count over the speed window; smallest step seen %.4g rad/s", seen))
	low := identify.LowestSetpoint(step, worst)
	quantity(rec, "lowest honest setpoint", "rad/s", low, 0, "where one speed step, and twice the noise, are a tenth of it")
	rec.Finding = fmt.Sprintf("noise %.3g rad/s at rest, speed step %s, lowest honest setpoint %s", rest.RMS, rpm(step), rpm(low))
	linkErrors(set, rec)
	return nil
}

// upto is how many levels there are on the way up: from the slowest to the fastest.
func upto(l []identify.Level) int {
	top := 0
	for i := range l {
		if l[i].Speed > l[top].Speed {
			top = i
		}
	}
	return top + 1
}

func between(tr *trace.Trace, from, to float64) (v []float64) {
	for i, t := range tr.Time {
		if t >= from && t <= to {
			v = append(v, tr.Speed[i])
		}
	}
	return v
}

func maxAbs(v []float64) (m float64) {
	for _, x := range v {
		m = math.Max(m, math.Abs(x))
	}
	return m
}

// linkErrors sets lost lines against the drive.
func linkErrors(set ExperimentSettings, rec *sheet.ExperimentRecord) {
	share := func(bad, lines float64) float64 { return bad / math.Max(lines, 1) }
	rest := share(set.Numbers["rest_bad"], set.Numbers["rest_lines"])
	cols := []sheet.Series{{Name: "drive", Unit: "V"}, {Name: "lines lost", Unit: "1"}, {Name: "of", Unit: "1"}}
	add := func(v ...float64) {
		for i := range cols {
			cols[i].Values = append(cols[i].Values, sheet.Known(v[i]))
		}
	}
	add(0, set.Numbers["rest_bad"], set.Numbers["rest_lines"])
	worst, at := rest, 0.0
	for run := 1; run <= 2; run++ {
		for level := 1; level <= 99; level++ {
			key := fmt.Sprintf("run%d_level%02d_", run, level)
			lines, ok := set.Numbers[key+"lines"]
			if !ok {
				break
			}
			add(set.Numbers[key+"volts"], set.Numbers[key+"bad"], lines)
			if s := share(set.Numbers[key+"bad"], lines); s > worst {
				worst, at = s, set.Numbers[key+"volts"]
			}
		}
	}
	rec.Columns = append(rec.Columns, cols...)
	quantity(rec, "lines lost, worst level", "%", 100*worst, 0, fmt.Sprintf("dropped lines over all lines of a level of the staircase, at %.3g V; at rest %.3g %%", at, 100*rest))
	if worst > badLineShare && worst > badLineTimes*rest {
		doubt(rec, identify.Care, "%.1f %% of the lines are lost at %.3g V, %.1f %% at rest: the drive disturbs the line; look at cable routing, screens and grounds", 100*worst, at, 100*rest)
	}
}
