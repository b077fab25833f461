package bench

import (
	"runtime"

	"gainwright/protocol"
	"gainwright/safety"
)

// cut puts the cut byte on the wire from whatever goroutine asks.
func (l *Live) cut() {
	if line := l.line.Load(); line != nil {
		line.writer.Stop([]byte{protocol.Cut})
		return
	}
	l.cutOwed.Store(true) // whoever is looking for a board sends it
}

// Stop asks for a stop. It never blocks; the byte is handed to the line before
// anything else is done.
func (l *Live) Stop(source safety.StopSource) {
	at := l.now()
	l.asked.Add(1)
	// One press may ask for a ramp; the next is a cut, whether or not the session
	// has seen the first.
	if source != safety.ByStopKey || !l.style.CompareAndSwap(1, 0) {
		l.cut()
		runtime.Gosched() // the writer goes on in this thread, at once, and no other has to wake up for it
	}
	if !l.hurry(func(s *session) { s.core.Stop(s.notLate(at), source) }) {
		l.cut() // the session hangs: nobody will ask for a ramp
	}
}

// Key tells of a key that is not the stop key. In count-down and in motion every
// key but mark stops.
func (l *Live) Key(mark bool) {
	switch safety.Phase(l.phase.Load()) {
	case safety.CountDown, safety.Running, safety.Stopping:
	default:
		return
	}
	at := l.now()
	if mark && safety.Phase(l.phase.Load()) == safety.Running {
		return // comes as an intent
	}
	l.asked.Add(1)
	l.cut()
	l.hurry(func(s *session) { s.core.Do(safety.Key{At: s.notLate(at)}) })
}

// Paste tells of many keys at once.
func (l *Live) Paste() {
	at := l.now()
	l.asked.Add(1)
	if safety.Phase(l.phase.Load()).ArmHeld() {
		l.cut()
	}
	l.hurry(func(s *session) { s.core.Do(safety.Paste{At: s.notLate(at)}) })
}

// hurry hands on what was counted in asked before. Until the session has heeded
// it, no line leaves but a stop. If there is no room, others that stop wait already.
func (l *Live) hurry(f func(*session)) bool {
	select {
	case l.urgent <- f:
		return true
	default:
		l.asked.Add(-1)
		return false
	}
}

// heed carries out what stops and waits, before anything else is looked at.
func (l *Live) heed() {
	for {
		select {
		case f := <-l.urgent:
			f(l.s)
			l.heeded++
		default:
			return
		}
	}
}
