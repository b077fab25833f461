// Package linktest holds ports that lie and ports that fail: small wrappers for
// tests and drills, each with one fault, to be stacked as needed. It also holds
// Wire, a serial line in virtual time that remembers when each byte left, and
// CheckPort, the contract that every link.Port keeps.
//
//	port := linktest.Garble(linktest.Delay(board, 5*time.Millisecond), seed, 0.01, nil)
//
// A fault works in the direction its comment names. Those that take a *Switch
// can be turned on and off while the port is in use; a nil Switch is always on.
// Random faults take a seed and are the same every time.
package linktest

import "sync/atomic"

// Switch turns a fault on and off. The zero value is off. It may be used from
// any goroutine.
type Switch struct{ on atomic.Bool }

// On returns a Switch that is on.
func On() *Switch {
	s := &Switch{}
	s.Set(true)
	return s
}

// Set turns the fault on or off.
func (s *Switch) Set(on bool) { s.on.Store(on) }

func (s *Switch) active() bool { return s == nil || s.on.Load() }
