package simrig

import (
	"math"
	"math/rand/v2"
)

// encoder turns the angle of the shaft into whole counts.
type encoder struct {
	perRad   float64   // counts per rad of the motor shaft
	edges    []float64 // counts by which each edge of the disc is out of place, nil for none
	phase    float64   // counts; where in a count the shaft stood at power-on
	onLoad   bool      // it sits beyond the coupling
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

// misplaced draws where the edges of a disc lie: RMS counts off, each for good, so
// that a shaft at rest reads still and a turning one repeats its error every
// turn. No edge passes its neighbour.
func misplaced(rms float64, perTurn int, rng *rand.Rand) []float64 {
	if rms == 0 {
		return nil
	}
	e := make([]float64, min(perTurn, 1<<12))
	for i := range e {
		e[i] = min(max(rms*rng.NormFloat64(), -0.45), 0.45)
	}
	return e
}

// place is the error of edge n.
func (e *encoder) place(n int64) float64 {
	k := n % int64(len(e.edges))
	if k < 0 {
		k += int64(len(e.edges))
	}
	return e.edges[k]
}

// index is the number of edges passed at the present angle.
func (e *encoder) index() int64 {
	c := (e.last-e.lost)*e.perRad + e.phase
	n := int64(math.Floor(c))
	if e.edges == nil {
		return n
	}
	switch off := c - float64(n); {
	case off < e.place(n):
		return n - 1
	case off >= 1+e.place(n+1):
		return n + 1
	}
	return n
}

// count latches the counter.
func (e *encoder) count() int64 {
	if e.dead {
		return e.froze
	}
	n := e.index()
	if e.reversed {
		n = -n
	}
	e.froze = e.base + n
	return e.froze
}

// reverse swaps the encoder's channels; the counter goes on from where it is.
func (e *encoder) reverse() {
	n := e.index()
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
