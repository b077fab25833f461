package bench

import (
	"errors"
	"slices"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tune/design"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// Outcome is what a whole job came to.
type Outcome string

// The outcomes.
const (
	Accepted     Outcome = "accepted"
	NoAdjustment Outcome = "no-adjustment"
	Refused      Outcome = "refused"
	Tripped      Outcome = "tripped"
	Failed       Outcome = "failed"
)

// DryRun is a whole job on a simulated rig in virtual time.
type DryRun struct {
	Config   simrig.Config
	Rig      rig.Rig // with RigText nil: made from the nameplate
	RigText  []byte
	Seed     uint64
	Dir      string // of the record; "" keeps none
	Program  string
	Start    time.Time
	Rules    bool         // judge other rules on the rig's own physics as well
	Also     []job.StepID // optional steps to be done as well
	Order    *job.Order   // a job file; nil: the whole path
	Progress func(at time.Duration, step job.StepID, words string)
}

// Report is the outcome of a dry run in its fixed JSON form. What is not known is
// null.
type Report struct {
	Outcome    Outcome         `json:"outcome"`
	Reason     string          `json:"reason"`
	Cause      string          `json:"cause,omitempty"` // in the word of a simulated rig's fault
	Model      any             `json:"model"`
	Friction   FrictionReport  `json:"friction"`
	Gains      *design.Gains   `json:"gains"`
	Margins    *design.Margins `json:"margins"`
	Worst      WorstReport     `json:"worst"`
	Verify     any             `json:"verify"`
	Extremes   ExtremesReport  `json:"extremes"`
	Envelope   map[string]any  `json:"envelope"`
	Violations int             `json:"violations"`
	Truth      TruthReport     `json:"truth"`
	Motor      float64         `json:"motor_seconds"`
	Simulated  float64         `json:"simulated_seconds"`
	Sheet      string          `json:"sheet"`
	// JobFile says how far a job file was carried out; nil without one.
	JobFile *sheet.OrderRecord `json:"job_file,omitempty"`
}

// FrictionReport is breakaway as measured.
type FrictionReport struct {
	Forward *float64 `json:"breakaway_forward_V"`
	Reverse *float64 `json:"breakaway_reverse_V"`
}

// WorstReport is the worst case of the proposal.
type WorstReport struct {
	Ms          *float64 `json:"ms"`
	PhaseMargin *float64 `json:"phase_margin_deg"`
}

// ExtremesReport is what the simulated rig itself saw.
type ExtremesReport struct {
	Voltage float64 `json:"voltage"`
	Speed   float64 `json:"speed"`
	Current float64 `json:"current"`
	Bus     float64 `json:"bus"`
}

// Do runs the job. The error is for what kept it from beginning; everything
// after that is an outcome.
func (d DryRun) Do() (Report, error) {
	if d.RigText == nil {
		var err error
		if d.Rig, d.RigText, err = RigOf(d.Config); err != nil {
			return Report{}, err
		}
	}
	r := simrig.New(d.Config, d.Seed)
	v := NewVirtual(r, d.Start)
	var record *sheet.Sheet
	if d.Dir != "" {
		var err error
		record, err = sheet.Create(d.Dir, sheet.Header{Rig: d.Rig.Name, BoardID: d.Config.Board.ID, Program: d.Program, Seed: d.Seed,
			Start: d.Start.Format(time.RFC3339Nano), Simulated: true}, sheet.WithClock(v.Now))
		if err != nil {
			return Report{}, err
		}
	}
	endTape := func() error { return nil }
	if record != nil {
		out, err := record.Stream(sheet.KindTape, "session", "txt")
		if err != nil {
			return Report{}, err
		}
		endTape = v.Tape(out)
	}
	h := v.Hands(record)
	j := job.New(h, job.Options{Rig: d.Rig, RigText: d.RigText, Version: d.Program, Seed: uint32(d.Seed*2654435761 + 1), Order: d.Order, Ambient: &d.Config.Motor.Ambient})
	outcome, reason, stepErr := d.steps(v, j)
	rep := report(v, j, outcome, reason, d.Rules)
	rep.Cause = causeOf(stepErr)
	if rec, ok := j.OrderOutcome(); ok {
		rep.JobFile = &rec
	}
	if record != nil {
		rep.Sheet = d.Dir
		if err := endTape(); err != nil {
			return rep, err
		}
		if err := record.Close(string(outcome), reason); err != nil {
			return rep, err
		}
	}
	return rep, nil
}

// steps goes down the path and says what came of it.
func (d DryRun) steps(v *Virtual, j *job.Job) (Outcome, string, error) {
	for _, id := range d.way() {
		p, _ := job.Lookup(id)
		goesOn := d.goesOn(id)
		if j.NoChange && afterPush[p.ID] || p.ID == job.StepCard && d.Dir == "" || j.StatusOf(p.ID) == job.Skipped || d.Order == nil && p.Optional && !slices.Contains(d.Also, p.ID) {
			continue
		}
		err := j.Do(p.ID)
		if d.Progress != nil {
			words := "done"
			if err != nil {
				words = err.Error()
			}
			d.Progress(v.Now(), p.ID, words)
		}
		var no *job.RefusedError
		if (p.Optional && d.Order == nil || goesOn) && errors.As(err, &no) && v.s.core.State().Phase != safety.Tripped {
			continue // said and kept; nothing else needs it
		}
		if err != nil {
			_ = j.Do(job.StepAsLeft)
			o, why := outcomeOf(v, p.ID, err)
			return o, why, err
		}
	}
	switch {
	case j.NoChange:
		return NoAdjustment, "the gains as found meet the targets", nil
	case j.Verified != nil && j.Verified.Passed != nil && !*j.Verified.Passed:
		return Failed, "verify: " + j.Verified.Finding, nil
	}
	if d.Order != nil && j.StatusOf(job.StepVerify) != job.Done {
		return Accepted, "the job file is carried out; it has no verify", nil
	}
	return Accepted, "verified, stored and read back equal", nil
}

// way are the steps in the order in which they are done.
func (d DryRun) way() (ids []job.StepID) {
	if d.Order != nil {
		ids = append(ids, job.StepPort)
		for _, s := range d.Order.Steps {
			if s.Step != job.StepPort {
				ids = append(ids, s.Step)
			}
		}
		return ids
	}
	for _, p := range job.Path {
		ids = append(ids, p.ID)
	}
	return ids
}

func (d DryRun) goesOn(id job.StepID) bool {
	return d.Order != nil && slices.ContainsFunc(d.Order.Steps, func(s job.Ordered) bool { return s.Step == id && s.GoOn })
}

// afterPush are the steps that have no work when nothing is changed.
var afterPush = map[job.StepID]bool{job.StepPush: true, job.StepFirstLoop: true, job.StepVerify: true, job.StepStore: true}

func outcomeOf(v *Virtual, step job.StepID, err error) (Outcome, string) {
	var r *job.RefusedError
	if v.s.core.State().Phase == safety.Tripped {
		return Tripped, err.Error()
	}
	// A verify that does not come out as forecast failed; everything else that a
	// step refuses, a memory that does not keep what it was given included, is a
	// refusal.
	if errors.As(err, &r) && step != job.StepVerify {
		return Refused, err.Error()
	}
	return Failed, err.Error()
}

func report(v *Virtual, j *job.Job, outcome Outcome, reason string, rules bool) Report {
	ext := v.rig.Extremes()
	e := v.s.core.Envelope()
	rep := Report{Outcome: outcome, Reason: reason, Gains: j.Gains, Margins: j.Margins,
		Extremes: ExtremesReport{ext.Volts, ext.Speed, ext.Amps, ext.Bus}, Violations: len(ext.Violations), Motor: ext.PoweredS, Simulated: v.Now().Seconds(),
		Envelope: map[string]any{"volts_max": e.VoltsMax, "speed_max": e.SpeedMax, "current_max": e.CurrentMax, "bus_max": e.BusMax, "bus_min": e.BusMin,
			"acceleration_max": e.AccelMax, "turns_max": e.TurnsMax, "run_time_max": e.RunTimeMax.Seconds()}}
	if j.Fit != nil {
		if f := j.Fit.Best(); f != nil {
			rep.Model = f
		}
	}
	rep.Friction = FrictionReport{average(j.BreakForward), average(j.BreakReverse)}
	if j.Verified != nil {
		rep.Verify = j.VerifyReport()
	}
	if j.Worst != nil {
		rep.Worst = WorstReport{sheet.Known(float64(j.Worst.Ms)), sheet.Known(float64(j.Worst.PhaseMargin))}
	}
	rep.Truth = truth(v, j, rules)
	return rep
}

func average(v []float64) *float64 {
	if len(v) == 0 {
		return nil
	}
	s := 0.0
	for _, x := range v {
		s += x
	}
	return sheet.Known(s / float64(len(v)))
}
