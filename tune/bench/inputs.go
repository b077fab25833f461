package bench

import (
	"strings"
	"time"

	"gainwright/link/simrig"
	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/job"
)

// Input shows the question until the board reports the inputs as asked for. A
// person can put it aside.
func (h *hands) Input(q job.Question) (at time.Duration, err error) {
	q.Kind = job.AskInput
	h.do(func(s *session) {
		s.askID++
		q.ID = s.askID
		s.asking, s.answer = &q, nil
	})
	declined, lost := false, false
	err = h.until(0, func(s *session) bool {
		declined = s.answer != nil && s.answer.ID < 0
		lost = s.core.Link().Lost
		at = s.now
		st := s.core.State()
		return declined || lost || st.Heard && reports(st.Last, q.Set)
	})
	h.do(func(s *session) { s.asking, s.answer = nil, nil })
	switch {
	case err != nil:
		return at, err
	case declined:
		return at, job.ErrDeclined
	case lost:
		return at, &job.RefusedError{Number: int(safety.CodeLinkLost), What: q.Text, Cause: "link lost", Remedy: "look at cable and power; then start again at the identity"}
	}
	return at, nil
}

// reports says whether the board's newest word on its inputs is that of set.
func reports(s protocol.Sample, set []job.InputBit) bool {
	if !s.Slow.Seen {
		return false
	}
	for _, b := range set {
		if s.Slow.Inputs>>b.Bit&1 == 1 != b.Working {
			return false
		}
	}
	return true
}

// Laptop tells what the system tells; nobody reads it in virtual time.
func (h *hands) Laptop() (l job.Laptop) {
	var read func() job.Laptop
	h.do(func(s *session) { read = s.laptop })
	if read == nil {
		return l
	}
	l = read() // here, where a slow disk holds nobody up
	grave, _ := l.Words()
	h.do(func(s *session) { s.laptopWords = strings.Join(grave, "; ") })
	return l
}

// provokeAfter is when, in a run, somebody works the input that the run is for, on
// a simulated rig.
const provokeAfter = 1500 * time.Millisecond

// provoke has the inputs worked that the run in hand asks for, once it is under way.
func (s *session) provoke() {
	r := s.run
	if r == nil || s.work == nil || r.provoked || !r.started || s.now-r.begun < provokeAfter || len(r.spec.Provoke) == 0 {
		return
	}
	r.provoked = true
	s.work(r.spec.Provoke)
}

// workInput does on a simulated rig what the question asks a person to do.
func (s *session) workInput() {
	if q := s.asking; q != nil && q.Kind == job.AskInput && s.work != nil {
		s.work(q.Set)
	}
}

// inputViews completes the interlock table with how each input stands now.
func (s *session) inputViews() []job.InterlockView {
	rows := append([]job.InterlockView(nil), s.view.Interlocks...)
	env, st := s.core.Envelope(), s.core.State()
	if len(rows) == 0 {
		for _, in := range env.Inputs {
			rows = append(rows, job.InterlockView{Name: in.Name, Bit: int(in.Bit)})
		}
		if env.Enabling.Listed {
			rows = append(rows, job.InterlockView{Name: env.Enabling.Name, Bit: int(env.Enabling.Bit)})
		}
	}
	for i := range rows {
		r := &rows[i]
		switch {
		case !st.Heard || !st.Last.Slow.Seen:
			r.Now = "not known"
		case env.Enabling.Listed && r.Bit == int(env.Enabling.Bit):
			r.Now = env.Enabling.Position(st.Last).String()
		case st.Last.Slow.Inputs>>r.Bit&1 == 1:
			r.Now = "working position"
		default:
			r.Now = "OPEN"
		}
	}
	return rows
}

// awaitsLog reports whether the board's own record of the stop is worth waiting
// for: it tripped, or an input was to stop it.
func awaitsLog(r *running) bool {
	e := r.ended
	if r.spec.Plan.Check == safety.CheckInterlock {
		return e.Reason == safety.EndTripped || e.Reason == safety.EndStopped && e.Cause.Code == safety.CodeEnabling
	}
	return e.Reason == safety.EndTripped && e.Cause.Code == safety.CodeBoardTripped
}

// WorkInputs puts inputs of a simulated rig as they are asked for.
func WorkInputs(r *simrig.Rig, set []job.InputBit) {
	names := r.Config().Board.Inputs
	for _, b := range set {
		if int(b.Bit) < len(names) {
			r.SetInput(names[b.Bit], b.Working)
		}
	}
}
