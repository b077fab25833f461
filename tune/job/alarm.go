package job

import (
	"time"

	"gainwright/safety"
)

// AlarmState is a state of ISA-18.2 and IEC 62682, as the screens show it.
type AlarmState string

// The states. Shelved and out of service stand beside them.
const (
	Unacknowledged         AlarmState = "unacknowledged"
	Acknowledged           AlarmState = "acknowledged"
	ReturnedUnacknowledged AlarmState = "returned, unacknowledged"
	NormalAgain            AlarmState = "normal"
)

// ShelfState says whether an alarm was put aside.
type ShelfState uint8

// The ways to put an alarm aside; a trip never is.
const (
	NotShelved ShelfState = iota
	ShelvedForATime
	OutOfService
)

// String returns the state in a word or two.
func (s ShelfState) String() string {
	return [...]string{"", "shelved", "out of service"}[min(s, OutOfService)]
}

// AlarmView is one alarm in a standard state (ISA-18.2, IEC 62682).
type AlarmView struct {
	At           time.Duration
	ID           string // of what is watched: trip, link, record …
	Code         safety.Code
	Text         string
	State        string // an AlarmState
	Cause        string // first cause
	Do           string
	Active       bool
	Acked        bool
	MayShelve    bool
	Shelved      ShelfState
	ShelvedUntil time.Duration
	Why          string // typed, where it was put aside
}

// Flashes reports whether the alarm may flash: unacknowledged and not put aside.
func (a AlarmView) Flashes() bool {
	return a.Shelved == NotShelved && (a.State == string(Unacknowledged) || a.State == string(ReturnedUnacknowledged))
}

// Shelve puts an alarm aside, with a typed reason.
type Shelve struct {
	ID           string
	Reason       string
	OutOfService bool
}

func (Shelve) intent() {}
