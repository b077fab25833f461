package bench

import (
	"context"
	"errors"
	"time"

	"gainwright/link"
	"gainwright/link/tape"
	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/job"
)

// lost ends a line whose port is gone.
func (l *Live) lost(why string) {
	l.s.core.LinkLost(l.s.now, why)
	l.giveUp()
}

func (l *Live) giveUp() {
	if line := l.line.Swap(nil); line != nil {
		line.cancel()
		go line.port.Close() // a Close may hang with its device
	}
	s := l.s
	s.opened = false
	s.view.Refusal = &job.RefusalView{Number: int(safety.CodeLinkLost), What: "LINK LOST", Cause: s.core.Link().LostWhy,
		Remedy: "watch the shaft; use the E-stop if it turns. The board is looked for by its id, on its port and on ports that come; nothing is resumed"}
}

// reopenEvery is how often a port that was lost is looked for.
const reopenEvery = 500 * time.Millisecond

// reopen looks for a port that was lost until it is there again. What was going
// on is not resumed: the identity is asked for anew, disarmed.
func (l *Live) reopen() {
	l.opening.Store(true)
	path, board, before := l.path, l.s.core.Identity().Board, l.s.view.Ports
	if board != "" {
		l.s.say("looking for board " + board + " on its port and on ports that come from now on")
	}
	l.goes(func() {
		defer l.opening.Store(false)
		for {
			select {
			case <-l.over:
				return
			case <-time.After(reopenEvery):
			}
			o, at, ok := l.found(path, board, before)
			if !ok {
				continue
			}
			l.connect(o, at)
			l.step(func(j *job.Job) { _ = j.Again() })
			return
		}
	})
}

// connect puts a line behind the session.
func (l *Live) connect(o Opened, path string) {
	ctx, cancel := context.WithCancel(context.Background())
	line := &liveLine{port: o.Port, cancel: cancel}
	line.writer = link.NewWriter(o.Port, link.Config{Baud: o.Baud, Clock: l.now, OnPanic: l.panicked,
		OnWrote: func(t time.Duration, b []byte) {
			if b[0] == protocol.Cut {
				l.cutWrote.CompareAndSwap(0, int64(t))
			}
			l.tape.Record(t, tape.ToBoard, b)
		},
		OnStall: func(err *link.StallError) {
			l.post(func(s *session) { s.core.Do(safety.PortStalled{At: s.now}); l.lost(err.Error()) })
		}})
	reader := link.NewReader(o.Port, link.ReaderConfig{Clock: l.now, OnPanic: l.panicked, Pause: l.pause, OnBytes: func(t time.Duration, b []byte) {
		l.tape.Record(t, tape.FromBoard, b)
		select {
		case l.rx <- chunk{at: t, data: append(l.piece(), b...), line: line}:
		default:
			l.rxLost.Add(1)
		}
	}})
	l.do(func(s *session) {
		l.line.Store(line)
		l.path = path
		s.view.Port = path
		s.opened = true
		s.core.Opened(s.now)
		s.say("opened " + path + "; " + o.Note)
	})
	l.goes(func() { l.ended(line, line.writer.Run(ctx)) })
	l.goes(func() { l.ended(line, reader.Run(ctx)) })
}

func (l *Live) ended(line *liveLine, err error) {
	if err == nil || errors.Is(err, context.Canceled) {
		return
	}
	select {
	case l.rx <- chunk{line: line, err: err}:
	case <-l.over:
	}
}

// liveWire is the line that is open now.
type liveWire struct{ l *Live }

func (w liveWire) Stop(b []byte) uint64 {
	if line := w.l.line.Load(); line != nil {
		return line.writer.Stop(b)
	}
	return 0
}

var errNoLine = errors.New("bench: no port is open")

func (w liveWire) Motion(b []byte) error { return w.put(b, (*link.Writer).MotionAt) }

func (w liveWire) Request(b []byte) error { return w.put(b, (*link.Writer).RequestAt) }

// put refuses a line that the session decided on before it knew of a stop whose
// byte may have left already: the line would come after it.
func (w liveWire) put(b []byte, at func(*link.Writer, uint64, []byte) error) error {
	line := w.l.line.Load()
	if line == nil {
		return errNoLine
	}
	stamp := line.writer.Stamp()
	if w.l.asked.Load() != w.l.heeded {
		return link.ErrVoided
	}
	return at(line.writer, stamp, b)
}
