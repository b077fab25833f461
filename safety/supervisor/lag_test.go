package supervisor

import (
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

// A board that sends twice what the line carries: each sample comes, whole and in
// turn, when half as many have been sent as it is late. What is shown says how old
// it is, but for what the board's clock may go slow by, and says so again as little once the line has caught up.
func TestLagUnderOverload(t *testing.T) {
	c := NewCore(benchWire{}, &benchSink{}, 1)
	c.Streaming(0, true)
	send := func(sampled, arrives time.Duration) {
		n := sampled / time.Millisecond
		c.Bytes(arrives, protocol.AppendFast(nil, protocol.RawFast{Seq: uint8(n), TimeUS: uint32(sampled/time.Microsecond) & 0xFFFFFF}))
		c.Tick(arrives)
	}
	check := func(sampled, now time.Duration) {
		t.Helper()
		// What a board's clock may go slow by is no lag.
		slack := 2*time.Millisecond + time.Duration(safety.DriftShare*float64(sampled))
		if l := c.Link(); l.Lost || l.Age < now-sampled-slack || l.Age > now-sampled {
			t.Fatalf("at %v the newest sample is of %v, %v old; shown is %v, lost %t", now, sampled, now-sampled, l.Age, l.Lost)
		}
	}
	at := time.Duration(0)
	for ; at < 100*time.Millisecond; at += time.Millisecond { // the line carries it
		send(at, at)
		check(at, at)
	}
	begun := at
	for ; at < begun+2*time.Second; at += time.Millisecond { // every other ms one that waited
		now := begun + 2*(at-begun)
		send(at, now)
		check(at, now)
	}
	now := begun + 2*(at-begun)
	for ; at < now; at += time.Millisecond { // what waits comes at once
		send(at, now)
	}
	check(at, now)
	if age := c.Link().Age; age > 2*time.Millisecond {
		t.Errorf("%v old, with nothing left to come", age)
	}
}
