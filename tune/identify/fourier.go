package identify

import (
	"fmt"
	"math"
	"math/cmplx"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// FreqPoint is a measured point of a frequency response.
type FreqPoint struct {
	Omega     float64    // rad/s
	G         complex128 // rad/s per V
	SD        float64    // of the real and of the imaginary part of G; 0: not known
	Coherence float64    // 0 to 1, NaN where there was one period only
}

// Fourier returns the Fourier integrals 2/(to−from)·∫x·e^(−jωt)dt of voltage and
// speed from one instant of a trace to another, at each ω in rad/s. The voltage is
// integrated exactly as the steps that it is. The speed is taken as straight lines
// between its samples, and what averaging over the window and those lines do to it
// is divided out. Both together are exact at multiples of 2π/(to−from) in a
// periodic state, up to what lies above half of the sampling rate.
func Fourier(tr *trace.Trace, from, to float64, omega []float64) (u, y []complex128) {
	u, y = make([]complex128, len(omega)), make([]complex128, len(omega))
	scale := complex(2/(to-from), 0)
	n := tr.Len()
	h := (tr.Time[n-1] - tr.Time[0]) / float64(n-1)
	for k, w := range omega {
		jw := complex(0, w)
		was, last := math.NaN(), complex128(0) // the end of one step is the beginning of the next
		for i := 1; i < n; i++ {
			a, b := math.Max(tr.Time[i-1], from), math.Min(tr.Time[i], to)
			if b <= a {
				continue
			}
			v, span := tr.Voltage[i], tr.Time[i]-tr.Time[i-1]
			if tr.Hold == trace.From {
				v = tr.Voltage[i-1]
			}
			ea, eb := last, cmplx.Exp(-jw*complex(b, 0))
			if a != was {
				ea = cmplx.Exp(-jw * complex(a, 0))
			}
			was, last = b, eb
			slope := (tr.Speed[i] - tr.Speed[i-1]) / span
			ya, yb := tr.Speed[i-1]+slope*(a-tr.Time[i-1]), tr.Speed[i-1]+slope*(b-tr.Time[i-1])
			if w == 0 {
				u[k] += complex(v*(b-a), 0)
				y[k] += complex((ya+yb)/2*(b-a), 0)
				continue
			}
			u[k] += complex(v, 0) * (ea - eb) / jw
			// ∫(y)e^(−jωt)dt by parts.
			y[k] += (complex(ya, 0)*ea-complex(yb, 0)*eb)/jw + complex(slope, 0)*(ea-eb)/(jw*jw)
		}
		u[k], y[k] = u[k]*scale, y[k]*scale
		if w > 0 {
			y[k] /= complex(sinc(w*tr.Window/2)*sinc(w*h/2)*sinc(w*h/2), 0) * cmplx.Exp(complex(0, -w*tr.Window/2))
		} else {
			u[k], y[k] = u[k]/2, y[k]/2
		}
	}
	return u, y
}

func sinc(x float64) float64 {
	if math.Abs(x) < 1e-6 {
		return 1
	}
	return math.Sin(x) / x
}

// Periods estimates the frequency response at omega from repeats of one period:
// starts are their beginnings, long their length, or spans of changing length
// where ends is given. G is ΣY·Ū/Σ|U|², the coherence |ΣY·Ū|²/(Σ|Y|²·Σ|U|²), and the
// standard deviation comes from what the repeats leave over.
//
// Reference: Bendat & Piersol, Random Data, 4th ed. (Wiley 2010), chapter 9 (*from
// memory*): the random error of |G| is √(1−γ²)/(|γ|·√(2n)).
func Periods(tr *trace.Trace, starts, ends, omega []float64) []FreqPoint {
	uu, yy := make([]float64, len(omega)), make([]float64, len(omega))
	yu := make([]complex128, len(omega))
	for p := range starts {
		u, y := Fourier(tr, starts[p], ends[p], omega)
		for k := range omega {
			uu[k] += real(u[k])*real(u[k]) + imag(u[k])*imag(u[k])
			yy[k] += real(y[k])*real(y[k]) + imag(y[k])*imag(y[k])
			yu[k] += y[k] * cmplx.Conj(u[k])
		}
	}
	out := make([]FreqPoint, len(omega))
	n := float64(len(starts))
	for k, w := range omega {
		out[k] = FreqPoint{Omega: w, Coherence: math.NaN()}
		if !(uu[k] > 0) {
			continue
		}
		out[k].G = yu[k] / complex(uu[k], 0)
		if n > 1 && yy[k] > 0 {
			c := real(yu[k])*real(yu[k]) + imag(yu[k])*imag(yu[k])
			out[k].Coherence = math.Min(1, c/(yy[k]*uu[k]))
			rest := math.Max(0, yy[k]-c/uu[k]) / (2 * (n - 1)) // of each part of Y
			out[k].SD = math.Sqrt(rest / uu[k])
		}
	}
	return out
}

// FreqFit is a model of real poles and dead time fitted to points of a frequency
// response.
type FreqFit struct {
	Gain, Tau, Tau2, Dead         float64
	GainSD, TauSD, Tau2SD, DeadSD float64
	Misfit                        float64 // root mean square of the residuals in their own standard deviations
	N                             int
}

// Model returns the fit as a linear model.
func (f FreqFit) Model() model.Linear {
	if f.Tau2 > 0 {
		return model.SecondOrder(f.Gain, f.Tau, f.Tau2, f.Dead)
	}
	return model.FirstOrder(f.Gain, f.Tau, f.Dead)
}

// freqFit is the least-squares problem in ln K, ln T1, (ln T2,) L.
type freqFit struct {
	points []FreqPoint
	order  int
}

func (p freqFit) Dim() int { return p.order + 2 }

func (p freqFit) at(x []float64, w float64) complex128 {
	g := complex(math.Exp(x[0]), 0) * cmplx.Exp(complex(0, -w*x[len(x)-1]))
	for _, l := range x[1 : len(x)-1] {
		g /= complex(1, w*math.Exp(l))
	}
	return g
}

func (p freqFit) Evaluate(x []float64, pt *Point) bool {
	d := p.Dim()
	var jac, res []float64
	for _, q := range p.points {
		g := p.at(x, q.Omega)
		r := (q.G - g) / complex(q.SD, 0)
		// Of ln K, ln T, L: the derivatives in closed form.
		col := make([]complex128, d)
		col[0] = g
		for i := 1; i < d-1; i++ {
			t := math.Exp(x[i])
			col[i] = -g * complex(0, q.Omega*t) / complex(1, q.Omega*t)
		}
		col[d-1] = -g * complex(0, q.Omega)
		for part := range 2 {
			for i := range col {
				c := col[i] / complex(q.SD, 0)
				if part == 0 {
					jac = append(jac, real(c))
				} else {
					jac = append(jac, imag(c))
				}
			}
		}
		res = append(res, real(r), imag(r))
	}
	for _, v := range append(jac, res...) {
		if !finite(v) {
			return false
		}
	}
	// Solve takes residuals as model less data.
	for i := range res {
		res[i] = -res[i]
	}
	Compress(jac, d, res, pt)
	return true
}

// FitFrequency fits a gain, one or two real poles and a dead time to points of a
// frequency response. Points without a standard deviation get 1 % of their size
// and count alike. The error wraps ErrData.
func FitFrequency(points []FreqPoint, order int) (FreqFit, error) {
	p := freqFit{order: order}
	largest := 0.0
	for _, q := range points {
		if cmplx.Abs(q.G) > 0 && q.Omega >= 0 {
			if !(q.SD > 0) {
				q.SD = 0.01 * cmplx.Abs(q.G)
			}
			p.points = append(p.points, q)
			largest = math.Max(largest, cmplx.Abs(q.G))
		}
	}
	if 2*len(p.points) < p.Dim()+1 || order < 1 || order > 2 {
		return FreqFit{}, fmt.Errorf("%w: %d points of a frequency response are too few for order %d", ErrData, len(p.points), order)
	}
	best, found := Solution{}, false
	for _, corner := range []float64{0.2, 1, 5} {
		mid := p.points[len(p.points)/2].Omega
		if mid <= 0 {
			mid = p.points[len(p.points)-1].Omega
		}
		start := []float64{math.Log(largest), math.Log(corner / mid)}
		lower, upper := []float64{-30, -20}, []float64{30, 10}
		if order == 2 {
			start, lower, upper = append(start, math.Log(0.1*corner/mid)), append(lower, -20), append(upper, 10)
		}
		start, lower, upper = append(start, 0.1/mid), append(lower, -1), append(upper, 10)
		s, err := Solve(p, start, Settings{Lower: lower, Upper: upper, StepMax: 400})
		if err == nil && (!found || s.Point.Cost < best.Point.Cost) {
			best, found = s, true
		}
	}
	if !found {
		return FreqFit{}, fmt.Errorf("%w: no model fits the frequency response", ErrData)
	}
	f := FreqFit{N: len(p.points)}
	f.Misfit = math.Sqrt(best.Point.Cost / float64(2*f.N-p.Dim()))
	cov, grow := best.Point.Covariance(), math.Max(1, f.Misfit)
	d := p.Dim()
	x := best.Params
	f.Gain, f.Tau, f.Dead = math.Exp(x[0]), math.Exp(x[1]), x[d-1]
	f.GainSD, f.TauSD, f.DeadSD = grow*f.Gain*math.Sqrt(cov[0]), grow*f.Tau*math.Sqrt(cov[d+1]), grow*math.Sqrt(cov[d*d-1])
	if order == 2 {
		f.Tau2 = math.Exp(x[2])
		f.Tau2SD = grow * f.Tau2 * math.Sqrt(cov[2*d+2])
		if f.Tau2 > f.Tau {
			f.Tau, f.Tau2, f.TauSD, f.Tau2SD = f.Tau2, f.Tau, f.Tau2SD, f.TauSD
		}
	}
	return f, nil
}
