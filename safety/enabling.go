package safety

import (
	"time"

	"gainwright/protocol"
)

// Enabling is a three-position enabling switch that is wired to the board
// (IEC 60204-1, 9.2.3.9): released and pressed through both mean stop, the middle
// permits a start by another control. The zero value is none. Both bits follow
// P11.1: the middle contact reads 1 in the middle only, the second contact reads 0
// when the switch is pressed through.
type Enabling struct {
	Listed     bool
	Name       string
	Bit        uint8 // the middle contact
	Two        bool  // there is a second contact
	ThroughBit uint8
}

// Position is where an enabling switch stands.
type Position uint8

// The positions. With one contact released and pressed through look alike.
const (
	PositionUnknown Position = iota
	Released
	HeldMiddle
	PressedThrough
	NotHeld // one contact: released or pressed through
	ContactsDisagree
)

// String returns the position as the screens show it.
func (p Position) String() string {
	return [...]string{"not known", "released", "held", "pressed through", "released or pressed through", "its contacts disagree"}[min(p, ContactsDisagree)]
}

// Position reads the switch from the newest word of the board on its inputs.
func (e Enabling) Position(s protocol.Sample) Position {
	if !s.Slow.Seen {
		return PositionUnknown
	}
	middle := s.Slow.Inputs>>e.Bit&1 == 1
	if !e.Two {
		if middle {
			return HeldMiddle
		}
		return NotHeld
	}
	switch free := s.Slow.Inputs>>e.ThroughBit&1 == 1; {
	case middle && free:
		return HeldMiddle
	case middle:
		return ContactsDisagree
	case free:
		return Released
	}
	return PressedThrough
}

// whichWait is how long a board that stopped by an input may take to say by
// which: inputs come at least four times a second. (P5.6)
const whichWait = 600 * time.Millisecond

// notEnabled says where the enabling switch stands if it is not in its middle.
func (m *machine) notEnabled() (Position, bool) {
	if !m.env.Enabling.Listed {
		return HeldMiddle, false
	}
	p := m.env.Enabling.Position(m.Last)
	return p, p != HeldMiddle
}

// judgeEnabling stops when the enabling switch is let go or pressed through. It
// is what the switch is there for and no trip: nothing has to be acknowledged.
func (m *machine) judgeEnabling() {
	if p, not := m.notEnabled(); not && m.Phase.ArmHeld() {
		m.letGo(p.String())
	}
}

// letGo stops. The board latches what it sees at the same switch, and is asked to
// clear that once all is at rest and the switch is held again.
func (m *machine) letGo(detail string) {
	m.Stops++
	m.stopped, m.stoppedAt = true, m.Now
	m.stopping(EndStopped, cause(CodeEnabling, detail))
	m.resetOwed = true
	m.resetAt = m.Now - ResetInterval
}

// inputTripped takes the board's word that an input stopped it, where that may
// have been the enabling switch. Which it was stands in its next slow report.
func (m *machine) inputTripped() {
	m.boardTrip = true
	m.letGo("")
	m.whichInput = true
}

// which decides, in the samples after such a stop, whether the enabling switch
// was let go or something else is open, which is a trip.
func (m *machine) which(s protocol.Sample) {
	if !m.whichInput {
		return
	}
	p, not := m.notEnabled()
	in, c := m.openInput(), s.Slow.Trip
	switch {
	case c.Trip() && c != protocol.CauseInterlock:
		m.trip(CodeBoardTripped, c.String())
	case in != "":
		m.trip(CodeInterlock, in)
	case not:
		m.whichInput = false
		m.end.cause = cause(CodeEnabling, p.String())
	case m.Now-m.stoppingAt > whichWait:
		m.trip(CodeBoardTripped, protocol.CauseInterlock.String())
	}
}
