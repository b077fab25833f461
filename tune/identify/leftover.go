package identify

import (
	"math"
	"sort"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/floats"
)

// spectrum measures what is left over slowly (systematic misfit) and sharply (a
// resonance), against the noise that cannot be foretold.
func (x *examiner) spectrum() []Finding {
	n := len(x.residual)
	ar := fitAutoregression(x.residual, min(12, n/20))
	x.e.noise = math.Sqrt(ar.variance)
	h, _ := x.e.proj.extent()
	width := min(max(3, int(x.timescale()/h/3)), max(3, n/20))
	slow := movingPower(x.residual, width)
	chance := ar.variance / float64(width)
	effect := math.Sqrt(math.Max(slow-chance, 0)) / x.spread
	z := (slow - chance) / (chance * math.Sqrt(2*float64(width)/float64(n)))
	out := []Finding{{testSystematic, effect, effect / math.Max(z, 1e-9)}}
	if x.reverses() {
		f := out[0]
		f.Test = testThroughZero
		out = append(out, f)
	}
	first := int(2 / x.timescale() / math.Pi * h * float64(len(periodogram(x.residual))))
	share, white := sharpestPeak(x.residual, max(8, first))
	total := math.Sqrt(floats.Dot(x.residual, x.residual)/float64(n)) / x.spread
	if share > 8*white {
		out = append(out, Finding{testResonance, math.Sqrt(share) * total, math.Sqrt(white) * total})
	}
	return append(out, x.jump()...)
}

// movingPower is the mean square of the moving average of r over width samples.
func movingPower(r []float64, width int) float64 {
	if len(r) < width {
		return 0
	}
	sum, total := 0.0, 0.0
	for i, v := range r {
		sum += v
		if i >= width {
			sum -= r[i-width]
		}
		if i >= width-1 {
			total += sum * sum
		}
	}
	return total / float64(len(r)-width+1) / float64(width*width)
}

// jump looks for a single change of the measured speed from one sample to the
// next that is out of line with all others: the eighth largest is the measure,
// since steps repeat and slips seldom do. Effect is the jump over the spread.
func (x *examiner) jump() []Finding {
	var d []float64
	for _, s := range x.e.proj.pieces {
		for _, sp := range s.spans {
			for i := sp.from + 1; i < sp.to; i++ {
				d = append(d, math.Abs(s.y[i]-s.y[i-1]))
			}
		}
	}
	if len(d) < 100 {
		return nil
	}
	sort.Float64s(d)
	largest, eighth := d[len(d)-1], d[len(d)-8]
	if eighth <= 0 || largest < 2.5*eighth {
		return nil
	}
	return []Finding{{testSlip, largest / x.spread, eighth / x.spread / 2}}
}

// sharpestPeak returns the largest share of the power of r that lies in one of 48
// narrow bands of its spectrum (each ±3 % of its frequency, at least two bins),
// and what white noise would put there.
// Bins below first are not looked at.
func sharpestPeak(r []float64, first int) (share, chance float64) {
	power := periodogram(r)
	total := floats.Sum(power)
	if !(total > 0) {
		return 0, 1
	}
	best, width := 0.0, 1
	for k := first; k < len(power)-2; k++ {
		half := max(1, k*6/100)
		if k+half >= len(power) {
			break
		}
		sum := floats.Sum(power[k-half : k+half+1])
		if sum > best {
			best, width = sum, 2*half+1
		}
	}
	return best / total, float64(width) / float64(len(power))
}

// periodogram returns the power of r by frequency bin, 0 to half the sampling
// rate (r is padded with zeros to a power of two), under a parabolic window (Welch).
func periodogram(r []float64) []float64 {
	n := len(r)
	padded := 1
	for padded < n {
		padded *= 2
	}
	w := make([]float64, padded) // the transform is quick for powers of two only
	for i := range r {
		s := float64(i) * float64(n-i)
		w[i] = r[i] * 4 * s / (float64(n) * float64(n))
	}
	out := make([]float64, padded/2+1)
	for k, c := range fourier.NewFFT(padded).Coefficients(nil, w) {
		out[k] = real(c)*real(c) + imag(c)*imag(c)
	}
	return out
}
