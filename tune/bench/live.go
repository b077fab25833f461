package bench

import (
	"context"
	"sync"
	"sync/atomic"
	"time"

	"gainwright/link"
	"gainwright/link/tape"
	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/safety/supervisor"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// Live is a bench on a real line: the same session as in virtual time, owned by
// one goroutine, with others around it that never make it wait.
type Live struct {
	opt   Options
	start time.Time
	s     *session
	h     *hands
	job   *job.Job

	rx       chan chunk
	spent    chan []byte // what chunks were in, for others
	calm     atomic.Bool // disarmed, and no step in work
	mail     chan func(*session)
	urgent   chan func(*session) // what stops: it goes ahead of mail and of what the board says
	steps    chan func(*job.Job)
	over     chan struct{}
	gone     chan struct{} // closed when the session's goroutine has ended
	overOnce sync.Once
	done     sync.WaitGroup
	waiters  []*waiter

	view     atomic.Pointer[job.View]
	phase    atomic.Int32
	style    atomic.Int32 // 1: the stop key asks for a ramp first
	leaseAt  atomic.Int64
	cutWrote atomic.Int64
	rxLost   atomic.Uint64
	line     atomic.Pointer[liveLine]
	tape     *tape.Writer
	late     *lateFile
	wallWas  time.Time
	monoWas  time.Duration
	shownAt  time.Duration
	path     string
	opening  atomic.Bool
	cutOwed  atomic.Bool  // a stop was asked for while no line was open
	asked    atomic.Int64 // what was ever put into urgent
	heeded   int64        // what the session has taken from it
}

type chunk struct {
	at   time.Duration
	data []byte
	line *liveLine
	err  error // the port is gone
}

type waiter struct {
	cond func(*session) bool
	end  time.Duration // 0: none
	done chan error
}

// liveLine is one opening of a port.
type liveLine struct {
	port   link.Port
	writer *link.Writer
	cancel context.CancelFunc
}

// Bounds of the mailboxes. A full one means that the session's goroutine has not
// run for long: bytes are counted as lost, which telemetry's age then shows.
const (
	rxMax     = 1024
	spentMax  = 16
	mailMax   = 256
	urgentMax = 64
)

// NewLive starts a live bench. Nothing is opened yet.
func NewLive(opt Options) *Live {
	l := &Live{opt: opt, start: time.Now(), rx: make(chan chunk, rxMax), spent: make(chan []byte, spentMax), mail: make(chan func(*session), mailMax), urgent: make(chan func(*session), urgentMax),
		steps: make(chan func(*job.Job), 4), over: make(chan struct{}), gone: make(chan struct{}), late: &lateFile{}}
	l.s = &session{}
	l.s.core = supervisor.NewCore(liveWire{l}, l.s, uint16(l.start.UnixNano()>>10))
	l.s.core.Simulated = opt.Simulated
	if opt.Watch != nil {
		l.s.core.Watch = func(e safety.Event, out []safety.Effect) { st := l.s.core.State(); opt.Watch(&st, e, out) }
	}
	l.s.view = job.View{Program: opt.Program, Simulated: opt.Simulated, Rig: opt.Job.Rig.Name, Hand: opt.Hand != nil}
	l.s.view.Link.State = job.NoPort
	l.s.work, l.s.laptop = opt.Work, opt.Laptop
	l.s.onRestart = func() { l.step(func(j *job.Job) { _ = j.Again() }) }
	l.s.tapeNote = func(text string) { l.tape.Remark(l.now(), text) }
	l.tape = tape.NewWriter(l.late, tape.Config{Start: l.start, OnPanic: l.panicked, OnError: func(err error) {
		l.post(func(s *session) { s.core.Do(safety.TapeFailed{At: s.now, Why: err.Error()}) })
	}})
	l.h = &hands{engine: l, late: l.late, atClose: opt.AtClose}
	if opt.NewSheet != nil {
		l.h.open = func(board string) (*sheet.Sheet, error) { return opt.NewSheet(board, l.job.Rig) }
	}
	l.wallWas, l.monoWas = l.start.Round(0), 0
	if opt.Ports != nil {
		l.s.view.Ports = opt.Ports()
	}
	l.publish()
	l.goes(l.supervise)
	opt.Job.Attended = true
	l.job = job.New(l.h, opt.Job)
	l.goes(l.work)
	return l
}

// goes starts a goroutine of ours. If it panics, a stop goes out first.
func (l *Live) goes(f func()) {
	l.done.Add(1)
	go func() {
		defer l.done.Done()
		link.WithPanicHook(l.panicked, f)
	}()
}

func (l *Live) panicked(v any, stack []byte) {
	if line := l.line.Load(); line != nil {
		sent := line.writer.Stats().StopsSent
		l.cut()
		time.Sleep(20 * time.Millisecond) // for the byte to leave; the program ends after this
		if line.writer.Stats().StopsSent == sent {
			// The writer itself is what broke: the byte goes past it, from a goroutine
			// that may hang or break as it likes.
			go func() {
				defer func() { _ = recover() }()
				_, _ = line.port.Write([]byte{protocol.Cut})
			}()
			time.Sleep(20 * time.Millisecond)
		}
	}
	if l.opt.OnPanic != nil {
		l.opt.OnPanic(v, stack)
	}
}

func (l *Live) now() time.Duration { return time.Since(l.start) }

// Alive renews the lease of the screen.
func (l *Live) Alive() { l.leaseAt.Store(int64(l.now())) }

// View is what the screens show now. It is never written again.
func (l *Live) View() *job.View { return l.view.Load() }

// post hands f to the session without waiting. If the mailbox is full the
// session has hung; the stop byte has gone out already where it matters.
func (l *Live) post(f func(*session)) bool {
	select {
	case l.mail <- f:
		return true
	default:
		return false
	}
}

func (l *Live) do(f func(*session)) {
	ran := make(chan struct{})
	select {
	case l.mail <- func(s *session) { f(s); close(ran) }:
	case <-l.over:
		return
	}
	select {
	case <-ran:
	case <-l.gone: // the session's goroutine has ended: f does not run, and is not running
	}
}

func (l *Live) until(limit time.Duration, cond func(*session) bool) error {
	w := &waiter{cond: cond, done: make(chan error, 1)}
	l.do(func(s *session) {
		if limit > 0 {
			w.end = s.now + limit
		}
		l.waiters = append(l.waiters, w)
	})
	select {
	case err := <-w.done:
		return err
	case <-l.over:
		return job.ErrOver
	}
}

// notLate is a stamp made in another goroutine, no older than the limiter takes
// without calling it a clock that went back.
func (s *session) notLate(at time.Duration) time.Duration {
	return min(max(at, s.now-safety.LateEvent/2), s.now)
}

func (l *Live) wall() time.Time { return l.start.Round(0).Add(l.now()) }

// cycle leaves it to the person to switch the board's power.
func (l *Live) cycle() bool { return false }

// supervise is the goroutine that owns the drive.
func (l *Live) supervise() {
	defer close(l.gone)
	pace := restTickEach
	tick := time.NewTicker(pace)
	defer tick.Stop()
	for {
		if want := l.tickEach(); want != pace {
			pace = want
			tick.Reset(pace)
			l.calm.Store(pace == restTickEach)
		}
		select {
		case <-l.over:
			return
		case c := <-l.rx:
			l.enter()
			l.received(c)
		case f := <-l.mail:
			l.enter()
			f(l.s)
		case <-tick.C:
			l.enter()
			l.tick()
		case f := <-l.urgent:
			l.s.now = l.now()
			f(l.s)
			l.heeded++
			l.enter() // after it, so that the byte's instant finds its stop
		}
		l.leave()
	}
}

// restTickEach is how often the limiter looks at its clock while it is disarmed
// and no step is in work: then it only waits for the link to age.
const restTickEach = 40 * time.Millisecond

// While it is so, a line that says little is read less often: up to calmRead
// after the bytes came, and never by more of them than calmBytes in that time.
const (
	calmRead  = 20 * time.Millisecond
	calmBytes = 512
)

func (l *Live) pause(n int) time.Duration {
	if n > calmBytes || !l.calm.Load() {
		return 0
	}
	return calmRead
}

func (l *Live) tickEach() time.Duration {
	if l.s.core.Phase() == safety.Disarmed && len(l.waiters) == 0 {
		return restTickEach
	}
	return tickEach
}

func (l *Live) enter() {
	l.s.now = l.now()
	l.heed()
	if t := l.cutWrote.Swap(0); t != 0 {
		l.s.core.Wrote(time.Duration(t), []byte{protocol.Cut})
	}
}

func (l *Live) leave() {
	keep := l.waiters[:0]
	for _, w := range l.waiters {
		switch {
		case w.cond(l.s):
			w.done <- nil
		case w.end > 0 && l.s.now >= w.end:
			w.done <- errLimit
		default:
			keep = append(keep, w)
		}
	}
	l.waiters = keep
	phase := l.s.core.Phase()
	if old := safety.Phase(l.phase.Swap(int32(phase))); old != phase || l.s.now-l.shownAt > 15*time.Millisecond {
		l.publish()
	}
	ramp := int32(0)
	if l.s.core.Ramps() {
		ramp = 1
	}
	l.style.Store(ramp)
}

func (l *Live) publish() {
	l.shownAt = l.s.now
	l.view.Store(l.s.snapshot())
}

func (l *Live) received(c chunk) {
	if c.line != l.line.Load() {
		return // from a port that was given up
	}
	if c.err != nil {
		l.lost(c.err.Error())
		return
	}
	l.s.core.Bytes(l.s.now, c.data)
	select {
	case l.spent <- c.data[:0]:
	default:
	}
}

// piece is a slice that a chunk was in, or a new one.
func (l *Live) piece() []byte {
	select {
	case b := <-l.spent:
		return b
	default:
		return nil
	}
}

// clockSlack is by how much the two clocks may part between two ticks before it
// counts as a sleep of the laptop or a step of its clock.
const clockSlack = 700 * time.Millisecond

func (l *Live) tick() {
	s := l.s
	wall := time.Now().Round(0)
	switch drift := wall.Sub(l.wallWas) - (s.now - l.monoWas); {
	case drift > clockSlack:
		s.core.Do(safety.Wake{At: s.now})
	case drift < -clockSlack:
		s.core.Do(safety.ClockJump{At: s.now})
	}
	l.wallWas, l.monoWas = wall, s.now
	if t := time.Duration(l.leaseAt.Swap(0)); t > 0 {
		s.core.Do(safety.Lease{At: s.notLate(t)})
	}
	wasLost := s.core.Link().Lost
	s.core.Tick(s.now)
	s.provoke()
	s.watchAlarms()
	if !wasLost && s.core.Link().Lost {
		l.giveUp()
	}
	if s.core.Link().Lost && !l.opening.Load() && l.path != "" {
		l.reopen()
	}
}

// work is the goroutine of the job: one step after another.
func (l *Live) work() {
	for {
		select {
		case <-l.over:
			return
		case f := <-l.steps:
			f(l.job)
		}
	}
}

// step hands something to the job's goroutine, unless one step is in work.
func (l *Live) step(f func(*job.Job)) {
	select {
	case l.steps <- f:
	default:
		l.post(func(s *session) { s.say("a step is in work: end it first") })
	}
}

// closeWait is how long leaving waits for the board's word that its output is
// off, and for the disk.
const closeWait = time.Second

// Close stops the motor, waits for the board's word, ends the record and the
// session. It returns the folder of the record and its first error.
func (l *Live) Close() (dir string, err error) {
	l.Stop(safety.ByQuit)
	off := make(chan struct{})
	go func() {
		defer close(off)
		_ = l.until(closeWait, func(s *session) bool {
			return s.core.Link().Lost || !s.core.Link().Connected || s.core.State().BoardOff() && !s.core.State().Phase.ArmHeld()
		})
	}()
	select {
	case <-off:
	case <-time.After(2 * closeWait): // the session hangs: the program ends all the same, and the board's timeout acts
	}
	l.overOnce.Do(func() { close(l.over) })
	if line := l.line.Swap(nil); line != nil {
		line.cancel()
		go line.port.Close()
	}
	ctx, cancel := context.WithTimeout(context.Background(), closeWait)
	defer cancel()
	err = l.tape.Close(ctx)
	return l.h.closeRecord(err)
}
