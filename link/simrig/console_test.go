package simrig

import (
	"math"
	"strconv"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
)

// console is a minimal console in virtual time, for tests.
type console struct {
	t       *testing.T
	r       *Rig
	x       *protocol.Exchange
	f       protocol.Framer
	now     time.Duration
	samples []protocol.Sample
	events  []string
	bad     []string
	done    *protocol.Answer
	token   uint16
	k       uint16
	id      protocol.Identity
}

func newConsole(t *testing.T, c Config) *console {
	t.Helper()
	k := &console{t: t, r: New(c, 1), x: protocol.NewExchange(100)}
	k.wait(100 * time.Millisecond)
	return k
}

func (c *console) Sample(s protocol.Sample) { c.samples = append(c.samples, s) }
func (c *console) Bad(raw []byte, err error) {
	c.bad = append(c.bad, strconv.Quote(string(raw))+" "+err.Error())
}
func (c *console) Line(body []byte) {
	done, known := c.x.Line(c.now, body)
	if done != nil {
		c.done = done
	}
	if !known {
		c.events = append(c.events, string(body))
	}
}

// wait lets a time pass in steps of 250 µs.
func (c *console) wait(d time.Duration) {
	for end := c.now + d; c.now < end; {
		c.now = min(c.now+250*time.Microsecond, end)
		c.pump()
	}
}

func (c *console) pump() {
	c.r.Advance(c.now)
	c.f.Feed(c.r.Output(), c)
	line, done := c.x.Tick(c.now)
	if done != nil {
		c.done = done
	}
	if line != nil {
		c.r.Receive(line)
	}
}

// ask sends a request and waits for its answer.
func (c *console) ask(verb, args string) protocol.Answer {
	c.t.Helper()
	c.done = nil
	if err := c.x.Offer(protocol.Request{Verb: verb, Args: args}); err != nil {
		c.t.Fatal(err)
	}
	for range 10_000 {
		c.now += 250 * time.Microsecond
		c.pump()
		if c.done != nil {
			return *c.done
		}
	}
	c.t.Fatalf("%s %s: no answer at all", verb, args)
	return protocol.Answer{}
}

// must is ask for a request that has to be granted.
func (c *console) must(verb, args string) protocol.Answer {
	c.t.Helper()
	a := c.ask(verb, args)
	if err := a.AsError(); err != nil {
		c.t.Fatalf("%s %s: %v", verb, args, err)
	}
	return a
}

// refused is ask for a request that has to be refused with a code.
func (c *console) refused(verb, args string, why protocol.Refusal) {
	c.t.Helper()
	a := c.ask(verb, args)
	if a.OK || a.Err != nil || a.Refusal != why {
		c.t.Errorf("%s %s: ok %v, %v %v, want a refusal: %v", verb, args, a.OK, a.Err, a.Refusal, why)
	}
}

func (c *console) identify() {
	c.t.Helper()
	id, err := protocol.ParseIdentity(c.must("id", "").Lines)
	if err != nil {
		c.t.Fatal(err)
	}
	c.id = id
	c.f.Scales = id.Scales
}

func hexFloat(v float64) string {
	return string(protocol.AppendHex32(nil, math.Float32bits(float32(v))))
}

// hold makes the board hold limits, given as name to value on top of generous
// ones.
func (c *console) hold(over map[string]float64) {
	c.t.Helper()
	c.identify()
	all := map[string]float64{"vmax": 20, "wmax": 300, "stall": 0.5, "wrong": 0.3, "nocnt": 0.5, "vbreak": 6, "run": 30, "beat": 0.25}
	for k, v := range over {
		all[k] = v
	}
	var bits []uint32
	for i, n := range c.id.LimitNames {
		v := all[n]
		bits = append(bits, math.Float32bits(float32(v)))
		c.must("lim", "set "+strconv.Itoa(i)+" "+hexFloat(v))
	}
	c.must("lim", "use "+hex16(protocol.SetCRC(bits)))
}

func (c *console) arm() {
	c.t.Helper()
	c.wait(100 * time.Millisecond) // a board has to have seen the shaft at rest
	n := c.must("nonce", "").Field(0)
	crc := c.must("lim", "crc").Field(0)
	tok, ok := protocol.ParseHex16([]byte(c.must("arm", n+" "+crc).Field(0)))
	if !ok {
		c.t.Fatal("token")
	}
	c.token = tok
}

// drive sends a drive line every 20 ms for a time.
func (c *console) drive(d time.Duration, line func(k uint16) []byte) {
	for end := c.now + d; c.now < end; {
		c.k++
		c.r.Receive(line(c.k))
		c.wait(min(20*time.Millisecond, end-c.now))
	}
}

func (c *console) volts(d time.Duration, v float64) {
	c.drive(d, func(k uint16) []byte { return protocol.AppendDriveVolts(nil, k, c.token, v) })
}

func (c *console) speed(d time.Duration, w float64) {
	c.drive(d, func(k uint16) []byte { return protocol.AppendDriveSpeed(nil, k, c.token, w) })
}

func (c *console) last() protocol.Sample {
	c.t.Helper()
	if len(c.samples) == 0 {
		c.t.Fatal("no sample")
	}
	return c.samples[len(c.samples)-1]
}

// happened reports whether an event beginning with the words was seen.
func (c *console) happened(begin string) bool {
	for _, e := range c.events {
		if strings.HasPrefix(e, begin) {
			return true
		}
	}
	return false
}

func (c *console) state() protocol.State {
	c.t.Helper()
	n := len(c.samples)
	c.must("tel", "")
	c.wait(20 * time.Millisecond)
	if len(c.samples) == n {
		c.t.Fatal("tel brought no sample")
	}
	return c.last().State
}
