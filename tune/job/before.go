package job

import (
	"fmt"
	"strings"
	"time"

	"gainwright/safety"
	"gainwright/tune/sheet"
)

// Laptop is what the system tells of the computer under the console. A pointer
// that is nil is not known.
type Laptop struct {
	System   string   // its name
	Battery  *float64 // share that is left, 0 to 1; nil: no battery, or not told
	Charging bool     // or on mains
	HoldOff  string   // how sleep can be held off, "" if there is no way or it is not told
	Told     bool     // the system tells whether there is a way
}

// BatteryLeast is the share below which a battery that is not charging is said
// before arming (our choice).
const BatteryLeast = 0.15

// Words are what has to be said before arming: the grave first.
func (l Laptop) Words() (grave, notes []string) {
	if l.Battery != nil && *l.Battery < BatteryLeast && !l.Charging {
		grave = append(grave, fmt.Sprintf("battery %.0f %% and not charging", 100**l.Battery))
	}
	switch {
	case !l.Told:
		notes = append(notes, "hold-off of sleep: unknown here, switch sleep off yourself")
	case l.HoldOff == "":
		notes = append(notes, "sleep cannot be held off here: switch it off yourself")
	default:
		notes = append(notes, "sleep is not held off: start under "+l.HoldOff)
	}
	return grave, notes
}

// before does what comes before an arm: the checklist, once a session, and what is
// to be said of the laptop. It returns the notes that stand beside the plan, the
// grave ones first.
func (j *Job) before() (notes []string, grave int, err error) {
	if err := j.tickList(); err != nil {
		return nil, 0, err
	}
	said, notes := j.h.Laptop().Words()
	for _, g := range said {
		if j.laptop[g] {
			continue
		}
		a, err := j.h.Ask(Question{Kind: AskYesNo, Text: "Go on all the same?", Detail: []string{"The laptop: " + g + ". If it dies in motion, the stop is left to the board's timeout.", "Plug it in first, or go on: your answer is kept."}})
		if err != nil {
			return nil, 0, err
		}
		if err := j.h.Keep("event", "laptop", sheet.EventRecord{What: "before arming: " + g, Detail: fmt.Sprintf("go on: %v", a.Yes)}); err != nil {
			return nil, 0, err
		}
		if !a.Yes {
			return nil, 0, ErrDeclined
		}
		if j.laptop == nil {
			j.laptop = map[string]bool{}
		}
		j.laptop[g] = true
	}
	return append(said, notes...), len(said), nil
}

// tickList has the checklist of the rig file ticked line by line.
func (j *Job) tickList() error {
	if !j.Env.ChecksAsked.Has(safety.CheckTicked) || j.ticked {
		return nil
	}
	rec := sheet.ChecklistRecord{Ticked: true}
	for i, line := range j.Rig.Checklist {
		a, err := j.h.Ask(Question{Kind: AskYesNo, Text: line, Detail: []string{fmt.Sprintf("Checklist of the rig file, line %d of %d. Done and seen?", i+1, len(j.Rig.Checklist))}})
		if err != nil {
			return err
		}
		word := map[bool]string{true: "yes", false: "no"}[a.Yes]
		rec.Lines = append(rec.Lines, sheet.Answer{Question: line, Answer: word, Initials: j.opt.Operator, Time: j.h.Wall().Format(time.RFC3339)})
		if !a.Yes {
			rec.Ticked = false
			break
		}
	}
	if err := j.h.Keep("event", sheet.NameChecklist, rec); err != nil {
		return err
	}
	j.h.Check(safety.CheckTicked, rec.Ticked)
	if !rec.Ticked {
		line := rec.Lines[len(rec.Lines)-1].Question
		return refuse(784, "checklist", "not ticked: "+line, "see to it, then do the step again")
	}
	j.ticked = true
	return nil
}

// reasonsToStop are what the person may say when asked why, by number.
var reasonsToStop = []string{"a person came near", "a noise", "a smell or smoke", "it looked wrong", "another reason"}

// whyStopped asks at standstill why the person stopped a run, and keeps the answer.
func (j *Job) whyStopped(plan safety.Plan, r Result) error {
	byKey := r.Cause.Code == safety.CodeAsked && strings.Contains(r.Cause.Words, string(safety.ByStopKey)) || r.Cause.Code == safety.CodeOtherKey
	if r.Reason != safety.EndStopped || !byKey || !r.Started || plan.Check == safety.CheckStop {
		return nil
	}
	a, err := j.h.Ask(Question{Kind: AskChoice, Text: "Why was it stopped?", Options: reasonsToStop, Default: reasonsToStop[len(reasonsToStop)-1],
		Detail: []string{"The answer goes into the record. The next arm asks again whether the area is clear."}})
	reason := a.Text
	if err != nil {
		reason = "not said"
	}
	rec := sheet.WhyStoppedRecord{Run: plan.Name, Key: r.Cause.Words, Reason: reason, Time: j.h.Wall().Format(time.RFC3339)}
	if keep := j.h.Keep("event", sheet.NameWhyStopped, rec); keep != nil {
		return keep
	}
	if err == ErrDeclined {
		return nil
	}
	return err
}
