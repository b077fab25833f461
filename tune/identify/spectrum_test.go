package identify

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"gainwright/tune/model"
)

// A pseudo-random record of a motor with a resonance: the response is that of the
// transfer function, and the peak is found where it is.
func TestWelchFindsTheResonance(t *testing.T) {
	rng := rand.New(rand.NewPCG(41, 1))
	r := zooRig{gain: 20, tau: 0.08, noise: 0.4, modeW: 2 * math.Pi * 9, modeZ: 0.08, modeGain: 0.6}
	const h = 0.002
	tr := r.run(rng, prbs(8, 2, 10, 12000), h)
	var omega []float64
	for i := range 24 {
		omega = append(omega, 2*math.Pi*0.8*math.Pow(25, float64(i)/23))
	}
	points := Welch(tr, 1, 23.9, 2, omega)
	smooth := model.FirstOrder(20, 0.08, 0)
	for _, q := range points {
		s := complex(0, q.Omega)
		mode := complex(r.modeW*r.modeW, 0) / (s*s + complex(2*r.modeZ*r.modeW, 0)*s + complex(r.modeW*r.modeW, 0))
		want := smooth.At(q.Omega) * (complex(1-r.modeGain, 0) + complex(r.modeGain, 0)*mode)
		if q.Coherence > 0.9 && cmplx.Abs(q.G-want) > 0.12*cmplx.Abs(want)+4*q.SD {
			t.Errorf("%.3g Hz: %.4g, want %.4g ± %.2g, coherence %.3f", q.Omega/(2*math.Pi), q.G, want, q.SD, q.Coherence)
		}
	}
	peaks := Peaks(points, smooth)
	if len(peaks) != 1 || math.Abs(peaks[0].Omega/r.modeW-1) > 0.12 {
		t.Errorf("peaks %+v, want one at %.3g rad/s", peaks, r.modeW)
	}
	// The same motor without the mode has none.
	r.modeW = 0
	if peaks := Peaks(Welch(r.run(rng, prbs(8, 2, 10, 12000), h), 1, 23.9, 2, omega), smooth); len(peaks) != 0 {
		t.Errorf("peaks %+v of one lag", peaks)
	}
}

// Noise alone has no coherence.
func TestCoherenceOfNoise(t *testing.T) {
	rng := rand.New(rand.NewPCG(41, 2))
	r := zooRig{gain: 0, tau: 0.08, noise: 1}
	points := Welch(r.run(rng, prbs(8, 2, 10, 12000), 0.002), 1, 23.9, 1, []float64{10, 20, 40, 80})
	for _, q := range points {
		if q.Coherence > 0.3 {
			t.Errorf("%g rad/s: coherence %.2f", q.Omega, q.Coherence)
		}
	}
}
