package bench

import (
	"errors"
	"fmt"
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/supervisor"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// engine is where a session lives: the same goroutine in virtual time, one of
// its own on a real line.
type engine interface {
	// do runs f where the session lives and waits for it.
	do(f func(s *session))
	// until waits until cond holds, looked at where the session lives after
	// everything that happens. limit 0 waits for ever. It returns job.ErrOver
	// when the session ends and errLimit when the limit has passed.
	until(limit time.Duration, cond func(s *session) bool) error
	wall() time.Time
	// cycle has the board's power switched; it returns false where a person has to.
	cycle() bool
}

var errLimit = errors.New("bench: nothing came of it in time")

var errBoardTripped = errors.New("the board holds a trip: it has to be reset first")

// hands lends a job its hands over an engine.
type hands struct {
	engine
	sheet *sheet.Sheet // nil until there is one
	open  func(board string) (*sheet.Sheet, error)
	late  *lateFile

	outcome, reason string
	atClose         func() (name string, v any) // a last entry; nil: none
}

func (h *hands) Now() (t time.Duration) {
	h.do(func(s *session) { t = s.now })
	return t
}

func (h *hands) Wall() time.Time { return h.wall() }

func (h *hands) Ask(q job.Question) (job.Answer, error) {
	var id int
	h.do(func(s *session) {
		s.askID++
		q.ID, id = s.askID, s.askID
		s.asking, s.answer = &q, nil
	})
	err := h.until(0, func(s *session) bool { return s.answer != nil })
	var a job.Answer
	h.do(func(s *session) {
		if s.answer != nil {
			a = *s.answer
		}
		s.asking, s.answer = nil, nil
	})
	if err == nil && a.ID != id {
		err = job.ErrDeclined
	}
	return a, err
}

func (h *hands) Request(verb, args string) (protocol.Answer, error) {
	var got *protocol.Answer
	h.do(func(s *session) {
		s.core.Ask(s.now, protocol.Request{Verb: verb, Args: args}, func(a protocol.Answer) { got = &a })
	})
	if err := h.until(10*time.Second, func(*session) bool { return got != nil }); err != nil {
		return protocol.Answer{}, err
	}
	return *got, got.AsError()
}

func (h *hands) Connected(id protocol.Identity, look string) {
	h.do(func(s *session) { s.core.Connected(s.now, id, look) })
}

func (h *hands) Stream(on bool) { h.do(func(s *session) { s.core.Streaming(s.now, on) }) }

func (h *hands) Rig(env safety.Envelope) { h.do(func(s *session) { s.core.SetEnvelope(s.now, env) }) }

func (h *hands) Look(l safety.LookAhead) { h.do(func(s *session) { s.core.Look(l) }) }

func (h *hands) LimitsHeld(crc uint16) { h.do(func(s *session) { s.core.LimitsHeld(s.now, crc) }) }

func (h *hands) Check(c safety.Check, passed bool) {
	h.do(func(s *session) {
		if passed {
			s.core.Do(safety.CheckPassed{At: s.now, Check: c})
		} else {
			s.core.Do(safety.CheckFailed{At: s.now, Check: c})
		}
	})
}

// How long a permission is asked for again: where the shaft has to come to rest, as
// long as one may coast; else for what comes by itself, such as the clearing of
// the board's own trip.
const (
	coastMax  = 4 * time.Minute
	permitMax = 5 * time.Second
)

// Permit asks again while what is in the way may pass by itself.
func (h *hands) Permit(e safety.Event) error {
	var err error
	began := h.Now()
	wait := h.until(coastMax, func(s *session) bool {
		if s.now-began > permitMax {
			// A trip of the board can only be cleared at rest, too.
			no, ok := errors.AsType[*supervisor.NotNow](err)
			if !errors.Is(err, errBoardTripped) && !(ok && no.Cause.Code == safety.CodeMoving) {
				return true
			}
			s.view.Busy = "waiting for the shaft to come to rest"
		}
		if st := s.core.State(); st.Phase == safety.Disarmed && st.Heard && st.Last.State == protocol.Tripped {
			err = errBoardTripped
			return false
		}
		err = s.core.Permit(stamp(e, s.now))
		return err == nil
	})
	h.do(func(s *session) { s.view.Busy = "" })
	if wait != nil && !errors.Is(wait, errLimit) {
		return wait
	}
	return err
}

func stamp(e safety.Event, now time.Duration) safety.Event {
	switch e := e.(type) {
	case safety.GainWrite:
		e.At = now
		return e
	case safety.LimitWrite:
		e.At = now
		return e
	}
	panic(fmt.Sprintf("bench: %T asks for no permission", e))
}

func (h *hands) Wrote(ok bool) {
	h.do(func(s *session) { s.core.Do(safety.WriteDone{At: s.now, OK: ok}) })
}

func (h *hands) Line() (l job.LineState) {
	h.do(func(s *session) { l = job.LineState{Stats: s.core.Link().Stats, Restarts: s.boots - s.expected} })
	return l
}

// cutAnswer is how long a board may take to answer a cut; SPEC asks for
// milliseconds, and a slow line adds a few.
const cutAnswer = 2 * time.Second

func (h *hands) StopKey(q job.Question) (job.StopSeen, error) {
	before, asked, since := 0, uint(0), time.Duration(0)
	h.do(func(s *session) {
		s.askID++
		q.ID = s.askID
		s.asking, s.answer = &q, nil
		before, asked = s.stops, s.core.State().Stops
	})
	mute := false
	err := h.until(0, func(s *session) bool {
		if since == 0 && s.core.State().Stops > asked {
			since = s.now
		}
		mute = since > 0 && s.now-since > cutAnswer && s.stops == before
		return mute || s.answer != nil || s.stops > before && s.lastStop.Source == safety.ByStopKey
	})
	if mute && err == nil {
		err = job.ErrNoCut
	}
	var seen job.StopSeen
	h.do(func(s *session) {
		s.asking = nil
		if s.answer != nil {
			err = errors.Join(err, job.ErrDeclined)
		} else if s.lastStop != nil && err == nil {
			seen = stopSeen(s)
		}
		s.answer = nil
	})
	return seen, err
}

func stopSeen(s *session) job.StopSeen {
	t := s.lastStop
	wire := max(t.Wire, t.Asked)
	return job.StopSeen{KeyToWire: wire - t.Asked, WireToBoard: t.Answer - wire, Cuts: t.Count}
}

func (h *hands) ClearTrip(q job.Question) error {
	h.do(func(s *session) { s.askID++; q.ID = s.askID; s.asking, s.answer = &q, nil })
	// Both the console's trip and the board's have to be gone.
	declined, gone, restarts := false, false, h.Line().Restarts
	err := h.until(0, func(s *session) bool {
		st := s.core.State()
		if gone = s.boots-s.expected > restarts || s.core.Link().Lost; gone {
			return true
		}
		if declined = s.answer != nil && s.answer.ID < 0; declined {
			return true
		}
		return st.Phase == safety.Disarmed && st.Heard && st.Last.State == protocol.Off && !st.Last.TripHeld
	})
	h.do(func(s *session) { s.asking, s.answer = nil, nil })
	switch {
	case err != nil:
	case h.Line().Restarts > restarts:
		return h.restarted(q.Text)
	case gone && h.beganAnew():
		return h.restarted(q.Text)
	case gone:
		return &job.RefusedError{Number: int(safety.CodeLinkLost), What: q.Text, Cause: "link lost", Remedy: "look at cable and power; then start again at the identity"}
	case declined:
		// A trip that cannot be cleared may be a board that hears nothing.
		if _, err := h.Request(protocol.VerbID, ""); errors.Is(err, protocol.ErrNoAnswer) {
			return err
		}
		return job.ErrDeclined
	}
	return err
}

// beganAnew asks a board that went silent whether it has started since; that
// counts as a restart, if one that was not heard.
func (h *hands) beganAnew() bool {
	a, _ := h.Request(protocol.VerbID, "")
	id, err := protocol.ParseIdentity(a.Lines)
	if err != nil {
		return false
	}
	h.do(func(s *session) {
		if id.Boots != s.core.Identity().Boots && s.boots == s.expected {
			s.boots++
		}
	})
	return h.Line().Restarts > 0
}

// restarted refuses what goes on with a board that has begun anew.
func (h *hands) restarted(what string) error {
	return &job.RefusedError{Number: 727, What: what, Cause: fmt.Sprintf("the board restarted by itself, %d times in this session", h.Line().Restarts),
		Remedy: "look for dips of its supply and for a watchdog; then start again at the identity"}
}

func (h *hands) Watch(d time.Duration) ([]protocol.Sample, error) {
	w := &watch{}
	var end time.Duration
	h.do(func(s *session) { s.watching = w; end = s.now + d })
	err := h.until(0, func(s *session) bool { return s.now >= end })
	h.do(func(s *session) { s.watching = nil })
	return w.samples, err
}

func (h *hands) PowerCycle(q job.Question) error {
	before, boots := 0, uint16(0)
	h.do(func(s *session) {
		s.cycling = true
		before, boots = s.boots, s.core.Identity().Boots
		s.askID++
		q.ID = s.askID
		s.asking, s.answer = &q, nil
	})
	h.Stream(false) // silence is what is asked for
	h.cycle()
	err := h.restart(before, boots)
	h.do(func(s *session) { s.expected += s.boots - before; s.asking, s.answer, s.cycling = nil, nil, false })
	return err
}

// restart waits for a board to start anew. It says so itself, but its first line
// may be lost with the half line that the power cut off, so it is asked as well.
func (h *hands) restart(before int, boots uint16) error {
	for {
		declined := false
		err := h.until(1500*time.Millisecond, func(s *session) bool {
			declined = s.answer != nil && s.answer.ID < 0
			return declined || s.boots > before
		})
		switch {
		case declined:
			return job.ErrDeclined
		case !errors.Is(err, errLimit):
			return err
		}
		a, err := h.Request(protocol.VerbID, "")
		if errors.Is(err, job.ErrOver) {
			return err
		}
		if id, err := protocol.ParseIdentity(a.Lines); err == nil && id.Boots != boots {
			return nil
		}
	}
}

// Run shows a plan, waits for its arm, its start and its end, and fetches what
// the board captured.
func (h *hands) Run(spec job.Run) (job.Result, error) {
	r := &running{spec: spec}
	var err error
	h.do(func(s *session) {
		if r.admitted, err = s.core.Envelope().Admit(spec.Plan); err == nil {
			s.show(r)
		}
	})
	if err != nil {
		return job.Result{}, err
	}
	if spec.Capture != nil {
		args := fmt.Sprintf("arm %d %d %d", spec.Capture.Decimation, spec.Capture.Before, spec.Capture.Count)
		if _, err := h.Request(protocol.VerbCap, args); err != nil {
			h.put(r)
			return job.Result{}, err
		}
	}
	// The run is over for the job once the limiter is at rest again or tripped; a
	// silence check's verdict comes a moment later.
	err = h.until(0, func(s *session) bool {
		if r.declined {
			return true
		}
		// An arm that lapsed or was lost before the run began can be asked for again.
		if r.asked && r.ended == nil && s.core.State().Phase == safety.Disarmed {
			r.asked = false
		}
		// A board that still sees its shaft turn is asked again later.
		if e := r.ended; e != nil && !e.Started && e.Cause.Code == safety.CodeBoardRefused && strings.Contains(e.Cause.Words, protocol.RefMoving.String()) {
			s.view.Refusal = &job.RefusalView{Number: int(e.Cause.Code), What: "arm refused", Cause: e.Cause.Words, Remedy: "wait until the shaft is at rest, then arm again"}
			r.ended, r.asked, r.refused, r.samples = nil, false, &e.Cause, nil
		}
		return r.ended != nil && !s.core.State().Phase.ArmHeld() && s.core.State().Phase != safety.Stopping
	})
	if err == nil && !r.declined && spec.Plan.Check == safety.CheckSilence && r.ended.Reason == safety.EndSilence {
		err = h.wait(3*time.Second, func(*session) bool { return r.judged != nil })
	}
	if err == nil && !r.declined && awaitsLog(r) {
		err = h.wait(2*time.Second, func(*session) bool { return r.board != nil })
	}
	h.put(r)
	if err != nil {
		return job.Result{}, err
	}
	if r.declined && r.refused != nil && h.Line().Restarts > 0 {
		return job.Result{}, h.restarted(spec.Plan.Name)
	}
	if r.declined && r.refused != nil {
		return job.Result{}, &job.RefusedError{Number: int(r.refused.Code), What: "arm refused", Cause: r.refused.Words, Remedy: r.refused.Do}
	}
	if r.declined {
		return job.Result{}, job.ErrDeclined
	}
	res := h.result(r)
	if spec.Capture != nil && r.ended.Reason == safety.EndDone {
		if res.Capture, err = h.upload(spec); err != nil {
			h.Say("capture not read: %v; telemetry is used", err)
		}
	}
	return res, nil
}

// wait is until with a limit that is no error.
func (h *hands) wait(limit time.Duration, cond func(*session) bool) error {
	err := h.until(limit, cond)
	if errors.Is(err, errLimit) {
		return nil
	}
	return err
}

func (h *hands) put(r *running) {
	h.do(func(s *session) {
		if s.run == r {
			s.run = nil
		}
	})
}

func (h *hands) result(r *running) job.Result {
	e := r.ended
	res := job.Result{Name: e.Name, Reason: e.Reason, Cause: e.Cause, Started: e.Started, Begun: r.begun, Lasted: e.Lasted,
		Samples: r.samples, Judged: r.judged, Marks: r.marks}
	if r.stop != nil {
		wire := max(r.stop.Wire, r.stop.Asked)
		res.Stop = &job.StopSeen{KeyToWire: wire - r.stop.Asked, WireToBoard: r.stop.Answer - wire, Cuts: r.stop.Count}
	}
	if r.board != nil {
		res.BoardStop = &job.BoardStop{Cause: r.board.Cause, SpeedRadS: r.board.Speed, SinceBeat: r.board.SinceBeat(), SeenUS: r.board.SeenUS, OffUS: r.board.OffUS}
	}
	return res
}

func (h *hands) Show(f func(*job.View)) { h.do(func(s *session) { f(&s.view) }) }

func (h *hands) Say(format string, args ...any) {
	text := fmt.Sprintf(format, args...)
	h.do(func(s *session) { s.say(text) })
}

func atoi(s string) int {
	n, err := strconv.Atoi(s)
	if err != nil {
		return -1
	}
	return n
}
