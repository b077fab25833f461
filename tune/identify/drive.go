package identify

import "math"

// drive is the voltage applied during one gap-free stretch: u[j] holds from
// t[j] to t[j+1], before holds ahead of t[0], and the last entry holds for ever.
// Times are seconds after the first sample of the stretch.
type drive struct {
	t, u   []float64
	before float64
	iu     []float64 // ∫u from t[0] to t[j], V·s
	iiu    []float64 // ∫∫u likewise, V·s²
	even   bool
	h      float64 // s, the interval where even
}

// evenTolerance is how far, in intervals, the stamps of an even record may lie
// from a straight line; decimal stamps in a file miss it by less.
const evenTolerance = 1e-7

func newDrive(t, u []float64, before float64) *drive {
	n := len(t)
	d := &drive{t: t, u: u, before: before, iu: make([]float64, n), iiu: make([]float64, n)}
	for j := 1; j < n; j++ {
		h := t[j] - t[j-1]
		d.iu[j] = d.iu[j-1] + h*u[j-1]
		d.iiu[j] = d.iiu[j-1] + h*(d.iu[j-1]+0.5*h*u[j-1])
	}
	if n < 2 {
		return d
	}
	d.h = (t[n-1] - t[0]) / float64(n-1)
	d.even = true
	for j := range t {
		if math.Abs(t[j]-t[0]-float64(j)*d.h) > evenTolerance*d.h {
			d.even = false
			break
		}
	}
	return d
}

// queries tells for every sample i at which point of the drive it looks: the
// interval index[i] (−1: ahead of the first knot) and the time offset[i] behind
// that interval's start. On an even record shift and off replace both tables.
type queries struct {
	index  []int32
	offset []float64
	shift  int     // even: interval of sample i is i − shift
	off    float64 // even: offset into the interval, 0 < off ≤ h
}

// look aims q at t[i] − delay for every sample. delay may be negative.
func (d *drive) look(delay float64, q *queries) {
	n := len(d.t)
	if d.even {
		m := math.Floor(delay / d.h)
		f := delay - m*d.h
		q.shift = int(m) + 1
		q.off = d.h - f
		return
	}
	if len(q.index) != n {
		q.index, q.offset = make([]int32, n), make([]float64, n)
	}
	j := -1
	for i := range d.t {
		at := d.t[i] - delay
		for j+1 < n && d.t[j+1] < at {
			j++
		}
		q.index[i] = int32(j)
		if j < 0 {
			q.offset[i] = at - d.t[0]
		} else {
			q.offset[i] = at - d.t[j]
		}
	}
}
