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
func TestLocalFindsTheResonance(t *testing.T) {
	rng := rand.New(rand.NewPCG(41, 1))
	r := zooRig{gain: 20, tau: 0.08, noise: 0.4, modeW: 2 * math.Pi * 9, modeZ: 0.08, modeGain: 0.6}
	const h = 0.002
	tr := r.run(rng, prbs(8, 2, 10, 6000), h)
	var omega []float64
	for i := range 24 {
		omega = append(omega, 2*math.Pi*0.8*math.Pow(25, float64(i)/23))
	}
	points := Local(tr, 1, 11.9, omega)
	smooth := model.FirstOrder(20, 0.08, 0)
	for _, q := range points {
		s := complex(0, q.Omega)
		mode := complex(r.modeW*r.modeW, 0) / (s*s + complex(2*r.modeZ*r.modeW, 0)*s + complex(r.modeW*r.modeW, 0))
		want := smooth.At(q.Omega) * (complex(1-r.modeGain, 0) + complex(r.modeGain, 0)*mode)
		if q.Coherence > 0.9 && cmplx.Abs(q.G-want) > 0.04*cmplx.Abs(want)+4*q.SD {
			t.Errorf("%.3g Hz: %.4g, want %.4g ± %.2g, coherence %.3f", q.Omega/(2*math.Pi), q.G, want, q.SD, q.Coherence)
		}
	}
	peaks := Peaks(points, smooth)
	if len(peaks) != 1 || math.Abs(peaks[0].Omega/r.modeW-1) > 0.12 {
		t.Errorf("peaks %+v, want one at %.3g rad/s", peaks, r.modeW)
	}
	// The same motor without the mode has none.
	r.modeW = 0
	if peaks := Peaks(Local(r.run(rng, prbs(8, 2, 10, 6000), h), 1, 11.9, omega), smooth); len(peaks) != 0 {
		t.Errorf("peaks %+v of one lag", peaks)
	}
}

// Noise alone has no coherence.
func TestCoherenceOfNoise(t *testing.T) {
	rng := rand.New(rand.NewPCG(41, 2))
	r := zooRig{gain: 0, tau: 0.08, noise: 1}
	points := Local(r.run(rng, prbs(8, 2, 10, 12000), 0.002), 1, 23.9, []float64{10, 20, 40, 80})
	for _, q := range points {
		if q.Coherence > 0.3 {
			t.Errorf("%g rad/s: coherence %.2f", q.Omega, q.Coherence)
		}
	}
}

// A record of six pieces' length, begun and ended anywhere: the response at the
// lowest lines is that of the transfer function, where pieces under a window were a
// fifth off.
func TestLocalOfAShortRecord(t *testing.T) {
	rng := rand.New(rand.NewPCG(41, 3))
	r := zooRig{gain: 20, tau: 0.08, noise: 0.2}
	tr := r.run(rng, prbs(8, 2, 10, 3000), 0.002)
	from, to := 1.03, 5.03
	var omega []float64
	for i := range 10 {
		omega = append(omega, 4*math.Pi/0.96*math.Pow(8/0.08/(4*math.Pi/0.96), float64(i)/9))
	}
	for _, q := range Local(tr, from, to, omega) {
		want := model.FirstOrder(20, 0.08, 0).At(q.Omega)
		if off := cmplx.Abs(q.G-want) / cmplx.Abs(want); off > 0.03+3*q.SD/cmplx.Abs(want) || q.SD > 0.1*cmplx.Abs(want) {
			t.Errorf("%.3g Hz: %.1f %% off, ± %.2g of %.3g", q.Omega/(2*math.Pi), 100*off, q.SD, cmplx.Abs(want))
		}
	}
}
