// Package bench puts the pure parts together and lends a job its hands, twice:
// Virtual runs everything in one goroutine on a simulated rig in virtual time,
// Live runs the same parts behind goroutines on a real line. The order of work
// is tune/job's, the decisions about motion are safety.Step's; this package
// carries bytes, questions and samples between them.
package bench

import (
	"errors"
	"fmt"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/supervisor"
	"gainwright/tune/job"
)

// session is one connection with what a person sees of it. It lives in one
// goroutine; the engine around it says which.
type session struct {
	core *supervisor.Core
	now  time.Duration
	view job.View

	opened      bool     // a port is open
	run         *running // the run that is shown, armed or under way
	lastStop    *supervisor.StopTimes
	lastEnd     *safety.RunEnded // of any run
	stops       int              // answered stops so far
	asking      *job.Question
	askID       int
	answer      *job.Answer
	watching    *watch
	cycling     bool   // a restart is asked for and expected
	onRestart   func() // told of a restart that nobody asked for
	boots       int    // restarts of the board seen
	expected    int    // of them asked for
	tapeNote    func(string)
	work        func([]job.InputBit) // works the inputs of a simulated rig; nil where people have to
	laptop      func() job.Laptop
	laptopWords string // the grave ones, for the alarms
}

// running is a run from the moment it is shown.
type running struct {
	spec     job.Run
	admitted safety.Admitted
	asked    bool // the arm was asked for
	provoked bool // what the run asks for was worked
	declined bool
	refused  *safety.Cause // of the newest arm that was refused
	begun    time.Duration
	started  bool
	begunUS  uint64
	samples  []job.Sample
	marks    []float64
	judged   *safety.CheckJudged
	ended    *safety.RunEnded
	stop     *supervisor.StopTimes
	board    *supervisor.LogEntry
}

type watch struct {
	samples []protocol.Sample
}

// samplesMax bounds what one run keeps: at 2 kHz for ten minutes. Beyond it the
// record would be a tape, not a run.
const samplesMax = 1_200_000

// Sample keeps what a run measured.
func (s *session) Sample(now time.Duration, x protocol.Sample) {
	if s.watching != nil && len(s.watching.samples) < samplesMax {
		s.watching.samples = append(s.watching.samples, x)
	}
	r := s.run
	if r == nil || !r.asked || len(r.samples) >= samplesMax {
		return
	}
	if !r.started && s.core.Phase() == safety.Running {
		r.started, r.begun, r.begunUS = true, now, x.BoardUS
	}
	// From the count-down on: what the shaft did before the drive belongs to the
	// record.
	if ph := s.core.Phase(); r.started || ph == safety.CountDown {
		r.samples = append(r.samples, job.Sample{At: now, Bad: s.core.Link().Stats.BadLines, Sample: x})
	}
	s.draw(x)
	s.learn(r, x)
}

// learn looks whether the run does what was forecast, and whether what it is for
// is known.
func (s *session) learn(r *running, x protocol.Sample) {
	if !r.started || r.ended != nil || s.core.State().Phase != safety.Running {
		return
	}
	t := float64(x.BoardUS-r.begunUS) * 1e-6
	if words := r.spec.Band.Left(t, float64(x.Speed)); words != "" {
		s.core.Do(safety.LeftForecast{At: s.now, Words: words})
		return
	}
	if r.spec.Learn == nil {
		return
	}
	words, enough := r.spec.Learn(job.Sample{At: s.now, Sample: x})
	if words != "" && s.view.Live != nil {
		l := *s.view.Live
		l.Learn = words
		s.view.Live = &l
	}
	if enough {
		s.core.Do(safety.Enough{At: s.now})
	}
}

// draw extends the live strips. Slices are only ever appended to, so that a view
// that was handed out stays as it is.
func (s *session) draw(x protocol.Sample) {
	r, l := s.run, s.view.Live
	if l == nil || !r.started {
		return
	}
	c := *l
	t := float64(x.BoardUS-r.begunUS) * 1e-6
	c.Speed = append(c.Speed, job.Point{T: t, V: float64(x.Speed)})
	c.Volts = append(c.Volts, job.Point{T: t, V: float64(x.Volts)})
	if x.Has&protocol.HasSetpoint != 0 && r.spec.View.Mode == "closed loop" {
		c.Setpoint = append(c.Setpoint, job.Point{T: t, V: float64(x.Setpoint)})
	}
	s.view.Live = &c
}

// Effect takes what the limiter calls for beyond lines on the wire.
func (s *session) Effect(now time.Duration, e safety.Effect) {
	switch e := e.(type) {
	case safety.Log:
		s.say(e.Words)
	case safety.RunEnded:
		s.lastEnd = &e
		if s.run != nil {
			s.run.ended = &e
			s.endLive(e)
		}
	case safety.ArmRefused:
		s.view.Refusal = &job.RefusalView{Number: int(e.Cause.Code), What: "arm refused", Cause: e.Cause.Words, Remedy: e.Cause.Do}
		if s.run != nil {
			s.run.asked = false
			s.run.refused = &e.Cause
		}
	case safety.CheckJudged:
		if s.run != nil {
			s.run.judged = &e
		}
	}
}

func (s *session) endLive(e safety.RunEnded) {
	if s.view.Live == nil {
		return
	}
	l := *s.view.Live
	l.Running, l.Elapsed = false, e.Lasted
	l.Ended = e.Reason.String()
	if e.Cause.Words != "" {
		l.Ended += ": " + e.Cause.Words
	}
	s.view.Live = &l
}

// Event takes a line of the board that answers nothing.
func (s *session) Event(_ time.Duration, text string) { s.say(text) }

// BoardStop takes the board's own record of a stop.
func (s *session) BoardStop(_ time.Duration, l supervisor.LogEntry) {
	s.say(fmt.Sprintf("the board's stop log: %v at %.4g rad/s", l.Cause, l.Speed))
	if s.run != nil {
		s.run.board = &l
	}
}

// Restarted takes note of a board that started anew.
func (s *session) Restarted(_ time.Duration, boots int, why string) {
	s.boots++
	if s.onRestart != nil && !s.cycling {
		s.onRestart()
	}
	s.say(fmt.Sprintf("the board restarted (start %d, %s): running gains and limits are those it starts with; disarmed", boots, why))
}

// Stopped takes the times of a stop that the board has answered.
func (s *session) Stopped(t supervisor.StopTimes) {
	s.lastStop = &t
	s.stops++
	if s.run != nil && s.run.asked && s.run.stop == nil && s.run.started {
		s.run.stop = &t
	}
}

// logMax bounds the lines that the screens can scroll back over; the record has
// them all.
const logMax = 400

func (s *session) say(text string) {
	if s.tapeNote != nil {
		s.tapeNote(text)
	}
	l := s.view.Log
	if len(l) >= logMax {
		l = append([]job.LogLine(nil), l[len(l)-logMax/2:]...)
	}
	s.view.Log = append(l[:len(l):len(l)], job.LogLine{At: s.now, Text: text})
}

// intent does what a person asks for, as far as it is not a matter of steps.
func (s *session) intent(i job.Intent) {
	switch i := i.(type) {
	case job.Arm:
		s.arm(false)
	case job.SayClear:
		s.core.Do(safety.ClearArea{At: s.now})
	case job.Go:
		s.core.Do(safety.Start{At: s.now})
	case job.Disarm:
		s.core.Do(safety.Disarm{At: s.now})
	case job.Acknowledge:
		s.core.Do(safety.Acknowledge{At: s.now})
		if st := s.core.State(); st.Phase != safety.Tripped || st.Trip.Acked {
			s.acknowledged() // the limiter has taken it, or there is nothing to take
		}
	case job.ResetTrip:
		s.core.Do(safety.Reset{At: s.now})
	case job.SetMark:
		s.mark()
	case job.WorkInput:
		s.workInput()
	case job.Shelve:
		s.shelve(i)
	case job.GiveAnswer:
		if s.asking != nil && i.Answer.ID == s.asking.ID {
			a := i.Answer
			s.answer = &a
		}
	case job.Decline:
		if s.run != nil && !s.run.asked {
			s.run.declined = true
		}
		if s.asking != nil {
			s.answer = &job.Answer{ID: -1}
		}
	}
}

// resize steps the size of the plan that is shown, if it waits for its arm and has
// sizes. The job waits meanwhile, so its numbers stand still.
func (s *session) resize(by int) bool {
	r := s.run
	if r == nil || r.asked || r.ended != nil || r.spec.Resize == nil {
		return false
	}
	spec, err := r.spec.Resize(by)
	if err == nil {
		r.admitted, err = s.core.Envelope().Admit(spec.Plan)
	}
	if err != nil {
		refusal := job.RefusalView{Number: 728, What: "another size", Cause: err.Error(), Remedy: "leave the size as it is"}
		if ref, ok := errors.AsType[*job.RefusedError](err); ok {
			refusal = job.RefusalView{Number: ref.Number, What: ref.What, Cause: ref.Cause, Remedy: ref.Remedy}
		}
		s.view.Refusal = &refusal
		return true
	}
	r.spec = spec
	s.show(r)
	return true
}

func (s *session) arm(unattended bool) {
	r := s.run
	if r == nil || r.asked {
		return
	}
	r.asked = true
	s.view.Refusal = nil
	s.core.Do(safety.ArmRequest{At: s.now, Plan: r.admitted, Stops: s.core.State().Stops, Unattended: unattended})
}

func (s *session) mark() {
	s.core.Do(safety.Mark{At: s.now})
	if r := s.run; r != nil && r.started && r.ended == nil {
		t := (s.now - r.begun).Seconds()
		r.marks = append(r.marks, t)
		if s.view.Live != nil {
			l := *s.view.Live
			l.Marks = append(l.Marks[:len(l.Marks):len(l.Marks)], t)
			s.view.Live = &l
		}
	}
}
