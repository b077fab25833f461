package identify

import (
	"math"
	"math/cmplx"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// Lines to each side of a frequency that the local fit takes in, and the shapes of
// response and of what swings in: constant, slope and bend of each (our choice of
// numbers, the method's of order).
const (
	localLeast = 4
	localMost  = 10
	localShare = 3 // of the number of the line
	localOrder = 3
)

// Local estimates the frequency response at omega in rad/s from any one record
// between two instants by local polynomials: about each frequency both the response
// and what the state at either end of the record adds are smooth, and fitted together
// to the lines of the record's own Fourier integrals,
//
//	Y(k) = (G + g1·r + g2·r²)·U(k) + t0 + t1·r + t2·r²,  r the distance from ω.
//
// Nothing leaks, as it does from windowed pieces of a short record. The coherence is
// the share of |Y|² that the fit explains, less what chance would; the standard
// deviation is pooled over neighbours.
//
// Reference: R. Pintelon and J. Schoukens, System Identification: A Frequency Domain
// Approach, 2nd ed. (Wiley 2012), chapter 7, local polynomial method (*from memory*).
func Local(tr *trace.Trace, from, to float64, omega []float64) []FreqPoint {
	out := make([]FreqPoint, len(omega))
	step := 2 * math.Pi / (to - from)
	top := 0.0
	for _, w := range omega {
		top = math.Max(top, w)
	}
	lines := make([]float64, int(top/step)+2*localMost+1)
	for k := range lines {
		lines[k] = float64(k+1) * step
	}
	u, y := Fourier(tr, from, to, lines)
	for k, w := range lines { // time from the beginning of the record on: else what swings in is not smooth
		turn := cmplx.Exp(complex(0, w*from))
		u[k], y[k] = u[k]*turn, y[k]*turn
	}
	variance := make([]float64, len(omega))
	for i, w := range omega {
		out[i], variance[i] = localPoint(u, y, w/step-1)
		out[i].Omega = w
	}
	for i := range out {
		sum, n := 0.0, 0.0
		for k := max(0, i-1); k <= min(len(out)-1, i+1); k++ {
			if v := variance[k]; v == v {
				sum, n = sum+v, n+1
			}
		}
		out[i].SD *= math.Sqrt(sum / math.Max(1, n))
	}
	return out
}

// localPoint is the response at place x in the list of lines. The SD that it returns
// is for a variance of one of each part of Y; the variance comes beside it.
func localPoint(u, y []complex128, x float64) (FreqPoint, float64) {
	none := FreqPoint{Coherence: math.NaN()}
	half := max(localLeast, min(localMost, int(x+1)/localShare))
	first := max(0, int(math.Round(x))-half)
	last := min(len(u)-1, first+2*half)
	const unknown = 4 * localOrder // real and imaginary parts
	a, b := make([]float64, unknown*unknown), make([]float64, unknown)
	row := func(k int) (shape [2 * localOrder]complex128) {
		r := (float64(k) - x) / float64(half)
		p := 1.0
		for o := range localOrder {
			shape[o], shape[localOrder+o] = u[k]*complex(p, 0), complex(p, 0)
			p *= r
		}
		return shape
	}
	uu, yy := 0.0, 0.0
	for k := first; k <= last; k++ {
		uu, yy = uu+squared(u[k]), yy+squared(y[k])
	}
	lift := complex(math.Sqrt(uu/float64(last-first+1)), 0) // columns of about one size
	if uu == 0 || yy == 0 {
		return none, math.NaN()
	}
	for k := first; k <= last; k++ {
		s := row(k)
		var re, im [unknown]float64
		for o, c := range s {
			if o >= localOrder {
				c *= lift
			}
			re[2*o], re[2*o+1], im[2*o], im[2*o+1] = real(c), -imag(c), imag(c), real(c)
		}
		for i := range unknown {
			for j := range unknown {
				a[i*unknown+j] += re[i]*re[j] + im[i]*im[j]
			}
			b[i] += re[i]*real(y[k]) + im[i]*imag(y[k])
		}
	}
	right := append([]float64(nil), b...)
	if cholesky(a, unknown) > 0 {
		return none, math.NaN()
	}
	choleskySolve(a, unknown, b)
	explained := 0.0
	for i := range b {
		explained += b[i] * right[i]
	}
	m := float64(last - first + 1)
	free := m - 2*localOrder
	rest := math.Max(0, yy-explained) / free
	unit := choleskyInverse(a, unknown)[0]
	return FreqPoint{G: complex(b[0], b[1]), SD: math.Sqrt(math.Max(0, unit)), Coherence: math.Max(0, math.Min(1, 1-rest*m/yy))}, rest / 2
}

func squared(c complex128) float64 { return real(c)*real(c) + imag(c)*imag(c) }

// Peak is a place where the response stands out above a smooth model.
type Peak struct {
	Omega float64 // rad/s
	Ratio float64 // |G| over the model's
}

// Bounds of a peak (our choice).
const (
	peakRatio  = 1.25
	peakSigmas = 4.0
)

// Peaks lists local maxima of |G| over that of m that are more than a quarter above
// it and above both neighbours, by more than chance.
func Peaks(points []FreqPoint, m model.Linear) []Peak {
	ratio := func(i int) (r, sd float64) {
		g := cmplx.Abs(m.At(points[i].Omega))
		return cmplx.Abs(points[i].G) / g, points[i].SD / g
	}
	var out []Peak
	for i := range points {
		r, sd := ratio(i)
		if !(r-peakSigmas*sd > 1) || r < peakRatio {
			continue
		}
		top := true
		for _, k := range []int{i - 1, i + 1} {
			if k >= 0 && k < len(points) {
				n, _ := ratio(k)
				top = top && r > n
			}
		}
		if top {
			out = append(out, Peak{points[i].Omega, r})
		}
	}
	return out
}
