package bench

import (
	"bufio"
	"errors"
	"io"
	"time"

	"gainwright/link/simrig"
	"gainwright/link/tape"
	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/supervisor"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// Quanta of virtual time. The wire is looked at every quantum, the console's
// tick comes as often as the live one's. Firmware is given its time in larger
// pieces, as an adapter on USB hands on what comes in: each piece costs a way to
// another process and back.
const (
	quantum       = time.Millisecond
	hostedQuantum = 5 * time.Millisecond
	tickEach      = 10 * time.Millisecond
)

// FarEnd is a board whose time the bench owns: a simulated rig, or firmware on an
// emulated chip whose motor is computed. Nobody can own the time of a real motor,
// so that what may be driven without a person is told by its type.
type FarEnd interface {
	Advance(to time.Duration)
	Receive(b []byte)
	Output() []byte
	PowerCycle()
	Hand(turns float64)
}

// Virtual is a whole bench in one goroutine: a simulated rig, the console's core
// and an operator who does what the screen asks. Equal rigs and seeds give equal
// jobs, byte for byte.
type Virtual struct {
	s      *session
	unit   time.Duration // what step lets pass
	far    FarEnd
	rig    *simrig.Rig // far, where it is a simulated rig; else nil
	wire   virtualWire
	ticked time.Duration
	start  time.Time
	budget time.Duration
	op     operator
	each   func()        // called with every tick; nil but where somebody meddles
	tape   *bufio.Writer // nil: bytes are not kept
	line   []byte
	trial  *trial // nil but in a trial of a fault
}

// budgetMax bounds a virtual job: a step that never ends is a fault of ours, and
// has to show.
const budgetMax = time.Hour

// NewVirtual puts a rig on the bench. start is the time of day that the record
// shows.
func NewVirtual(rig *simrig.Rig, start time.Time) *Virtual {
	c := rig.Config().Board
	return newVirtual(rig, rig, quantum, c.Baud, time.Duration(c.BootMS)*time.Millisecond, start)
}

// NewHosted puts firmware on the bench that runs in a time of its own, and has
// started.
func NewHosted(far FarEnd, baud int, start time.Time) *Virtual {
	return newVirtual(far, nil, hostedQuantum, baud, 0, start)
}

func newVirtual(far FarEnd, rig *simrig.Rig, unit time.Duration, baud int, boot time.Duration, start time.Time) *Virtual {
	v := &Virtual{unit: unit, far: far, rig: rig, start: start, budget: budgetMax}
	v.wire = virtualWire{baud: baud, now: func() time.Duration { return v.s.now }}
	v.s = &session{opened: true}
	v.s.core = supervisor.NewCore(&v.wire, v.s, 1)
	v.s.core.Simulated = true
	v.s.work = func(set []job.InputBit) { WorkInputs(rig, set) }
	v.s.view.Simulated = true
	v.wire.wrote = func(t time.Duration, b []byte) {
		v.s.core.Wrote(t, b)
		v.record(t, tape.ToBoard, b)
	}
	v.run(boot + 100*time.Millisecond)
	return v
}

// Tape keeps every byte from now on in out; end writes what is left of it.
func (v *Virtual) Tape(out io.Writer) (end func() error) {
	w := bufio.NewWriterSize(out, 1<<16)
	v.tape = w
	w.Write(tape.AppendHeader(nil, v.start)) // a bufio.Writer keeps its first error for Flush
	return w.Flush
}

func (v *Virtual) record(t time.Duration, d tape.Dir, b []byte) {
	if v.tape != nil {
		v.line = tape.AppendRecord(v.line[:0], t, d, b)
		v.tape.Write(v.line)
	}
}

// Hands lends a job its hands; record may be nil.
func (v *Virtual) Hands(record *sheet.Sheet) job.Hands { return &hands{engine: v, sheet: record} }

// Now is the virtual time since the start.
func (v *Virtual) Now() time.Duration { return v.s.now }

func (v *Virtual) do(f func(*session)) { f(v.s) }

func (v *Virtual) wall() time.Time { return v.start.Add(v.s.now) }

// errBudget is a job that does not come to an end.
var errBudget = errors.New("bench: the job does not come to an end in an hour of virtual time")

func (v *Virtual) until(limit time.Duration, cond func(*session) bool) error {
	end := v.s.now + limit
	for !cond(v.s) {
		if limit > 0 && v.s.now >= end {
			return errLimit
		}
		if v.s.now > v.budget {
			return errBudget
		}
		v.step()
	}
	return nil
}

func (v *Virtual) cycle() bool {
	v.far.PowerCycle()
	return true
}

func (v *Virtual) run(d time.Duration) {
	for end := v.s.now + d; v.s.now < end; {
		v.step()
	}
}

// step lets one quantum pass: lines reach the board, the board works, its bytes
// reach the console, the console ticks, the operator acts.
func (v *Virtual) step() {
	v.s.now += v.unit
	if v.trial != nil && v.trial.step(v) {
		return
	}
	for {
		at, b, ok := v.wire.next(v.s.now)
		if !ok {
			break
		}
		v.far.Advance(at)
		v.far.Receive(v.trial.toBoard(b))
	}
	v.far.Advance(v.s.now)
	if b := v.trial.fromBoard(v.far.Output()); len(b) > 0 {
		v.record(v.s.now, tape.FromBoard, b)
		v.s.core.Bytes(v.s.now, b)
	}
	if v.s.now-v.ticked >= tickEach && !v.trial.heldUp(v.s.now) {
		v.ticked = v.s.now
		v.trial.lease(v)
		v.s.core.Tick(v.s.now)
		if v.each != nil {
			v.each()
		}
		v.s.provoke()
		v.s.watchAlarms()
		v.op.act(v)
	}
}

// virtualWire is a line of the board's baud rate. A stop goes ahead of what has
// not begun to leave, as the real writer's does.
type virtualWire struct {
	baud  int
	now   func() time.Duration
	wrote func(time.Duration, []byte)
	queue []flight
	free  time.Duration // when the line is free again
}

type flight struct {
	at   time.Duration // when its last byte has arrived
	from time.Duration // when its first byte leaves
	data []byte
}

func (w *virtualWire) Stop(b []byte) uint64 {
	now := w.now()
	keep := w.queue[:0]
	w.free = now
	for _, f := range w.queue {
		if f.from <= now {
			keep = append(keep, f)
			w.free = f.at
		}
	}
	w.queue = keep
	w.put(b)
	return 0
}

func (w *virtualWire) Motion(b []byte) error  { w.put(b); return nil }
func (w *virtualWire) Request(b []byte) error { w.put(b); return nil }

func (w *virtualWire) put(b []byte) {
	from := max(w.free, w.now())
	w.free = from + time.Duration(len(b))*10*time.Second/time.Duration(w.baud)
	w.queue = append(w.queue, flight{at: w.free, from: from, data: append([]byte(nil), b...)})
}

// next takes the line that has arrived by now, if one has.
func (w *virtualWire) next(now time.Duration) (at time.Duration, b []byte, ok bool) {
	if len(w.queue) == 0 || w.queue[0].at > now {
		return 0, nil, false
	}
	f := w.queue[0]
	w.queue = w.queue[1:]
	if w.wrote != nil {
		w.wrote(f.at, f.data)
	}
	return f.at, f.data, true
}

// operator is the person of a virtual bench: answers what is asked, arms what is
// shown, after the times that the console insists on.
type operator struct {
	says         func(*job.Question) *job.Answer // answers of its own; nil: what is asked for
	asked        int
	askAt        time.Duration
	turned       bool
	refusedSince time.Duration
	triedAt      time.Duration
	attends      bool // sits at a terminal: frames have to reach it
	leaves       bool // arms and goes away
}

// Times of the operator, in virtual time.
const (
	readingTime = 300 * time.Millisecond
	turningTime = 2600 * time.Millisecond
	stopAfter   = 1500 * time.Millisecond
	patience    = 4 * time.Minute // a flywheel coasts for long
	givesUp     = time.Minute
	inchesMade  = 3
)

func (o *operator) act(v *Virtual) {
	s := v.s
	if q := s.asking; q != nil && s.answer == nil {
		o.question(v, q)
	}
	if r := s.run; r != nil {
		o.drive(s, r)
	}
}

func (o *operator) question(v *Virtual, q *job.Question) {
	s := v.s
	if q.ID != o.asked {
		o.asked, o.askAt, o.turned = q.ID, s.now, false
	}
	waited := s.now - o.askAt
	if waited < readingTime {
		return
	}
	if waited > givesUp {
		s.intent(job.Decline{})
		return
	}
	if o.says != nil {
		if a := o.says(q); a != nil {
			a.ID = q.ID
			s.answer = a
			return
		}
	}
	switch st := s.core.State(); {
	case q.Override:
		s.intent(job.Decline{})
	case q.Kind == job.AskHandTurn && !o.turned:
		v.far.Hand(1)
		o.turned = true
	case q.Kind == job.AskHandTurn && waited < turningTime:
	case q.Kind == job.AskStopKey:
		if !o.turned {
			o.turned = true
			s.core.Stop(s.now, safety.ByStopKey)
		}
	case q.Kind == job.AskPower:
	case q.Kind == job.AskInput:
		s.workInput()
	case q.Kind == job.AskChoice:
		s.answer = &job.Answer{ID: q.ID, Yes: true, Text: q.Default}
	case st.Phase == safety.Tripped:
		s.intent(job.Acknowledge{})
		s.intent(job.ResetTrip{})
	case q.Kind == job.AskEnter && st.Last.State == protocol.Tripped:
		// The board's own trip is being cleared.
	default:
		s.answer = &job.Answer{ID: q.ID, Yes: true, Text: q.Want}
		if q.Want == "" {
			s.answer.Text = q.Default
		}
		if q.Kind == job.AskText && s.answer.Text == "" {
			s.answer.Text = "sim" // initials of the virtual operator
		}
	}
}

func (o *operator) drive(s *session, r *running) {
	st := s.core.State()
	switch {
	case r.ended != nil:
	case !r.asked:
		if o.refusedSince == 0 {
			o.refusedSince = s.now
		}
		if s.now-o.refusedSince > patience {
			r.declined, o.refusedSince = true, 0
			return
		}
		if st.Phase == safety.Disarmed && s.now-o.triedAt >= 200*time.Millisecond {
			o.triedAt = s.now
			s.arm(!o.attends)
		}
	case st.Phase == safety.Armed && st.Inches > 0:
		switch {
		case st.Inches == inchesMade:
			s.intent(job.Disarm{})
		case st.Last.Speed == 0 && s.now-o.triedAt >= time.Second:
			o.triedAt = s.now
			s.intent(job.Go{})
		}
	case st.Phase == safety.Armed:
		o.refusedSince = 0
		if s.now-st.ArmedAt >= safety.ClearWait && !o.leaves {
			s.intent(job.SayClear{})
			s.intent(job.Go{})
		}
	case st.Phase == safety.Running && r.spec.Plan.Check == safety.CheckStop && r.started && s.now-r.begun > stopAfter && r.stop == nil:
		s.core.Stop(s.now, safety.ByStopKey)
	}
}
