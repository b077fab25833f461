package simrig

import (
	"math"
	"time"
)

// Extremes is what the rig itself has seen since it was made, at every
// integration step: not what a console believes.
type Extremes struct {
	Volts float64 // highest |voltage| on the winding, V
	Speed float64 // highest |speed| of the shaft, rad/s
	Amps  float64 // highest |winding current|, A
	Bus   float64 // highest bus voltage, V
	Accel float64 // highest |acceleration| over a millisecond or more, rad/s²
	Turns float64 // farthest from the angle at power-on, turns of the motor shaft

	angle float64 // Turns in rad

	PoweredS float64 // seconds with the output on

	Violations []Violation // excursions out of the nameplate's envelope
}

// Violation is one excursion out of the nameplate's envelope.
type Violation struct {
	What  string // volts, speed, current or bus
	At    time.Duration
	Worst float64 // in the unit of the limit
	Limit float64
}

// violationsMax bounds the list: later excursions are not kept.
const violationsMax = 1000

// bounds judges the nameplate's envelope.
type bounds struct {
	rows [4]bound
	out  bool // one of them is passed now
	// acceleration is judged over a span, since at one step it says little
	fromT int64
	fromW float64
}

type bound struct {
	what  string
	limit float64
	out   int // index + 1 of the violation that is going on
}

func (n *Nameplate) bounds() bounds {
	return bounds{rows: [4]bound{
		{what: "volts", limit: n.VoltsMax},
		{what: "speed", limit: n.SpeedMax},
		{what: "current", limit: n.AmpsMax},
		{what: "bus", limit: n.BusMax},
	}}
}

// slack is the share by which a value must be over a limit to count: rounding of
// a value held at its limit is no excursion.
const slack = 1e-9

// note takes the present instant into the extremes.
func (p *plant) note(v float64) {
	s, e := &p.shaft, &p.seen
	b := &p.limits
	now := [4]float64{math.Abs(v), math.Abs(s.w), math.Abs(s.i), p.supply.bus}
	e.Volts, e.Speed = larger(e.Volts, now[0]), larger(e.Speed, now[1])
	e.Amps, e.Bus = larger(e.Amps, now[2]), larger(e.Bus, now[3])
	e.angle = larger(e.angle, math.Abs(s.th))
	if !b.out && now[0] <= b.rows[0].limit && now[1] <= b.rows[1].limit && now[2] <= b.rows[2].limit && now[3] <= b.rows[3].limit {
		return
	}
	b.out = false
	for k := range b.rows {
		r := &b.rows[k]
		switch {
		case now[k] <= r.limit*(1+slack):
			r.out = 0
		case r.out > 0:
			w := &e.Violations[r.out-1]
			w.Worst = max(w.Worst, now[k])
		case len(e.Violations) < violationsMax:
			e.Violations = append(e.Violations, Violation{What: r.what, At: time.Duration(p.now), Worst: now[k], Limit: r.limit})
			r.out = len(e.Violations)
		}
		b.out = b.out || r.out > 0
	}
}

// larger is max without its care for not-a-numbers, which nothing here makes.
func larger(a, b float64) float64 {
	if b > a {
		return b
	}
	return a
}

// noteSpan takes the acceleration since the last call into the extremes; the
// board calls it once a loop period.
func (p *plant) noteSpan() {
	b := &p.limits
	dt := p.now - b.fromT
	if dt < int64(time.Millisecond) {
		return
	}
	p.seen.Accel = max(p.seen.Accel, math.Abs(p.shaft.w-b.fromW)/(float64(dt)*1e-9))
	b.fromT, b.fromW = p.now, p.shaft.w
}
