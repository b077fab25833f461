package bench

import (
	"errors"

	"math"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tune/design"
	"gainwright/tune/job"
	"gainwright/tune/model"
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
	Progress func(at time.Duration, step job.StepID, words string)
}

// Report is the outcome of a dry run in its fixed JSON form. What is not known is
// null.
type Report struct {
	Outcome    Outcome         `json:"outcome"`
	Reason     string          `json:"reason"`
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

// TruthReport is the rig's own physics under the gains as the board holds them.
type TruthReport struct {
	Model        *model.Linear `json:"model"`
	Ms           *float64      `json:"ms"`
	PhaseMargin  *float64      `json:"phase_margin_deg"`
	LoadIAERatio *float64      `json:"load_iae_ratio"`
	BreakForward *float64      `json:"breakaway_forward_V"`
	BreakReverse *float64      `json:"breakaway_reverse_V"`
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
	h := v.Hands(record)
	j := job.New(h, job.Options{Rig: d.Rig, RigText: d.RigText, Version: d.Program, Seed: uint32(d.Seed*2654435761 + 1)})
	outcome, reason := d.steps(v, j)
	rep := report(v, j, outcome, reason)
	if record != nil {
		rep.Sheet = d.Dir
		if err := record.Close(string(outcome), reason); err != nil {
			return rep, err
		}
	}
	return rep, nil
}

// steps goes down the path and says what came of it.
func (d DryRun) steps(v *Virtual, j *job.Job) (Outcome, string) {
	for _, p := range job.Path {
		if j.NoChange && afterPush[p.ID] {
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
		if err != nil {
			_ = j.Do(job.StepAsLeft)
			return outcomeOf(v, p.ID, err)
		}
	}
	switch {
	case j.NoChange:
		return NoAdjustment, "the gains as found meet the targets"
	case j.Verified != nil && j.Verified.Passed != nil && !*j.Verified.Passed:
		return Failed, "verify: " + j.Verified.Finding
	}
	return Accepted, "verified, stored and read back equal"
}

// afterPush are the steps that have no work when nothing is changed.
var afterPush = map[job.StepID]bool{job.StepPush: true, job.StepFirstLoop: true, job.StepVerify: true, job.StepStore: true}

func outcomeOf(v *Virtual, step job.StepID, err error) (Outcome, string) {
	var r *job.RefusedError
	if v.s.core.State().Phase == safety.Tripped {
		return Tripped, err.Error()
	}
	if errors.As(err, &r) && step != job.StepStore && step != job.StepVerify {
		return Refused, err.Error()
	}
	return Failed, err.Error()
}

func report(v *Virtual, j *job.Job, outcome Outcome, reason string) Report {
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
	rep.Truth = truth(v, j)
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

// truth judges the pushed gains on the rig's own physics, linearised at the
// speed of the verify.
func truth(v *Virtual, j *job.Job) TruthReport {
	speed := j.VerifySpeed()
	if speed == 0 {
		speed = float64(v.s.core.Envelope().SpeedMax) / 3
	}
	t := v.rig.Truth(speed)
	m := model.Linear{Kind: model.KindSecondOrder, Num: t.Num, Den: t.Den, DeadTime: t.DeadTime, InputUnit: model.InputVolts}
	rep := TruthReport{Model: &m, BreakForward: sheet.Known(t.BreakawayForward), BreakReverse: sheet.Known(t.BreakawayReverse)}
	if j.Gains == nil {
		return rep
	}
	// The loop sees the mean over the speed window: half of it is delay.
	loop := m
	loop.DeadTime += t.Window / 2
	judged, err := design.JudgeFrequency(loop, *j.Gains)
	if err != nil || !judged.Stable {
		rep.Ms = sheet.Known(math.Inf(1))
		return rep
	}
	rep.Ms, rep.PhaseMargin = sheet.Known(float64(judged.Ms)), sheet.Known(float64(judged.PhaseMargin))
	rep.LoadIAERatio = loadRatio(loop, *j.Gains, j.MsMax())
	return rep
}

// loadRatio is the load-disturbance IAE of the gains over that of the largest
// integral gain for the true plant under the same bound.
func loadRatio(m model.Linear, g design.Gains, msMax float64) *float64 {
	full, err := design.Judge(m, g)
	if err != nil || !full.LoadStep.IAE.Known() {
		return nil
	}
	best, chosen, err := design.Propose(m, design.Options{Rule: design.RuleLargestKi, MsMax: msMax, SampleTime: g.SampleTime, ComputeDelay: g.ComputeDelay,
		Discretisation: g.Discretisation})
	if err != nil || chosen < 0 || !best[chosen].Margins.LoadStep.IAE.Known() {
		return nil
	}
	return sheet.Known(float64(full.LoadStep.IAE) / float64(best[chosen].Margins.LoadStep.IAE))
}
