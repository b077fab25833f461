package simrig

import "math"

// longestStep bounds the integration step in ns. The step matters only for the
// coupling to the bus and for the curvature of Stribeck friction.
const longestStep = 100_000

// plant is everything beyond the board's pins: driver, supply, motor, load and
// the hand of whoever turns the shaft.
type plant struct {
	now     int64 // ns
	shaft   shaft
	motor   motor
	driver  driver
	supply  supply
	winding winding
	hand    hand
	joint   coupling
	seen    Extremes
	limits  bounds

	memory  [4]pair // propagators of the step lengths in use
	lengths [4]int64
	oldest  int
}

// hand turns the shaft by an angle along a raised cosine.
type hand struct {
	from, until int64
	start, by   float64
}

// advance carries the plant to the instant to, in ns.
func (p *plant) advance(to int64) {
	for p.now < to {
		p.driver.due(p.now)
		end := p.driver.next(to)
		if p.hand.until > p.now {
			end = min(end, p.hand.until)
		}
		p.run(end)
	}
	p.driver.due(p.now)
}

// run carries the plant to end under one order of the driver.
func (p *plant) run(end int64) {
	open := !p.driver.now.on && !p.driver.shorts
	length := end - p.now
	if open && p.shaft.i != 0 {
		p.supply.release(p.motor.l * p.shaft.i * p.shaft.i / 2)
		p.shaft.i = 0
	}
	// With the output on at zero volts the winding is shorted: no rest unless
	// the current has died down as well, which still sees.
	quiet := !p.driver.now.on && p.supply.settle() && p.slack() && p.shaft.still(p.duty(), open) && p.hand.until <= p.now
	if quiet {
		p.now = end
		p.warm(0, float64(length)*1e-9)
		p.note(0)
		return
	}
	if p.driver.now.on {
		p.seen.PoweredS += float64(length) * 1e-9
	}
	n := (length + longestStep - 1) / longestStep
	pr := p.propagators(length, n)
	// Half a step of the bus on either side of the shaft's keeps the pair second
	// order; two halves that meet are one whole.
	heat := 0.0
	p.supply.draw(p.drawn(), &pr.half)
	for k := range n {
		heat += p.step(pr, p.now+length*(k+1)/n, open)
		if k < n-1 {
			p.supply.draw(p.drawn(), &pr.full)
		}
	}
	p.supply.draw(p.drawn(), &pr.half)
	p.now = end
	p.warm(heat/float64(n), float64(length)*1e-9)
}

// duty is the present share of the bus on the winding, 0 with the output off.
func (p *plant) duty() float64 {
	if !p.driver.now.on {
		return 0
	}
	return p.driver.now.duty
}

// step carries the shaft over one step and returns the copper loss in W.
func (p *plant) step(pr *pair, end int64, open bool) float64 {
	s := &p.shaft
	v := 0.0
	if p.driver.now.on {
		v = p.driver.volts(p.supply.bus)
	}
	switch {
	case p.hand.until > p.now:
		p.turn(pr.h, end, v, open)
	case p.driver.blocks && p.driver.now.on && !open:
		p.oneWay(pr, v)
	case p.joint.spring > 0:
		p.joined(pr, v, open)
	default:
		s.step(pr, v, open)
	}
	p.note(v)
	return s.i * s.i * p.motor.r
}

// drawn is the current that the bridge takes from the bus. What its dead band
// loses comes from the bus while the motor drives, and from the motor while it
// brakes.
func (p *plant) drawn() float64 {
	amps := p.duty() * p.shaft.i
	if amps < 0 && p.driver.deadBand > 0 {
		amps = p.driver.volts(p.supply.bus) * p.shaft.i / max(p.supply.bus, 1)
	}
	return amps
}

// oneWay is a step of a bridge whose current cannot reverse: while the back-EMF
// is above the drive the winding is open.
func (p *plant) oneWay(pr *pair, v float64) {
	s := &p.shaft
	if s.i <= 0 && v <= p.motor.k*s.w {
		s.i = 0
		s.step(pr, 0, true)
		return
	}
	s.step(pr, v, false)
	s.i = max(s.i, 0)
}

// turn moves the shaft by hand to the instant end; the winding follows.
func (p *plant) turn(h float64, end int64, v float64, open bool) {
	s, span := &p.shaft, float64(p.hand.until-p.hand.from)
	x := math.Pi * float64(end-p.hand.from) / span
	s.th = p.hand.start + p.hand.by*(1-math.Cos(x))/2
	s.w = p.hand.by * math.Pi / 2 * math.Sin(x) / (span * 1e-9)
	s.dir = 0
	s.i = 0
	p.joint.th, p.joint.w, p.joint.torque, s.twist = s.th, 0, 0, 0 // held along
	if !open {
		s.i = (v - p.motor.k*s.w) / p.motor.r
	}
	if end >= p.hand.until {
		s.w = 0
	}
}

// warm updates winding temperature and, once it has moved by 0.05 K worth of
// copper, the resistance and with it the propagators.
func (p *plant) warm(watts, h float64) {
	p.winding.heat(watts, h)
	if r := p.winding.ohms(); math.Abs(r-p.motor.r) > 0.05*copperPerKelvin*p.motor.r {
		p.motor.r = r
		p.forget()
	}
}

// sensed is the angle in rad that the encoder sits on, at the motor shaft.
func (p *plant) sensed(onLoad bool) float64 {
	if onLoad && p.joint.spring > 0 {
		return p.joint.th
	}
	return p.shaft.th
}

// forget drops the propagators after a change of the motor's constants.
func (p *plant) forget() { p.lengths = [4]int64{} }

// propagators returns those for length/n, made once for every length in use.
func (p *plant) propagators(length, n int64) *pair {
	for i := range p.lengths {
		if p.lengths[i] == length {
			return &p.memory[i]
		}
	}
	i := p.oldest
	p.oldest = (p.oldest + 1) % len(p.memory)
	p.lengths[i] = length
	h := float64(length) * 1e-9 / float64(n)
	p.memory[i] = p.motor.pair(h)
	p.memory[i].full, p.memory[i].half = p.supply.span(h), p.supply.span(h/2)
	return &p.memory[i]
}
