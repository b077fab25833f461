package identify

import "gonum.org/v1/gonum/dsp/fourier"

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
