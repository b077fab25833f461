package job

import (
	"errors"
	"fmt"
	"slices"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tune/design"
	"gainwright/tune/excite"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// Options of a job.
type Options struct {
	Rig      rig.Rig
	RigText  []byte // the rig file as read; nil: the person is asked
	Operator string
	Version  string // of the program
	Seed     uint32 // of the pseudo-random test
	MsMax    float64
	Ambient  *float64 // °C, as read off a thermometer; nil: not known
	// Attended says that somebody is there who knows ambient and load state.
	Attended bool
	Order    *Order // a job file; nil: the whole path
	// Earlier finds the newest earlier record of a rig and board, nil where there is
	// none; nil: nobody looks.
	Earlier func(rig, board string) *sheet.Reader
}

// Known is all that the job knows so far. Steps add to it; nothing is lost by
// going back.
type Known struct {
	Rig     rig.Rig
	RigText []byte // the rig file as read
	Env     safety.Envelope

	ID        protocol.Identity
	IDLines   []string
	Hz        int // telemetry rate
	Running   GainSet
	Stored    GainSet
	Found     GainSet // running gains as found
	FoundRec  *sheet.Snapshot
	Limits    []sheet.Quantity // held by the board, as read back
	LimitsCRC uint16

	StartForward, StartReverse float64 // V, of the sign ramp
	Noise                      float64 // rad/s at rest
	Silence                    safety.CheckJudged
	Gain, Tau                  float64 // first idea: rad/s per V, s
	BreakForward, BreakReverse []float64
	breakRun                   []Sample // of the breakaway test
	Levels                     []identify.Level
	rising                     []bool // of Levels: reached from below
	Static                     *identify.Static
	electric                   *electrical // nil where the current is not measured
	Bias, Amplitude            float64     // V, of the step test

	StepTrace, SecondTrace *trace.Trace
	StepFile, SecondFile   string
	Fit                    *identify.Result
	FitFile                string // of the chosen fit, in the record
	fitTold                FitSettings

	FoundMargins *design.Margins
	hand         *hand         // nil: the rule's gains
	foundGains   *design.Gains // while the as-found trace is taken
	FoundStep    *sheet.AsFoundStepRecord
	Proposals    []design.Proposal
	Chosen       int
	Gains        *design.Gains // proposed, as the board will hold them
	NewSet       *GainSet
	Margins      *design.Margins
	Worst        *design.Worst
	NoChange     bool
	Refused      string // why nothing is proposed

	Pushed      bool
	Verified    *sheet.VerifyRecord
	StoredOK    bool
	Experiments map[StepID]sheet.ExperimentRecord // optional ones that were done, newest of each
	charts      map[StepID][]ChartView            // what is drawn of them
	findings    map[StepID]string                 // of those that are not optional
	LeftRec     *sheet.Snapshot
	MotorValues *sheet.MotorRecord // the values that a later job is compared with
	Checks      []sheet.CheckRecord
	Remarks     []string
	Ambient     *float64 // degC, as the operator says; nil: not known
}

// Job is one job on one rig. Its methods are called from one goroutine.
type Job struct {
	Known
	h     Hands
	opt   Options
	steps map[StepID]*StepView
	way   []StepID // the order of work: that of Path, or of a job file

	ticked      bool            // the checklist, this session
	conditions  bool            // ambient and load state were asked
	forgotten   map[StepID]bool // checks that have to be seen again
	orderTaken  bool            // the job file was held against the rig file
	earlier     *sheet.Reader   // of this rig, nil: none
	differences []sheet.Difference
	part        *sheet.PartRecord // that was swapped
	overridden  bool              // the motor check, with a reason
	carriedOut  map[StepID]string // steps that were done once, with what they reported
	laptop      map[string]bool   // what of the laptop was said and answered
}

// New returns a job at its beginning.
func New(h Hands, opt Options) *Job {
	if opt.MsMax == 0 {
		opt.MsMax = 1.6
	}
	if opt.Seed == 0 {
		opt.Seed = 0x5A
	}
	j := &Job{h: h, opt: opt, steps: map[StepID]*StepView{}, carriedOut: map[StepID]string{}, forgotten: map[StepID]bool{}}
	j.Rig, j.RigText, j.Ambient = opt.Rig, opt.RigText, opt.Ambient
	for i := range Path {
		p := &Path[i]
		j.steps[p.ID] = &StepView{ID: p.ID, Title: p.Title, For: p.For, Needs: p.Needs, Moves: p.Moves, Takes: p.Takes,
			Gives: p.Gives, Status: ToDo, Optional: p.Optional}
		j.way = append(j.way, p.ID)
	}
	if opt.Order != nil {
		j.ordered(opt.Order)
	}
	j.inputsNamed()
	j.publish()
	h.Show(func(v *View) { v.Current = StepPort })
	return j
}

// RefusedError is a step that will not go on, with its number, cause and remedy.
type RefusedError struct {
	Number        int
	What          string
	Cause, Remedy string
}

func (e *RefusedError) Error() string {
	return fmt.Sprintf("%s: %s; %s (%d)", e.What, e.Cause, e.Remedy, e.Number)
}

// refuse makes a RefusedError. Numbers from 700 on are the job's own; those below
// are the limiter's.
func refuse(number int, what, cause, remedy string) error {
	return &RefusedError{Number: number, What: what, Cause: cause, Remedy: remedy}
}

// result is what a step reports when it is done, in one line.
type result string

// Do carries out one step. The error is also shown in the path; ErrOver ends the
// job, every other error leaves the person free to go on elsewhere.
func (j *Job) Do(id StepID) error {
	s := j.steps[id]
	if missing := j.missing(id); missing != "" {
		return j.refused(id, refuse(700, s.Title, "it needs "+missing, "do that step first"))
	}
	s.Status, s.Reason = Doing, ""
	j.h.Show(func(v *View) { v.Current, v.Doing, v.Refusal = id, true, nil })
	j.publish()
	words, err := j.procedure(id)()
	j.h.Show(func(v *View) { v.Doing, v.Busy, v.Ask, v.Plan = false, "", nil, nil })
	if _, named := errors.AsType[*RefusedError](err); !named && errors.Is(err, protocol.ErrNoAnswer) {
		err = refuse(763, s.Title, err.Error(), "look at the line to the board: cable, power, baud rate; then start again at the identity")
	}
	if err != nil {
		return j.refused(id, err)
	}
	s.Status, s.Result = Done, string(words)
	delete(j.forgotten, id)
	j.h.Say("%s: %s", s.Title, words)
	j.keepOrder(id)
	j.publish()
	j.h.Show(func(v *View) { v.Current = j.Next() })
	return nil
}

func (j *Job) refused(id StepID, err error) error {
	s := j.steps[id]
	s.Status, s.Reason = Refused, err.Error()
	if errors.Is(err, ErrDeclined) {
		s.Status = ToDo
	}
	var r *RefusedError
	var limiter interface {
		Refusal() (number int, cause, remedy string)
	}
	if !errors.As(err, &r) && errors.As(err, &limiter) {
		n, cause, remedy := limiter.Refusal()
		r = &RefusedError{Number: n, What: s.Title, Cause: cause, Remedy: remedy}
		err = r
		s.Reason = err.Error()
	}
	if r != nil && r.Number > int(safety.CodeAsked)-1 && r.Number < int(safety.CodeNoPlan) {
		s.Status = ToDo // stopped by the person: nothing was refused
	}
	if r != nil {
		j.h.Show(func(v *View) {
			v.Refusal = &RefusalView{Number: r.Number, What: r.What, Cause: r.Cause, Remedy: r.Remedy}
		})
	} else if errors.Is(err, protocol.ErrVoid) {
		j.h.Show(func(v *View) {
			if v.Refusal == nil { // what ended it has said more
				v.Refusal = &RefusalView{Number: int(safety.CodeVoided), What: s.Title, Cause: "a stop or a lost link ended it", Remedy: "do the step again"}
			}
		})
	} else if !errors.Is(err, ErrDeclined) && !errors.Is(err, ErrOver) {
		j.h.Show(func(v *View) {
			v.Refusal = &RefusalView{Number: 799, What: s.Title, Cause: err.Error(), Remedy: "mend the cause and do the step again"}
		})
	}
	j.h.Say("%s: %v", s.Title, err)
	_ = j.h.Keep("event", string(id), sheet.EventRecord{What: s.Title + " not done", Detail: err.Error()})
	j.keepOrder(id)
	j.publish()
	if next := j.Next(); j.forgotten[next] && next != id && id != StepPort && id != StepIdentity {
		j.h.Show(func(v *View) { v.Current = next })
	}
	return err
}

// Skip leaves a step out, with a reason that is kept. A check cannot be skipped
// into being passed: what needs it stays refused by the limiter.
func (j *Job) Skip(id StepID, reason string) {
	s := j.steps[id]
	s.Status, s.Reason = Skipped, reason
	_ = j.h.Keep("event", string(id), sheet.EventRecord{What: s.Title + " skipped", Detail: reason})
	j.keepOrder(id)
	j.publish()
}

// Again is called when the line to the board came back. Nothing is resumed: the
// identity is asked for anew, and what the limiter forgot has to be seen again.
func (j *Job) Again() error {
	j.forgetChecks("the line was lost or the board restarted: to be seen again this session")
	return j.Do(StepIdentity)
}

// forgetChecks sets the checks back to be made, as the limiter has done.
func (j *Job) forgetChecks(why string) {
	j.ticked = false
	for _, id := range []StepID{StepCount, StepSign, StepStop, StepSilence, StepInterlocks, StepLimits} {
		if s := j.steps[id]; s.Status == Done {
			s.Status, s.Reason = ToDo, why
			j.forgotten[id] = true
		}
	}
	j.publish()
}

// Remark keeps a remark.
func (j *Job) Remark(text string) {
	j.Remarks = append(j.Remarks, text)
	if err := j.h.KeepText("remark", "operator", text+"\n"); err == nil {
		j.h.Say("remark: %s", text)
	}
}

// Next is the first step behind the last one done that can be done, or else the
// first of the path. Optional steps are passed over.
func (j *Job) Next() StepID {
	if j.steps[StepCard].Status == Done {
		return StepCard // the job is over; a person may still go anywhere
	}
	next := j.onward()
	if !drives(next) {
		return next
	}
	for _, id := range j.way { // nothing arms before the checks were seen again
		if st := j.steps[id].Status; j.forgotten[id] && (st == ToDo || st == Refused) && j.missing(id) == "" {
			return id
		}
	}
	return next
}

// drives reports whether a step asks for an arm.
func drives(id StepID) bool {
	switch id {
	case StepPort, StepIdentity, StepSwap, StepFit, StepDesign, StepPush, StepStore, StepAsLeft, StepCard:
		return false
	}
	return true
}

// onward is the first step behind the last one done, forgotten checks apart.
func (j *Job) onward() StepID {
	last := -1
	for i, id := range j.way {
		if s := j.steps[id]; s.Status == Done || s.Status == Refused && j.goesOn(id) {
			last = i
		}
	}
	for _, part := range [][]StepID{j.way[last+1:], j.way} {
		for _, id := range part {
			if st := j.steps[id].Status; !j.steps[id].Optional && (st == ToDo || st == Refused) && j.missing(id) == "" {
				return id
			}
		}
	}
	return StepCard
}

// StatusOf returns where a step stands.
func (j *Job) StatusOf(id StepID) Status { return j.steps[id].Status }

// missing names what a step needs and is not there, "" if nothing.
func (j *Job) missing(id StepID) string {
	for _, n := range info(id).needs {
		if st := j.steps[n].Status; st != Done && !(st == Skipped && canSkip[n]) {
			return info(n).Title
		}
	}
	return ""
}

// canSkip are the steps that later ones can do without.
var canSkip = map[StepID]bool{StepLimits: true, StepInterlocks: true, StepSecond: true, StepVerify: true}

func (j *Job) publish() {
	steps := make([]StepView, len(j.way))
	for i, id := range j.way {
		steps[i] = *j.steps[id]
		steps[i].Ready = j.missing(id) == ""
	}
	j.h.Show(func(v *View) { v.Steps = steps })
}

func (j *Job) procedure(id StepID) func() (result, error) {
	if f := j.optional(id); f != nil {
		return f
	}
	return map[StepID]func() (result, error){
		StepPort: j.doPort, StepIdentity: j.doIdentity, StepCount: j.doCount, StepSign: j.doSign, StepStop: j.doStop,
		StepSilence: j.doSilence, StepInterlocks: j.doInterlocks, StepLimits: j.doLimits, StepInch: j.doInch, StepBreakaway: j.doBreakaway, StepStaircase: j.doStaircase,
		StepStep: j.doStep, StepSecond: j.doSecond, StepFit: j.doFit, StepFound: j.doFound, StepDesign: j.doDesign, StepPush: j.doPush,
		StepFirstLoop: j.doFirstLoop, StepVerify: j.doVerify, StepStore: j.doStore, StepAsLeft: j.doAsLeft, StepCard: j.doCard,
	}[id]
}

// patterns reports whether the board's loop makes relay, sequence and steps itself,
// under its own limit of the rate of change of volts, with a capture that shows them.
func (j *Job) patterns() bool {
	return j.ID.Can("exper") && j.ID.Can("capture") && slices.Contains(j.ID.LimitNames, protocol.LimSlew)
}

// sizing is what the experiments are sized from.
func (j *Job) sizing() excite.Known {
	k := excite.Known{Env: j.Env, StartForward: j.StartForward, StartReverse: j.StartReverse, Gain: j.Gain, Tau: j.Tau,
		Noise: j.Noise, Loop: j.ID.Loop.Seconds(), Patterns: j.patterns()}
	if w := j.ID.Window().Seconds(); w > 0 {
		k.SpeedStep = j.ID.RadPerCount() / w
	}
	if len(j.BreakForward) > 0 {
		k.StartForward = mean(j.BreakForward)
	}
	if len(j.BreakReverse) > 0 {
		k.StartReverse = mean(j.BreakReverse)
	}
	return k
}

func (j *Job) doPort() (result, error) { return "open", nil }
