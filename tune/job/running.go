package job

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// run has a plan forecast, shown, armed, run and recorded.
func (j *Job) run(step StepID, plan safety.Plan, capture *Capture) (Result, error) {
	return j.runAs(step, Run{Plan: plan, Capture: capture})
}

// runWith is run with inputs that somebody works in motion.
func (j *Job) runWith(step StepID, plan safety.Plan, capture *Capture, provoke []InputBit) (Result, error) {
	return j.runAs(step, Run{Plan: plan, Capture: capture, Provoke: provoke})
}

// runLearning is run with something that is told of every sample.
func (j *Job) runLearning(step StepID, plan safety.Plan, capture *Capture, learn func(Sample) (string, bool)) (Result, error) {
	return j.runAs(step, Run{Plan: plan, Capture: capture, Learn: learn})
}

// runSized is run with a plan that a person may make smaller or larger before the
// arm. size is what it was run at.
func (j *Job) runSized(step StepID, sized func(size float64) safety.Plan, run Run) (r Result, size float64, err error) {
	run.Sized = sized
	r, err = j.runAs(step, run)
	return r, r.Size, err
}

// Sizes of a plan, as shares of what is proposed (our choice).
const (
	sizeStep  = 0.1
	sizeLeast = 0.3
	sizeMost  = 1.5
)

// prepared is a run in one size with its forecast.
func (j *Job) prepared(run Run, size float64) (Run, []sheet.Quantity, error) {
	if run.Sized != nil {
		run.Plan = run.Sized(size)
	}
	notes := run.View.Notes
	view, quantities, err := j.forecast(run.Plan)
	if err != nil {
		return run, nil, err
	}
	if _, err := j.Env.Admit(run.Plan); err != nil {
		return run, nil, j.admitError(run.Plan.Name, err)
	}
	view.Size, view.Resize, view.Notes = size, run.Sized != nil, notes
	run.View, run.Band = view, j.band(run.Plan, view.Expect, view.Band)
	return run, quantities, nil
}

// fitting is the run in the largest size that its forecast and the envelope allow,
// at most as proposed.
func (j *Job) fitting(step StepID, run Run) (Run, []sheet.Quantity, error) {
	wanted := 1.0
	if run.Sized != nil {
		wanted = j.sizeOf(step)
	}
	out, q, first := j.prepared(run, wanted)
	if first == nil || run.Sized == nil {
		return out, q, first
	}
	for size := wanted - sizeStep; size >= sizeLeast-1e-9; size -= sizeStep {
		if out, q, err := j.prepared(run, size); err == nil {
			out.View.Notes = append(out.View.Notes, fmt.Sprintf("made smaller: %.0f %% is the largest size that fits; at %.0f %% %v", 100*size, 100*wanted, first))
			return out, q, nil
		}
	}
	return run, nil, first
}

// runAs adds forecast, band and notes to a run and has it done.
func (j *Job) runAs(step StepID, asked Run) (Result, error) {
	run, quantities, err := j.fitting(step, asked)
	if err != nil {
		return Result{}, err
	}
	notes, grave, err := j.before()
	if err != nil {
		return Result{}, err
	}
	noted := func(v *PlanView) { v.Notes, v.Grave = slices.Concat(notes[:grave], v.Notes, notes[grave:]), grave }
	noted(&run.View)
	if run.Sized != nil {
		run.Resize = func(by int) (Run, error) {
			size := math.Round(10*(run.View.Size+sizeStep*float64(by))) / 10
			if size < sizeLeast-1e-9 || size > sizeMost+1e-9 {
				return run, refuse(728, run.Plan.Name, fmt.Sprintf("sizes go from %.0f to %.0f %%", 100*sizeLeast, 100*sizeMost), "leave it as it is, or change the envelope in the rig file")
			}
			next, q, err := j.prepared(run, size)
			if err == nil {
				noted(&next.View)
				run, quantities = next, q
			}
			return run, err
		}
	}
	r, err := j.h.Run(run)
	plan := run.Plan
	r.Size = run.View.Size
	if err != nil {
		return r, j.admitError(plan.Name, err)
	}
	tr := j.traceOf(plan.Name, r.Samples)
	file := ""
	rec := sheet.RunRecord{Name: plan.Name, Purpose: plan.Purpose, Step: string(step), Forecast: quantities, Limits: envelopeQuantities(j.Env),
		BoardLimits: j.Limits, Seed: uint64(j.opt.Seed), Versions: map[string]string{"program": j.opt.Version, "firmware": j.ID.Firmware},
		Operator: j.opt.Operator, AmbientDegC: j.Ambient, LoadState: j.Rig.Load.State, Complete: r.Reason == safety.EndDone}
	if rec.Plan, err = rawJSON(plan); err != nil {
		return r, err
	}
	rec.Reason = r.Reason.String()
	if r.Cause.Words != "" {
		rec.Reason += ": " + r.Cause.Words
	}
	for _, m := range r.Marks {
		rec.Marks = append(rec.Marks, sheet.Mark{TimeS: m})
	}
	if tr.Len() > 1 {
		if file, err = j.h.KeepTrace(plan.Name, tr); err != nil {
			return r, err
		}
	}
	rec.TraceFile = file
	rec.Extremes = extremes(tr)
	if err := j.h.Keep("run", plan.Name, rec); err != nil {
		return r, err
	}
	r.File = file
	if r.Capture != nil && r.Capture.Len() > captureLeast {
		if r.CaptureFile, err = j.h.KeepTrace(plan.Name+"-capture", r.Capture); err != nil {
			return r, err
		}
	}
	return r, j.whyStopped(plan, r)
}

// admitError turns a plan that the envelope does not allow into a refusal.
func (j *Job) admitError(name string, err error) error {
	var l *safety.LimitError
	if errors.As(err, &l) {
		if errors.Is(err, safety.ErrRefused) && l.Remedy != "" {
			return refuse(720, name+" refused", l.What, l.Remedy)
		}
		return refuse(720, name+" refused", err.Error(), "make the run smaller, or change the limit in the rig file with a reason")
	}
	return err
}

// notDone is the refusal for a run that did not come to its end.
func (j *Job) notDone(r Result) error {
	remedy := r.Cause.Do
	if remedy == "" {
		remedy = "do it again when you are ready"
	}
	words := r.Cause.Words
	if words == "" {
		words = "it was " + r.Reason.String()
	}
	if r.BoardStop != nil && r.BoardStop.Cause.Trip() {
		words += " (the board: " + r.BoardStop.Cause.String() + ")"
	}
	number := int(r.Cause.Code)
	if r.BoardStop != nil && r.BoardStop.Cause == protocol.CauseBusLow {
		number = int(safety.CodeBusLow)
		words, remedy = "the supply folds back: "+words, "raise its current limit, or make the run smaller"
	}
	// A board that hears nothing cannot be asked for its log either.
	if r.BoardStop != nil && r.BoardStop.Cause == protocol.CauseBeat || strings.Contains(r.Cause.Words, protocol.CauseBeat.String()) {
		number = 763
		words, remedy = "the board hears nothing from this end: "+words, "look at the line to the board: cable, adapter, baud rate"
	}
	if number == 0 {
		number = 721
	}
	return refuse(number, r.Name+" did not finish", words, remedy)
}

// traceOf makes a trace of telemetry, time from its first sample.
func (j *Job) traceOf(name string, s []Sample) *trace.Trace {
	tr := &trace.Trace{Name: name, Window: j.ID.Window().Seconds(), RadPerCount: j.ID.RadPerCount()}
	if len(s) == 0 {
		return tr
	}
	t0 := s[0].BoardUS
	cur, bus := j.ID.Scales.CurrentLSB > 0, j.ID.Scales.BusLSB > 0 && j.ID.BusMeasured
	last := math.Inf(-1)
	for i := range s {
		t := float64(s[i].BoardUS-t0) * 1e-6
		if t <= last || s[i].Has&protocol.HasCounts == 0 {
			continue
		}
		last = t
		tr.Time = append(tr.Time, t)
		tr.Voltage = append(tr.Voltage, float64(s[i].Volts))
		tr.Speed = append(tr.Speed, float64(s[i].Speed))
		tr.Counts = append(tr.Counts, float64(s[i].Counts-s[0].Counts))
		tr.Setpoint = append(tr.Setpoint, float64(s[i].Setpoint))
		if cur {
			tr.Current = append(tr.Current, float64(s[i].Current))
		}
		if bus {
			tr.Bus = append(tr.Bus, float64(s[i].Bus))
		}
		m := trace.Used
		if s[i].Saturated {
			m = trace.Saturated
		}
		tr.Mask = append(tr.Mask, m)
	}
	return tr
}

// window returns the samples of a trace between two times after the first drive
// value, as indices.
func window(r Result, from, to time.Duration) []Sample {
	var out []Sample
	for _, s := range r.Samples {
		if at := s.At - r.Begun; at >= from && at < to {
			out = append(out, s)
		}
	}
	return out
}

func extremes(tr *trace.Trace) []sheet.Quantity {
	top := func(v []float64) *float64 {
		if len(v) == 0 {
			return nil
		}
		m := 0.0
		for _, x := range v {
			m = math.Max(m, math.Abs(x))
		}
		return &m
	}
	return []sheet.Quantity{{Name: "voltage", Value: top(tr.Voltage), Unit: "V"}, {Name: "speed", Value: top(tr.Speed), Unit: "rad/s"},
		{Name: "current", Value: top(tr.Current), Unit: "A"}, {Name: "bus", Value: top(tr.Bus), Unit: "V"}}
}

func envelopeQuantities(e safety.Envelope) []sheet.Quantity {
	q := func(name, unit string, v float64) sheet.Quantity {
		return sheet.Quantity{Name: name, Value: &v, Unit: unit}
	}
	return []sheet.Quantity{q("volts", "V", float64(e.VoltsMax)), q("speed", "rad/s", float64(e.SpeedMax)), q("current", "A", float64(e.CurrentMax)),
		q("bus high", "V", float64(e.BusMax)), q("bus low", "V", float64(e.BusMin)), q("acceleration", "rad/s²", e.AccelMax),
		q("rate of change of volts", "V/s", e.SlewMax), q("turns", "1", e.TurnsMax), q("run time", "s", e.RunTimeMax.Seconds()),
		q("stall time", "s", e.StallTime.Seconds()), q("telemetry age", "s", e.TelemetryAgeMax.Seconds()), q("board timeout", "s", e.BoardTimeout.Seconds())}
}

// profile is the drive of a plan as points to draw.
func profile(p safety.Plan) []Point {
	var pts []Point
	t := 0.0
	for _, s := range p.Segments {
		if s.Pattern.Kind != safety.PatternNone {
			return append(pts, patternProfile(s, t)...)
		}
		pts = append(pts, Point{t, s.From})
		t += s.Duration.Seconds()
		pts = append(pts, Point{t, s.To})
	}
	return pts
}

// patternProfile is the drive of a segment that the board's loop adds to. When a
// relay will switch is not known beforehand: it is drawn at even times.
func patternProfile(s safety.Segment, from float64) (pts []Point) {
	levels := s.Pattern.Levels()
	if levels == nil {
		levels = safety.Pattern{Kind: safety.PatternSquare, Steps: s.Pattern.Switchings}.Levels()
	}
	each := s.Duration.Seconds() / float64(len(levels))
	for i, up := range levels {
		v := s.From - s.Pattern.Amplitude
		if up {
			v = s.From + s.Pattern.Amplitude
		}
		pts = append(pts, Point{from + float64(i)*each, v}, Point{from + float64(i+1)*each, v})
	}
	return pts
}

func modeWords(p safety.Plan) (mode, unit string) {
	if len(p.Segments) > 0 && p.Segments[0].Mode == safety.ModeSpeed {
		return "closed loop", "rad/s"
	}
	return "volts", "V"
}

func milliseconds(d time.Duration) string { return fmt.Sprintf("%.1f ms", d.Seconds()*1000) }
