package identify

import (
	"math"
	"math/cmplx"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// Welch estimates the frequency response at omega in rad/s from any record between
// two instants: pieces of the given length under a Hann window, half overlapping,
// their means taken out; G = ΣY·Ū/Σ|U|², and the coherence says how much of the
// speed the drive explains.
//
// Reference: P. D. Welch, IEEE Trans. Audio Electroacoust. 15 (1967) 70; the error
// of |G| is that of Periods, with nine elevenths of the half-overlapping pieces
// counting as independent (*from memory*).
func Welch(tr *trace.Trace, from, to, length float64, omega []float64) []FreqPoint {
	n := len(omega)
	uu, yy, yu := make([]float64, n), make([]float64, n), make([]complex128, n)
	pieces := 0.0
	for a := from; a+length <= to+1e-9; a += length / 2 {
		u, y, ok := hann(tr, a, length, omega)
		if !ok {
			continue
		}
		pieces++
		for k := range omega {
			uu[k] += real(u[k])*real(u[k]) + imag(u[k])*imag(u[k])
			yy[k] += real(y[k])*real(y[k]) + imag(y[k])*imag(y[k])
			yu[k] += y[k] * cmplx.Conj(u[k])
		}
	}
	out := make([]FreqPoint, n)
	free := math.Max(1, pieces*9/11)
	for k, w := range omega {
		out[k] = FreqPoint{Omega: w, Coherence: math.NaN()}
		if !(uu[k] > 0) || !(yy[k] > 0) {
			continue
		}
		out[k].G = yu[k] / complex(uu[k], 0)
		if pieces > 1 {
			c := (real(yu[k])*real(yu[k]) + imag(yu[k])*imag(yu[k])) / (yy[k] * uu[k])
			out[k].Coherence = math.Min(1, c)
			out[k].SD = cmplx.Abs(out[k].G) * math.Sqrt(math.Max(0, 1-c)/(2*free*math.Max(c, 1e-9)))
		}
	}
	return out
}

// hann transforms one piece.
func hann(tr *trace.Trace, from, length float64, omega []float64) (u, y []complex128, ok bool) {
	type one struct{ t, h, v, s, w float64 }
	var list []one
	var mv, ms, sum float64
	for i := 1; i < tr.Len(); i++ {
		h := tr.Time[i] - tr.Time[i-1]
		mid := tr.Time[i] - h/2 // of the time that the voltage was applied
		if mid < from || mid > from+length {
			continue
		}
		v := tr.Voltage[i]
		if tr.Hold == trace.From {
			v = tr.Voltage[i-1]
		}
		w := h * (0.5 - 0.5*math.Cos(2*math.Pi*(mid-from)/length))
		list = append(list, one{mid, h, v, (tr.Speed[i] + tr.Speed[i-1]) / 2, w})
		mv, ms, sum = mv+w*v, ms+w*list[len(list)-1].s, sum+w
	}
	if len(list) < 16 {
		return nil, nil, false
	}
	u, y = make([]complex128, len(omega)), make([]complex128, len(omega))
	for k, w := range omega {
		for _, x := range list {
			e := cmplx.Exp(complex(0, -w*x.t)) * complex(x.w, 0)
			u[k] += e * complex((x.v-mv/sum)*sinc(w*x.h/2), 0)
			// The mean of two samples and the speed window, divided out.
			y[k] += e * complex((x.s-ms/sum)/(math.Cos(w*x.h/2)*sinc(w*tr.Window/2)), 0) * cmplx.Exp(complex(0, w*tr.Window/2))
		}
	}
	return u, y, true
}

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
