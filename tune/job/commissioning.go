package job

import (
	"fmt"
	"math"
	"strings"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/sheet"
)

// Levels of the run-up, as shares of the highest speed that limits and drive leave
// with a margin, and how long each is held (our choice).
var runUpShares = []float64{0.1, 0.25, 0.5, 0.75, 1}

const (
	runUpMargin = 0.9
	runUpHold   = 2 * time.Second
)

// doRunUp goes up to the highest speed in levels, each a run of its own, and asks for
// a note at each.
func (j *Job) doRunUp() (result, error) {
	k := j.sizing()
	friction := 0.85 * k.StartForward
	if s := j.Static; s != nil && s.CoulombForward > 0 {
		friction = s.CoulombForward
	}
	top := runUpMargin * math.Min(float64(j.Env.SpeedMax), j.Gain*(float64(j.Env.VoltsMax)-friction))
	rec := sheet.RunUpRecord{}
	noted := 0
	for _, share := range runUpShares {
		drive := math.Max(friction+share*top/j.Gain, 1.2*k.StartForward)
		hold := runUpHold + seconds(5*j.Tau)
		plan := excite.WarmUp(k, drive, hold)
		plan.Name, plan.Purpose = fmt.Sprintf("run-up %.0f %%", 100*share), "look, listen and feel for vibration, noise, smell and heat"
		r, err := j.run(StepRunUp, plan, nil)
		if err != nil {
			return "", err
		}
		if r.Reason != safety.EndDone {
			return "", j.notDone(r)
		}
		level := steadyLevel(r, share, drive)
		level.TraceFile = r.File
		a, err := j.h.Ask(Question{Kind: AskText, Text: fmt.Sprintf("What was noted at %s?", rpm(orZero(*level.SpeedRadS))), Detail: []string{"Vibration, noise, smell, heat. enter alone: nothing."}})
		if err != nil {
			return "", err
		}
		if level.Note = strings.TrimSpace(a.Text); level.Note != "" {
			noted++
		}
		level.Time = j.stamp()
		rec.Levels = append(rec.Levels, level)
	}
	if err := j.h.Keep("event", sheet.NameRunUp, rec); err != nil {
		return "", err
	}
	last := rec.Levels[len(rec.Levels)-1]
	return result(fmt.Sprintf("%d levels up to %s, %d notes", len(rec.Levels), rpm(orZero(*last.SpeedRadS)), noted)), nil
}

// steadyLevel is the mean of the part of a run in which its drive was full: the last
// two thirds of it.
func steadyLevel(r Result, share, drive float64) sheet.RunUpLevel {
	var speed, amps []float64
	for _, s := range r.Samples {
		if s.State == protocol.Driving && math.Abs(float64(s.Volts)-drive) < 0.05*drive+0.1 {
			speed = append(speed, float64(s.Speed))
			if s.Has&protocol.HasCurrent != 0 {
				amps = append(amps, float64(s.Current))
			}
		}
	}
	speed, amps = speed[len(speed)/3:], amps[len(amps)/3:]
	out := sheet.RunUpLevel{Share: share, VoltsV: sheet.Known(drive), SpeedRadS: sheet.Known(0)}
	if len(speed) > 1 {
		m, sq := mean(speed), 0.0
		for _, v := range speed {
			sq += (v - m) * (v - m)
		}
		out.SpeedRadS, out.RippleRadS = sheet.Known(m), sheet.Known(math.Sqrt(sq/float64(len(speed)-1)))
	}
	if len(amps) > 0 {
		out.CurrentA = sheet.Known(mean(amps))
	}
	return out
}

// doAcceptance has the acceptance list of the rig file answered line by line.
func (j *Job) doAcceptance() (result, error) {
	list := j.Rig.Acceptance
	if len(list) == 0 {
		return "", refuse(790, "acceptance", "the rig file has no acceptance list", "add acceptance = [\"…\"] at the top of the rig file, or leave the step out")
	}
	w, err := j.h.Ask(Question{Kind: AskText, Text: "Who witnesses? Initials", Detail: []string{fmt.Sprintf("%d lines follow: y passed, n failed.", len(list))}})
	if err != nil {
		return "", err
	}
	rec := sheet.AcceptanceRecord{Passed: true, Witness: strings.TrimSpace(w.Text)}
	failed := 0
	for i, l := range list {
		a, err := j.h.Ask(Question{Kind: AskYesNo, Text: l, Detail: []string{fmt.Sprintf("Acceptance list, line %d of %d. Passed?", i+1, len(list))}})
		if err != nil {
			return "", err
		}
		word := "passed"
		if !a.Yes {
			word, rec.Passed = "failed", false
			failed++
		}
		rec.Lines = append(rec.Lines, sheet.Answer{Question: l, Answer: word, Initials: rec.Witness, Time: j.stamp()})
	}
	if err := j.h.Keep("event", sheet.NameAcceptance, rec); err != nil {
		return "", err
	}
	return result(fmt.Sprintf("%d of %d passed, witnessed by %s", len(list)-failed, len(list), rec.Witness)), nil
}
