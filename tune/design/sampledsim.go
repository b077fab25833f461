package design

import (
	"math"

	"gainwright/tune/model"
)

// sampledPlant runs the motor between the samples of a loop, exactly.
type sampledPlant struct {
	drive  model.Sampled // path of the drive: dead time and compute delay
	load   model.Sampled // path of a load at the motor's input: dead time alone
	x, dx  []float64
	past   []float64 // drive history, a ring
	k      int
	hasD   bool
	loaded bool
}

func newSampledPlant(m model.Linear, g Gains) (*sampledPlant, error) {
	drive, err := m.Sample(g.SampleTime, g.ComputeDelay)
	if err != nil {
		return nil, err
	}
	load, err := m.Sample(g.SampleTime, 0)
	if err != nil {
		return nil, err
	}
	return &sampledPlant{
		drive: drive, load: load, x: make([]float64, drive.N), dx: make([]float64, drive.N),
		past: make([]float64, drive.Whole+2), hasD: drive.D != 0,
	}, nil
}

// at returns the drive of j samples ago.
func (p *sampledPlant) at(j int) float64 {
	if j > p.k {
		return 0
	}
	return p.past[(p.k-j)%len(p.past)]
}

func (p *sampledPlant) stepLoad(k int) float64 {
	if p.loaded && k >= 0 {
		return 1
	}
	return 0
}

// speed returns the speed at the present sample, before its drive is given.
func (p *sampledPlant) speed() float64 {
	var y float64
	for i, c := range p.drive.C {
		y += c * p.x[i]
	}
	if p.hasD {
		y += p.drive.D * (p.at(p.drive.Whole+1) + p.stepLoad(p.k-p.load.Whole-1))
	}
	return y
}

// apply gives the drive u of the present sample and moves on to the next.
func (p *sampledPlant) apply(u float64) {
	p.past[p.k%len(p.past)] = u
	if p.loaded {
		l0, l1 := p.stepLoad(p.k-p.load.Whole), p.stepLoad(p.k-p.load.Whole-1)
		d := &p.load
		for i := range p.dx {
			p.dx[i] = d.G0[i]*l0 + d.G1[i]*l1
		}
	} else {
		clear(p.dx)
	}
	d := &p.drive
	u0, u1 := p.at(d.Whole), p.at(d.Whole+1)
	for i := range p.dx {
		v := d.G0[i]*u0 + d.G1[i]*u1
		for j, e := range d.E[i*d.N : (i+1)*d.N] {
			v += e * p.x[j]
		}
		p.dx[i] += v
	}
	for i := range p.x {
		p.x[i] += p.dx[i]
	}
	p.k++
}

// unitStep returns the speeds of the loop from the start until they come to
// rest, at most 2²⁰ samples. The limits of the drive are left out: a unit
// response is that of the linear loop.
func unitStep(m model.Linear, g Gains, r float64, load bool) ([]float64, error) {
	p, err := newSampledPlant(m, g)
	if err != nil {
		return nil, err
	}
	p.loaded = load
	g.UMin, g.UMax = nil, nil
	c := newLaw(g)
	var y []float64
	var size float64
	for n := 256; ; n *= 2 {
		for len(y) < n {
			v := p.speed()
			y = append(y, v)
			p.apply(c.next(r, v, g.Feedforward.linear(r)))
		}
		recent, low, high := 0.0, math.Inf(1), math.Inf(-1)
		for i, v := range y {
			e := math.Abs(v - r)
			size = math.Max(size, e)
			if i >= n/2 {
				recent, low, high = math.Max(recent, e), math.Min(low, v), math.Max(high, v)
			}
		}
		if recent <= tailSampled*size || g.Ki == 0 && high-low <= tailSampled*size || n >= 1<<20 {
			return y, nil
		}
	}
}

// sampledResponses measures the loop on its samples: the rise interpolated, the
// settling one period after the last sample outside, the IAE as a sum.
func sampledResponses(m model.Linear, g Gains) (Step, LoadStep, error) {
	y, err := unitStep(m, g, 1, false)
	if err != nil {
		return Step{}, LoadStep{}, err
	}
	z, err := unitStep(m, g, 0, true)
	if err != nil {
		return Step{}, LoadStep{}, err
	}
	h := g.SampleTime
	var peak, sum float64
	for _, v := range z {
		peak = math.Max(peak, math.Abs(v))
		sum += math.Abs(v)
	}
	load := LoadStep{IAE: Value(h * sum), Peak: Value(peak)}
	if math.Abs(z[len(z)-1]) > 1e-3*peak {
		load.IAE = Unknown
	}
	return sampledStep(y, 1, h, settlingBand), load, nil
}

// sampledStep measures a step of the speed from 0 to target; band is the
// half-width of the settling band as a part of target.
func sampledStep(y []float64, target, h, band float64) Step {
	top, sum := math.Inf(-1), 0.0
	last := -1
	for i, v := range y {
		v /= target
		top = math.Max(top, v)
		sum += math.Abs(1 - v)
		if math.Abs(1-v) > band {
			last = i
		}
	}
	out := Step{
		RiseTime:  Value(h * (firstAbove(y, target, 0.9) - firstAbove(y, target, 0.1))),
		Overshoot: Value(100 * math.Max(0, top-1)), SettlingTime: Value(float64(last+1) * h), IAE: Value(h * sum),
	}
	if last == len(y)-1 {
		out.SettlingTime, out.IAE = Unknown, Unknown
	}
	return out
}

// firstAbove returns the interpolated sample at which y first comes to the part
// of target, NaN if it never does.
func firstAbove(y []float64, target, part float64) float64 {
	for i, v := range y {
		if v/target < part {
			continue
		}
		if i == 0 {
			return 0
		}
		before := y[i-1] / target
		return float64(i-1) + (part-before)/(v/target-before)
	}
	return math.NaN()
}
