package design

import (
	"math"
	"math/cmplx"

	"gainwright/tune/model"
)

// NoiseGain returns how much of the noise in the measured speed reaches the
// drive, in V per rad/s. Sampled loop: RMS of the drive over RMS of white noise
// on the samples, (1/π·∫|C/(1+L)|²dφ)^½ over half the circle. Continuous loop:
// the largest |C/(1+L)|, since white noise has no RMS there. The loop must be
// stable.
func NoiseGain(m model.Linear, g Gains) (float64, error) {
	l, err := newLoop(m, g)
	if err != nil {
		return 0, err
	}
	pts, err := l.scan()
	if err != nil {
		return 0, err
	}
	return l.noiseGain(pts), nil
}

func (l *loop) noiseGain(pts []point) float64 {
	gain := func(p point) float64 { return cmplx.Abs(l.controller(p.w) / (1 + p.l)) }
	before := gain(pts[0])
	top, sum := before, before*before*pts[0].w
	for i := 1; i < len(pts); i++ {
		v := gain(pts[i])
		top = math.Max(top, v)
		sum += (pts[i].w - pts[i-1].w) * (v*v + before*before + v*before) / 3
		before = v
	}
	if math.IsInf(l.end, 1) {
		return top
	}
	return math.Sqrt(sum / l.end)
}

// PeakDrive returns the largest |u| in V over a setpoint step of size rad/s
// from rest, without limits. A continuous loop
// is taken at a sample time of a hundredth of the inverse of its crossover.
func PeakDrive(m model.Linear, g Gains, size float64) (float64, error) {
	g = g.Parallel()
	if g.SampleTime == 0 {
		margins, err := JudgeFrequency(m, g)
		if err != nil {
			return 0, err
		}
		if !margins.Crossover.Known() {
			return math.Abs(g.Kp*g.SetpointWeight) * size, nil
		}
		g.SampleTime = 0.01 / float64(margins.Crossover)
		if g.Kd != 0 && g.DerivativeFilter > 0 {
			g.SampleTime = math.Min(g.SampleTime, g.DerivativeFilter/4)
		}
	}
	p, err := newSampledPlant(m, g)
	if err != nil {
		return 0, err
	}
	g.UMin, g.UMax = nil, nil
	c := newLaw(g)
	var peak float64
	for n, since := 0, 0; n < 1<<18 && since < 4096; n++ {
		u := c.next(size, p.speed(), 0)
		since++
		if a := math.Abs(u); a > peak*(1+1e-9) {
			peak, since = a, 0
		}
		p.apply(u)
	}
	return peak, nil
}
