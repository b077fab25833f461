package supervisor

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

// handler is the Core as the framer sees it.
type handler Core

func (h *handler) Sample(s protocol.Sample) {
	c := (*Core)(h)
	c.lastAt, c.seen = c.now, true
	if s.Slow.Seen && c.boots >= 0 && int(s.Slow.Boots) != c.boots {
		c.restarted(int(s.Slow.Boots), "its boot counter moved")
	}
	was := c.boardWas
	c.boardWas = s.State
	c.newest = safety.Sample{At: c.now, Sample: s}
	c.Do(&c.newest)
	c.sink.Sample(c.now, s)
	if s.State == protocol.Tripped && was != protocol.Tripped {
		c.askLog(3)
	}
}

func (h *handler) Line(body []byte) {
	c := (*Core)(h)
	if done, known := c.ex.Line(c.now, body); known {
		if done != nil {
			c.answered(*done)
		}
		return
	}
	w := strings.Fields(string(body))
	switch {
	case len(w) == 3 && w[0] == "cut":
		c.cut(w)
	case len(w) == 4 && w[0] == "ev" && w[1] == "trip":
		if n, err := strconv.Atoi(w[2]); err == nil && n >= 0 && n < 256 {
			c.Do(safety.BoardTripped{At: c.now, Cause: protocol.Cause(n)})
		}
		c.sink.Event(c.now, string(body))
	case len(w) >= 3 && w[0] == "ev" && w[1] == "boot":
		n, err := strconv.Atoi(w[2])
		if err == nil && c.boots >= 0 {
			c.restarted(n, strings.Join(w[3:], " "))
		}
		c.sink.Event(c.now, string(body))
	default:
		c.sink.Event(c.now, string(body))
	}
}

func (h *handler) Bad(raw []byte, err error) {}

// cut takes the board's answer to a stop: its output is off.
func (c *Core) cut(w []string) {
	n, _ := strconv.Atoi(w[1])
	us, _ := strconv.ParseUint(w[2], 10, 64)
	if c.stop != nil {
		t := *c.stop
		t.Answer, t.Count, t.OffUS = c.now, n, us
		c.stop = nil
		c.sink.Stopped(t)
	}
	c.Do(safety.OutputOff{At: c.now, Cause: protocol.CauseCut})
}

func (c *Core) restarted(boots int, why string) {
	c.boots = boots
	c.framer.Restarted()
	c.void()
	c.connected = false
	c.Do(safety.BoardRestarted{At: c.now})
	c.sink.Restarted(c.now, boots, why)
}

// pattern asks the board's loop to begin one, once: a line that is lost ends the run.
func (c *Core) pattern(x safety.SendPattern) {
	ask := protocol.Request{Verb: protocol.VerbExper, Args: patternArgs(c.token, x.Pattern), Tries: 1}
	c.Ask(c.now, ask, func(a protocol.Answer) {
		if err := a.AsError(); err != nil && a.Err != protocol.ErrVoid {
			c.Do(safety.PatternRefused{At: c.now, Words: err.Error()})
		}
	})
}

// patternArgs are the arguments of exp (P13). The amplitude is rounded towards zero,
// so that rounding never raises it.
func patternArgs(token uint16, x safety.Pattern) string {
	milli := func(v float64) int64 { return int64(math.Trunc(v * 1000)) }
	switch amp := milli(x.Amplitude + 1e-9); x.Kind {
	case safety.PatternRelay:
		return fmt.Sprintf("relay %04X %d %d %d %d", token, amp, milli(x.Hysteresis), milli(x.Middle), x.Switchings)
	case safety.PatternSequence:
		return fmt.Sprintf("prbs %04X %d %d %d %d", token, amp, x.Stages, x.Loops, x.Seed)
	default:
		return fmt.Sprintf("steps %04X %d %d %d", token, amp, x.Loops, x.Steps)
	}
}

// askLog reads the newest stop of the board: its cause and how long after the
// last heartbeat the output was off.
func (c *Core) askLog(tries int) {
	c.Ask(c.now, protocol.Request{Verb: protocol.VerbLog, Args: "0"}, func(a protocol.Answer) {
		l, err := ParseLog(a)
		if a.Err == protocol.ErrVoid && tries > 1 {
			c.logAgain = tries - 1 // asked again from the next tick
		}
		if err != nil {
			return
		}
		c.sink.BoardStop(c.now, l)
		e := safety.OutputOff{At: c.now, Cause: l.Cause}
		if l.Cause == protocol.CauseBeat {
			e.SinceBeat = l.SinceBeat()
		}
		c.Do(e)
	})
}

// LogEntry is one stop as the board kept it. Times are board time in µs, the low
// 32 bits.
type LogEntry struct {
	Index, Total          int
	Cause                 protocol.Cause
	SeenUS, BeatUS, OffUS uint32
	Speed                 float64 // rad/s at the stop
}

// SinceBeat is the time from the last heartbeat accepted to output off.
func (l LogEntry) SinceBeat() time.Duration {
	return time.Duration(l.OffUS-l.BeatUS) * time.Microsecond
}

// ParseLog reads the answer to a log request.
func ParseLog(a protocol.Answer) (LogEntry, error) {
	if err := a.AsError(); err != nil {
		return LogEntry{}, err
	}
	var v [7]int64
	for i := range v {
		x, ok := protocol.ParseInt([]byte(a.Field(i)))
		if !ok {
			return LogEntry{}, fmt.Errorf("stop log %q: %w", a.Joined(), protocol.ErrMalformed)
		}
		v[i] = x
	}
	return LogEntry{Index: int(v[0]), Total: int(v[1]), Cause: protocol.Cause(v[2]), SeenUS: uint32(v[3]),
		BeatUS: uint32(v[4]), OffUS: uint32(v[5]), Speed: float64(v[6]) / 1000}, nil
}
