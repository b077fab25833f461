package job

import (
	"fmt"
	"slices"

	"gainwright/safety/rig"
	"gainwright/tune/sheet"
)

// Order is a job that was written down beforehand. It permits nothing: it says which
// steps stand in the way and in which order, and a person still has the keys.
type Order struct {
	Name      string
	Text      []byte // as read, for the record
	Rig       string // name in the rig file that it is for; "": any
	LookOnly  bool   // nothing is written to the board and nothing moves
	Checklist []string
	Signs     []string // who signs the card
	Overshoot *float64 // %, target of the verify
	Settling  *float64 // s, likewise
	MsMax     float64  // robustness bound; 0: the usual
	Steps     []Ordered
}

// Ordered is one step of an order.
type Ordered struct {
	Step StepID
	Note string
	Size float64 // of what is proposed, where the step has a size
	GoOn bool    // a refusal of it does not end the job
}

// Lookup returns what the path says of a step.
func Lookup(id StepID) (Info, bool) {
	for _, p := range Path {
		if p.ID == id {
			return p, true
		}
	}
	return Info{}, false
}

// NeededSteps are the steps that have to be done before it.
func (i Info) NeededSteps() []StepID { return slices.Clone(i.needs) }

// ordered puts the steps of an order first in the way, and makes the others optional.
func (j *Job) ordered(o *Order) {
	j.opt.Order = o
	if o.MsMax > 0 {
		j.opt.MsMax = o.MsMax
	}
	var first, rest []StepID
	for _, s := range o.Steps {
		first = append(first, s.Step)
		j.steps[s.Step].Note = s.Note
	}
	for _, id := range j.way {
		j.steps[id].Optional = !slices.Contains(first, id) && id != StepPort
		if !slices.Contains(first, id) {
			rest = append(rest, id)
		}
	}
	if !slices.Contains(first, StepPort) {
		first = append([]StepID{StepPort}, first...)
		rest = slices.DeleteFunc(rest, func(id StepID) bool { return id == StepPort })
	}
	j.way = append(first, rest...)
}

// lookOnly is why a job file keeps the board from being written to or driven, or "".
func (j *Job) lookOnly() string {
	if o := j.opt.Order; o != nil && o.LookOnly {
		return "the job file " + o.Name + " only looks"
	}
	return ""
}

// takeOrder holds an order against the rig file, adds its checklist and targets to it,
// and keeps it.
func (j *Job) takeOrder() error {
	o := j.opt.Order
	if o == nil || j.orderTaken {
		return nil
	}
	if o.Rig != "" && o.Rig != j.Rig.Name {
		return refuse(786, "another rig", fmt.Sprintf("the job file %q is for rig %q, this rig file is of %q", o.Name, o.Rig, j.Rig.Name), "use the job file of this rig, or correct it")
	}
	if n := len(j.Rig.Checklist) + len(o.Checklist); n > rig.ChecklistMax {
		return refuse(786, "checklist", fmt.Sprintf("rig file and job file have %d lines together, more than %d", n, rig.ChecklistMax), "shorten one of them")
	}
	j.Rig.Checklist = slices.Concat(j.Rig.Checklist, o.Checklist)
	if o.Overshoot != nil {
		j.Rig.Targets.Overshoot = *o.Overshoot
	}
	if o.Settling != nil {
		j.Rig.Targets.Settling = *o.Settling
	}
	j.orderTaken = true
	return nil
}

// goesOn reports whether a refusal of the step does not stand in the way.
func (j *Job) goesOn(id StepID) bool {
	o := j.opt.Order
	return o != nil && slices.ContainsFunc(o.Steps, func(s Ordered) bool { return s.Step == id && s.GoOn })
}

// sizeOf is the size at which an order wants a step, 1 as proposed.
func (j *Job) sizeOf(step StepID) float64 {
	if o := j.opt.Order; o != nil {
		for _, s := range o.Steps {
			if s.Step == step && s.Size > 0 {
				return s.Size
			}
		}
	}
	return 1
}

// OrderOutcome says how far an order was carried out; ok is false without one.
func (j *Job) OrderOutcome() (rec sheet.OrderRecord, ok bool) {
	o := j.opt.Order
	if o == nil {
		return rec, false
	}
	rec = sheet.OrderRecord{Name: o.Name, Mode: "drive", Complete: true, Signs: o.Signs, Steps: []sheet.OrderStep{}}
	if o.LookOnly {
		rec.Mode = "look-only"
	}
	for _, s := range o.Steps {
		st := j.steps[s.Step]
		line := sheet.OrderStep{Do: string(s.Step), Status: string(st.Status), Words: st.Result}
		switch words, once := j.carriedOut[s.Step]; {
		case st.Status == Done:
		case st.Status == ToDo && once: // a check that a restart has voided since
			line.Status, line.Words = string(Done), words
		case s.Step == StepCard && st.Status == Doing: // what is written stands on it
			line.Status = string(Done)
		default:
			line.Words = st.Reason
		}
		rec.Complete = rec.Complete && (line.Status == string(Done) || st.Status != ToDo && s.GoOn)
		rec.Steps = append(rec.Steps, line)
	}
	return rec, true
}

// keepOrder keeps how far an order was carried out, after each of its steps and from
// the identity on. Nothing is kept without one.
func (j *Job) keepOrder(id StepID) {
	o := j.opt.Order
	if st := j.steps[id]; st.Status == Done {
		j.carriedOut[id] = st.Result
	}
	if o == nil || j.FoundRec == nil || !slices.ContainsFunc(o.Steps, func(s Ordered) bool { return s.Step == id }) {
		return
	}
	if rec, ok := j.OrderOutcome(); ok {
		_ = j.h.Keep("job", sheet.NameOutcome, rec) // a record that fails stops the job by itself
	}
}
