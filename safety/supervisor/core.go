// Package supervisor owns the drive. Its Core joins the pure parts — framer,
// exchange and safety.Step — into one value that turns bytes, ticks and wishes
// into lines for the wire; it knows no port, no goroutine and no clock. Live is
// the goroutine around a Core for a real line; tune/bench runs the same Core in
// virtual time.
package supervisor

import (
	"errors"
	"fmt"
	"slices"
	"strconv"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

// Wire takes lines. None of its methods may block. link.Writer is one.
type Wire interface {
	Stop(b []byte) uint64
	Motion(b []byte) error
	Request(b []byte) error
}

// Sink takes what a Core has to tell. Its methods are called from within the
// Core's own and must not call back into it.
type Sink interface {
	// Sample is a good sample, after the limiter has judged it.
	Sample(now time.Duration, s protocol.Sample)
	// Effect is what safety.Step called for beyond lines on the wire.
	Effect(now time.Duration, e safety.Effect)
	// Event is a line of the board that answers no request, or a fact about the
	// line itself, in words.
	Event(now time.Duration, text string)
	// Restarted is a board that has started anew, by its own word or by its boot
	// counter.
	Restarted(now time.Duration, boots int, why string)
	// BoardStop is the newest entry of the board's stop log, read after a trip.
	BoardStop(now time.Duration, l LogEntry)
	// Stopped is told when the board has answered a stop.
	Stopped(StopTimes)
}

// StopTimes are the instants of one stop on the console's clock, and the
// board's own word.
type StopTimes struct {
	Source safety.StopSource
	Asked  time.Duration // the key was read
	Wire   time.Duration // the byte had left; 0: not known
	Answer time.Duration // the board's answer was read
	Count  int           // cuts since the board started
	OffUS  uint64        // board time at which its output was off, µs, low 32 bits
}

// Link says how the line stands.
type Link struct {
	Connected bool
	LookOnly  string // why the board may only be looked at; "" if it may be driven
	Lost      bool   // it was up and is gone
	LostWhy   string
	Age       time.Duration // of the newest sample, its time in buffers included
	Seen      bool          // a sample has come since the connection
	Stats     protocol.Stats
	Rate      float64 // samples a second over the last second
}

// linkLostAge is the silence after which a link that streamed is lost, armed or
// not. While armed the envelope's own telemetry age is far shorter.
const linkLostAge = time.Second

// Core is one board on one line. Its methods must not be called at the same
// time.
type Core struct {
	// Simulated says that the far end is a simulated rig: set by the program that
	// made the rig, never by what a board says.
	Simulated bool
	// Watch, if set, is shown every event with what the limiter called for, before
	// that is carried out. A *safety.Sample is valid during the call only.
	Watch func(safety.Event, []safety.Effect)

	env  safety.Envelope
	st   safety.State
	wire Wire
	sink Sink

	framer    protocol.Framer
	ex        *protocol.Exchange
	done      map[int]func(protocol.Answer)
	order     []int // ids of the requests in the exchange, oldest first
	lastID    int
	now       time.Duration
	id        protocol.Identity
	connected bool
	lookOnly  string
	streaming bool // telemetry was asked for
	lost      bool
	lostWhy   string
	lastAt    time.Duration // arrival of the newest sample
	seen      bool
	boots     int // boot count of the identity, -1: none yet

	limitsCRC uint16
	newest    safety.Sample // the event in hand
	token     uint16
	beat      uint16
	stop      *StopTimes
	permit    error
	boardWas  protocol.State
	logAgain  int
	rateAt    time.Duration
	rateN     uint64
	rate      float64
}

// NewCore returns a Core that drives nothing: the envelope is empty until
// SetEnvelope. first is where requests start to be numbered.
func NewCore(wire Wire, sink Sink, first uint16) *Core {
	return &Core{wire: wire, sink: sink, ex: protocol.NewExchange(first), done: map[int]func(protocol.Answer){}, boots: -1}
}

// State returns the state of the limiter.
func (c *Core) State() safety.State { return c.st }

// Phase is State().Phase without a copy of the rest.
func (c *Core) Phase() safety.Phase { return c.st.Phase }

// Ramps reports whether the first press of the stop key asks for a ramp now.
func (c *Core) Ramps() bool {
	return c.st.Phase == safety.Running && c.env.Stop == safety.StopRamp
}

// Envelope returns the envelope in force.
func (c *Core) Envelope() safety.Envelope { return c.env }

// Pending is how many bytes of an unfinished line are held: never more than a line.
func (c *Core) Pending() int { return c.framer.Pending() }

// Identity returns what the board said of itself.
func (c *Core) Identity() protocol.Identity { return c.id }

// Link returns how the line stands.
func (c *Core) Link() Link {
	return Link{Connected: c.connected, LookOnly: c.lookOnly, Lost: c.lost, LostWhy: c.lostWhy, Age: c.age(), Seen: c.seen, Stats: c.framer.Stats, Rate: c.rate}
}

// age is how old the newest sample is: since it came, and by the board's own
// clock where it sat in a buffer before. A line that cannot carry what the board
// sends shows in it, although samples come all the time.
func (c *Core) age() time.Duration {
	at := c.lastAt
	if c.seen && c.st.Heard {
		at = min(at, c.st.HeardAt)
	}
	return c.now - at
}

// SetEnvelope puts another envelope in force. The limiter disarms.
func (c *Core) SetEnvelope(now time.Duration, env safety.Envelope) {
	c.advance(now)
	c.env = env
	c.Do(safety.RigChanged{At: now})
}

// Look gives the limiter a model to see a speed ceiling coming with. It can only
// make a stop come earlier, so it does not disarm.
func (c *Core) Look(l safety.LookAhead) { c.env.Look = l }

// Connected takes the identity into use: scales, and whether the board may be
// driven. Why is a reason of the caller's to keep it look-only, or "".
func (c *Core) Connected(now time.Duration, id protocol.Identity, why string) {
	c.advance(now)
	c.id = id
	c.framer.Scales = id.Scales
	c.connected, c.lost = true, false
	if c.boots >= 0 && c.boots != int(id.Boots) {
		c.framer.Restarted()
	}
	c.boots = int(id.Boots)
	c.lookOnly = id.LookOnly()
	if c.lookOnly == "" {
		c.lookOnly = why
	}
	c.Do(safety.Connected{At: now, Board: id.Board, LookOnly: c.lookOnly != "", Simulated: c.Simulated,
		Patterns: id.Can("exper") && slices.Contains(id.LimitNames, protocol.LimSlew), BootCount: id.Boots})
}

// Opened says that a port was opened: what came before it counts no more.
func (c *Core) Opened(now time.Duration) {
	c.advance(now)
	c.framer.Reset()
	c.lost, c.lostWhy, c.connected, c.streaming, c.seen, c.boots = false, "", false, false, false, -1
	c.lastAt, c.stop = now, nil
	c.void()
}

// Streaming says whether telemetry was asked for, so that its absence means
// something.
func (c *Core) Streaming(now time.Duration, on bool) {
	c.advance(now)
	c.streaming, c.lastAt, c.seen = on, now, false
}

// LimitsHeld says that the board holds the limits of this crc and that they
// were read back equal.
func (c *Core) LimitsHeld(now time.Duration, crc uint16) {
	c.limitsCRC = crc
	c.Do(safety.LimitsHeld{At: now, OK: true})
}

// LinkLost says that the port is gone.
func (c *Core) LinkLost(now time.Duration, why string) {
	c.advance(now)
	if c.lost {
		return
	}
	c.lost, c.connected, c.streaming, c.lostWhy = true, false, false, why
	c.framer.Reset()
	c.void()
	c.sink.Event(now, "LINK LOST: "+why)
	c.Do(safety.LinkLost{At: now})
}

// Ask queues a request; then is called once with its answer.
func (c *Core) Ask(now time.Duration, r protocol.Request, then func(protocol.Answer)) {
	c.advance(now)
	if err := c.ex.Offer(r); err != nil {
		then(protocol.Answer{Request: r, At: now, Err: err})
		return
	}
	c.lastID++
	c.order = append(c.order, c.lastID)
	c.done[c.lastID] = then
	c.pump()
}

// Stop asks for a stop, now, whatever goes on.
func (c *Core) Stop(now time.Duration, source safety.StopSource) {
	c.advance(now)
	if c.stop == nil || now-c.stop.Asked > safety.StopAnswer { // an answer that has not come by then is lost
		c.stop = &StopTimes{Source: source, Asked: now}
	}
	c.Do(safety.Stop{At: now, Source: source})
	// The limiter repeats a stop while something may move. Even where it sees
	// nothing to stop, the key is passed on: the board's answer is what the stop
	// check looks at.
	if c.stop != nil && c.stop.Wire == 0 && !c.st.Ramping() {
		c.wire.Stop([]byte{protocol.Cut})
	}
}

// Wrote tells when a line had left.
func (c *Core) Wrote(t time.Duration, line []byte) {
	if c.stop != nil && c.stop.Wire == 0 && t >= c.stop.Asked && len(line) > 0 && line[0] == protocol.Cut {
		c.stop.Wire = t
	}
}

// Bytes takes what came from the board.
func (c *Core) Bytes(now time.Duration, b []byte) {
	c.advance(now)
	c.framer.Feed(b, (*handler)(c))
	c.pump()
}

// NotNow says why a write was not allowed.
type NotNow struct{ Cause safety.Cause }

func (e *NotNow) Error() string { return e.Cause.String() }

// Refusal returns the number, the cause and what to do.
func (e *NotNow) Refusal() (number int, cause, remedy string) {
	return int(e.Cause.Code), e.Cause.Words, e.Cause.Do
}

// Permit asks the limiter whether gains or limits may be written now, by a
// safety.GainWrite or safety.LimitWrite.
func (c *Core) Permit(e safety.Event) error {
	c.permit = errors.New("supervisor: the limiter did not answer")
	c.Do(e)
	return c.permit
}

// Tick lets time pass. It is due every few milliseconds.
func (c *Core) Tick(now time.Duration) {
	c.advance(now)
	if now-c.rateAt >= time.Second {
		c.rate = float64(c.framer.Stats.Samples-c.rateN) / (now - c.rateAt).Seconds()
		c.rateN, c.rateAt = c.framer.Stats.Samples, now
	}
	if c.streaming && !c.lost && now-c.lastAt > linkLostAge {
		c.LinkLost(now, "no telemetry for "+strconv.Itoa(int((now-c.lastAt).Milliseconds()))+" ms")
	}
	c.Do(safety.Tick{At: now})
	if n := c.logAgain; n > 0 {
		c.logAgain = 0
		c.askLog(n)
	}
	c.pump()
}

// Do hands an event to the limiter and carries out what it calls for.
func (c *Core) Do(e safety.Event) {
	c.advance(e.When())
	stops, phase := c.st.Stops, c.st.Phase
	effects := c.env.Advance(&c.st, e)
	if c.Watch != nil {
		c.Watch(e, effects)
	}
	if begins := c.st.Phase == safety.Stopping || c.st.Phase == safety.Tripped; c.st.Stops != stops || begins && c.st.Phase != phase {
		c.void() // a stop voids what was asked before it
	}
	for _, x := range effects {
		c.carryOut(x)
	}
}

func (c *Core) advance(now time.Duration) { c.now = max(c.now, now) }

func (c *Core) carryOut(x safety.Effect) {
	switch x := x.(type) {
	case safety.SendStop:
		c.wire.Stop([]byte{protocol.Cut})
	case safety.SendRampStop:
		c.Ask(c.now, protocol.Request{Verb: protocol.VerbRamp, Args: fmt.Sprintf("%04X", c.token), Tries: 1}, func(protocol.Answer) {})
	case safety.SendArm:
		c.arm()
	case safety.SendDrive:
		c.beat++
		c.wire.Motion(c.driveLine(x))
	case safety.SendPattern:
		c.pattern(x)
	case safety.SendHeartbeat:
		c.beat++
		c.wire.Motion(protocol.AppendBeat(nil, c.beat, c.token))
	case safety.SendDisarm:
		c.Ask(c.now, protocol.Request{Verb: protocol.VerbDisarm}, func(protocol.Answer) {})
	case safety.SendReset:
		c.Ask(c.now, protocol.Request{Verb: protocol.VerbReset, Tries: 1}, func(protocol.Answer) {})
	case safety.WriteAllowed:
		c.permit = nil
	case safety.WriteRefused:
		c.permit = &NotNow{Cause: x.Cause}
	default:
		c.sink.Effect(c.now, x)
	}
}

func (c *Core) driveLine(x safety.SendDrive) []byte {
	if x.Mode == safety.ModeSpeed {
		return protocol.AppendDriveSpeed(nil, c.beat, c.token, x.Value)
	}
	return protocol.AppendDriveVolts(nil, c.beat, c.token, x.Value)
}

// arm asks for a one-time number and echoes it with the crc of the limits.
func (c *Core) arm() {
	refused := func(a protocol.Answer) {
		if a.Err == protocol.ErrVoid {
			return
		}
		c.Do(safety.BoardRefused{At: c.now, Code: a.Refusal, Words: a.AsError().Error()})
	}
	c.Ask(c.now, protocol.Request{Verb: protocol.VerbNonce, Tries: 2}, func(a protocol.Answer) {
		if a.AsError() != nil {
			refused(a)
			return
		}
		args := fmt.Sprintf("%s %04X", a.Field(0), c.limitsCRC)
		c.Ask(c.now, protocol.Request{Verb: protocol.VerbArm, Args: args, Tries: 1}, func(a protocol.Answer) {
			token, ok := protocol.ParseHex16([]byte(a.Field(0)))
			if a.AsError() != nil || !ok {
				refused(a)
				return
			}
			c.token, c.beat = token, 0
			c.Do(safety.BoardArmed{At: c.now})
		})
	})
}

// pump sends the request that is due and ends the one that was tried in vain.
func (c *Core) pump() {
	for {
		line, done := c.ex.Tick(c.now)
		if line != nil {
			c.wire.Request(line)
		}
		if done == nil {
			return
		}
		c.answered(*done)
	}
}

func (c *Core) answered(a protocol.Answer) { c.taken()(a) }

// taken gives up the oldest request and returns whom to tell.
func (c *Core) taken() func(protocol.Answer) {
	id := c.order[0]
	c.order = c.order[1:]
	then := c.done[id]
	delete(c.done, id)
	return then
}

func (c *Core) void() {
	// All are taken out before the first is told: what is told may ask anew, and
	// stop again.
	voided := c.ex.Void(c.now)
	then := make([]func(protocol.Answer), len(voided))
	for i := range voided {
		then[i] = c.taken()
	}
	for i, a := range voided {
		then[i](a)
	}
}
