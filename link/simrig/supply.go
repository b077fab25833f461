package simrig

import "math"

// supply feeds the driver's bus capacitor through its source resistance. It
// limits its current and, unless it can sink, takes none back: what the motor
// returns raises the bus.
type supply struct {
	volts, ohms float64 // no-load voltage, source resistance
	limit, fold float64 // A at full voltage and into a short circuit
	farads      float64
	sinks       bool
	standby     float64 // A that board and driver take from the bus

	bus float64 // V on the capacitor
}

// span is a length of time with the share of a bus deviation that is left
// after it.
type span struct{ h, decay float64 }

func (s *supply) span(h float64) span { return span{h, math.Exp(-h / (s.ohms * s.farads))} }

// draw carries the bus over a span while the bridge takes amps from it
// (negative when the motor brakes). The capacitor's exact exponential holds while
// the source is linear; a source at its limit, or one that cannot sink, is a
// constant current, and bounds it from above and below.
func (s *supply) draw(amps float64, t *span) {
	amps += s.standby
	rest := s.volts - s.ohms*amps
	v := rest + (s.bus-rest)*t.decay
	k := t.h / s.farads
	if most := s.bus + (s.ceiling()-amps)*k; v > most {
		v = most
	}
	if !s.sinks {
		if least := s.bus - amps*k; v < least {
			v = least
		}
	}
	if v < 0 {
		v = 0
	}
	s.bus = v
}

// ceiling is the most the source gives at the present bus voltage. A supply that
// folds back gives less the further its output is pulled down.
func (s *supply) ceiling() float64 {
	if s.fold == s.limit || s.bus >= s.volts {
		return s.limit
	}
	return s.fold + (s.limit-s.fold)*s.bus/s.volts
}

// idle is the bus voltage once nothing but the standby current is drawn.
func (s *supply) idle() float64 { return s.volts - s.ohms*s.standby }

// settle puts the bus at its idle voltage where it is within a microvolt of it
// and reports whether it did.
func (s *supply) settle() bool {
	if math.Abs(s.bus-s.idle()) > 1e-6 {
		return false
	}
	s.bus = s.idle()
	return true
}

// release returns the energy of an interrupted winding current to the bus, as
// the bridge's diodes do when the output is cut.
func (s *supply) release(joules float64) {
	s.bus = math.Sqrt(s.bus*s.bus + 2*joules/s.farads)
}
