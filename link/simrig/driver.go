package simrig

import "math"

// order is what the board asks of the driver from an instant on.
type order struct {
	at   int64   // ns, when it reaches the bridge
	duty float64 // -1..1 of the bus
	on   bool    // false: the output is off
}

// driver is the power stage: it quantises the duty, delays it by its dead time,
// loses its dead band and gives what the bus has.
type driver struct {
	deadBand float64 // V that the bridge loses whichever way it drives
	delay    int64   // ns from an order to the bridge
	step     float64 // duty quantum, 0 for none
	least    float64 // lowest duty: -1, or 0 for a half bridge
	blocks   bool    // one quadrant: the current cannot reverse
	shorts   bool    // off means a shorted winding instead of an open one

	now   order
	queue []order // rising in at; orders under way in the delay
}

// ask hands the bridge a new duty at instant t, to act a dead time later. A duty
// the bridge cannot give is clipped; the clipped value is returned, and whether
// it was.
func (d *driver) ask(t int64, duty float64) (float64, bool) {
	got := min(max(duty, d.least), 1)
	if d.step > 0 {
		got = math.Round(got/d.step) * d.step
	}
	d.queue = append(d.queue, order{at: t + d.delay, duty: got, on: true})
	return got, duty > 1 || duty < d.least
}

// off takes the output away at once: the bridge's enable line does not pass
// through the modulator's delay, and what was still under way is void.
func (d *driver) off(t int64) {
	d.queue = d.queue[:0]
	d.now = order{at: t}
}

// due makes the orders whose time has come the present one.
func (d *driver) due(t int64) {
	n := 0
	for n < len(d.queue) && d.queue[n].at <= t {
		d.now = d.queue[n]
		n++
	}
	if n > 0 {
		d.queue = append(d.queue[:0], d.queue[n:]...)
	}
}

// next is the instant of the next change, or horizon if none is under way.
func (d *driver) next(horizon int64) int64 {
	if len(d.queue) > 0 && d.queue[0].at < horizon {
		return d.queue[0].at
	}
	return horizon
}

// volts is what reaches the winding from the given bus voltage.
func (d *driver) volts(bus float64) float64 {
	v := d.now.duty * bus
	switch {
	case v > d.deadBand:
		return v - d.deadBand
	case v < -d.deadBand:
		return v + d.deadBand
	}
	return 0
}
