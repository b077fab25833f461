package simrig

import (
	"math"
	"math/rand/v2"
)

// encoder turns the angle of the shaft into whole counts.
type encoder struct {
	perRad   float64 // counts per rad of the motor shaft
	edge     float64 // counts RMS of placement error of an edge, white
	phase    float64 // counts; where in a count the shaft stood at power-on
	onLoad   bool    // it sits beyond the coupling
	dead     bool
	reversed bool
	base     int64   // where the counter goes on after its channels were swapped
	slip     float64 // share of the rotation that a slipping coupling loses

	lost  float64 // rad lost in the coupling so far
	last  float64 // rad at the last look
	froze int64   // the count at which a dead encoder stays
}

// look follows the shaft to the angle th. It has to be called often enough for
// the slip to be spread over the rotation; once a loop period is.
func (e *encoder) look(th float64) {
	e.lost += e.slip * (th - e.last)
	e.last = th
}

// count latches the counter.
func (e *encoder) count(rng *rand.Rand) int64 {
	if e.dead {
		return e.froze
	}
	c := (e.last-e.lost)*e.perRad + e.phase
	if e.edge > 0 {
		c += e.edge * rng.NormFloat64()
	}
	n := int64(math.Floor(c))
	if e.reversed {
		n = -n
	}
	e.froze = e.base + n
	return e.froze
}

// reverse swaps the encoder's channels; the counter goes on from where it is.
func (e *encoder) reverse() {
	n := int64(math.Floor((e.last-e.lost)*e.perRad + e.phase))
	if e.reversed {
		n = -n
	}
	e.base += 2 * n
	e.reversed = !e.reversed
}

// window is the speed estimate of the board: counts over a whole number of loop
// periods, which is the mean speed over the window that ends at the latch.
type window struct {
	ring []int64
	at   int
}

// restart fills the window with one count: the shaft is taken to have rested.
func (w *window) restart(count int64, periods int) {
	w.ring = make([]int64, periods)
	for i := range w.ring {
		w.ring[i] = count
	}
	w.at = 0
}

// push enters the latched count and returns the counts travelled over the window.
func (w *window) push(count int64) int64 {
	d := count - w.ring[w.at]
	w.ring[w.at] = count
	if w.at++; w.at == len(w.ring) {
		w.at = 0
	}
	return d
}

// settled reports whether the whole window holds one count.
func (w *window) settled() bool {
	for _, c := range w.ring {
		if c != w.ring[0] {
			return false
		}
	}
	return true
}
