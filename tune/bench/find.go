package bench

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"gainwright/protocol"
	"gainwright/tune/job"
)

// Rates are the line rates that are tried where a board says nothing that can be
// read, the usual ones first (common practice, no source).
var Rates = []int{115200, 57600, 38400, 19200, 9600, 230400, 460800, 921600, 500000, 1000000, 250000, 2000000}

// Times of a look at a port. A board that was restarted by the opening needs a
// moment to start; an identity of 25 lines of 40 bytes takes 1.1 s at 9600 bit/s.
const (
	probeTries   = 3
	probeTry     = 350 * time.Millisecond
	probeAll     = 2500 * time.Millisecond
	probeNothing = 700 * time.Millisecond // without one good line
)

// probed is what a look at a port has found.
type probed struct {
	board string // "" where no identity came
	good  uint64 // lines and samples whose check code was right
	bad   uint64
}

// probe asks what is at the other end for its identity, and for nothing else, but
// for a stop that somebody asks for meanwhile. It is called before any other
// goroutine has the port.
func probe(port interface {
	Read([]byte) (int, error)
	Write([]byte) (int, error)
}, number uint16, cutOwed func() bool) (p probed, err error) {
	start := time.Now()
	ex := protocol.NewExchange(number)
	_ = ex.Offer(protocol.Request{Verb: protocol.VerbID, Timeout: probeTry, Tries: probeTries})
	var f protocol.Framer
	buf := make([]byte, 4096)
	for {
		now := time.Since(start)
		line, ended := ex.Tick(now)
		if ended != nil || now > probeAll || now > probeNothing && p.good == 0 {
			return p, nil
		}
		if cutOwed() {
			if _, err := port.Write([]byte{protocol.Cut}); err != nil {
				return p, err
			}
		}
		if line != nil {
			if _, err := port.Write(line); err != nil {
				return p, err
			}
		}
		n, err := port.Read(buf)
		if err != nil {
			return p, err
		}
		h := &probeHandler{ex: ex, now: now}
		f.Feed(buf[:n], h)
		p.good, p.bad = f.Stats.Samples+f.Stats.Lines, f.Stats.BadLines
		if h.done != nil {
			if id, err := protocol.ParseIdentity(h.done.Lines); err == nil {
				p.board = id.Board
			}
			return p, nil
		}
	}
}

type probeHandler struct {
	ex   *protocol.Exchange
	now  time.Duration
	done *protocol.Answer
}

func (h *probeHandler) Sample(protocol.Sample) {}
func (h *probeHandler) Bad([]byte, error)      {}
func (h *probeHandler) Line(body []byte) {
	if done, _ := h.ex.Line(h.now, body); done != nil {
		h.done = done
	}
}

// owesCut says once that a stop was asked for while no line was open.
func (l *Live) owesCut() bool { return l.cutOwed.Swap(false) }

// search looks for the rate of a board that says nothing that can be read. It
// opens the port once for each rate and leaves it closed.
func (l *Live) search(path string, not int) (baud int) {
	defer l.h.Show(func(v *job.View) { v.Busy = "" })
	var tried []string
	for i, rate := range Rates {
		if rate == not {
			continue
		}
		l.h.Show(func(v *job.View) {
			v.Busy, v.Share = fmt.Sprintf("looking for the line rate: %d bit/s", rate), float64(i)/float64(len(Rates))
		})
		o, err := l.opt.OpenAt(path, rate)
		if err != nil {
			continue // this system cannot do that rate
		}
		tried = append(tried, fmt.Sprint(rate))
		p, err := probe(o.Port, uint16(rate), l.owesCut)
		o.Port.Close()
		if err == nil && p.good > 0 {
			l.h.Say("a board answers at %d bit/s", rate)
			return rate
		}
		select {
		case <-l.over:
			return 0
		default:
		}
	}
	l.h.Say("nothing that can be read at %s bit/s", strings.Join(tried, ", "))
	return 0
}

// found looks for the board of this job after its port went: on the port where it
// was, then on ports that have come since. Other ports are left alone: what is on
// them may not like being opened.
func (l *Live) found(path, board string, before []job.PortView) (o Opened, at string, ok bool) {
	paths := []string{path}
	if l.opt.Ports != nil {
		for _, p := range l.opt.Ports() {
			if p.Path != "" && p.Path != path && !slices.ContainsFunc(before, func(b job.PortView) bool { return b.Path == p.Path }) {
				paths = append(paths, p.Path)
			}
		}
	}
	for _, at := range paths {
		o, err := l.opt.Open(at)
		if err != nil {
			continue
		}
		if board == "" {
			return o, at, true // never knew which board it was
		}
		p, err := probe(o.Port, 0x7F00, l.owesCut)
		if err == nil && p.board == board {
			return o, at, true
		}
		o.Port.Close()
		if p.board != "" {
			l.h.Say("%s has another board, %s; looking on for %s", at, p.board, board)
		}
	}
	return Opened{}, "", false
}
