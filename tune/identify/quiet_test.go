package identify

import (
	"math"
	"math/rand/v2"
	"testing"

	"gainwright/tune/trace"
)

func TestQuiet(t *testing.T) {
	// A slope with ±1 on top, by hand: the line through +1, −1, +1, −1 … about it leaves
	// an RMS near 1.
	var v []float64
	for i := range 400 {
		v = append(v, 5+0.01*float64(i)+float64(1-2*(i%2)))
	}
	q := QuietOf(v)
	if math.Abs(q.RMS-1) > 0.01 || math.Abs(q.Peak-1) > 0.02 || math.Abs(q.Mean-6.995) > 1e-9 {
		t.Errorf("%+v", q)
	}
	if q = QuietOf([]float64{0, 0.5, 0, 1.5, 0.5}); math.Abs(q.Step-0.5) > 1e-12 {
		t.Errorf("smallest step %g, want 0.5", q.Step)
	}
	// 2000 counts a turn over 4 ms are 0.785 rad/s a step: a tenth of 7.85.
	if low := LowestSetpoint(2*math.Pi/2000/0.004, 0.1); math.Abs(low-7.854) > 1e-3 {
		t.Errorf("lowest setpoint %g", low)
	}
}

// A loop that runs 2 % slow and jitters by 20 µs, every fifth loop sampled, some
// samples lost.
func TestClock(t *testing.T) {
	rng := rand.New(rand.NewPCG(61, 1))
	tr, lost := &trace.Trace{}, 0
	for i := range 600 {
		if i%37 == 5 {
			lost++
			continue
		}
		tr.Time = append(tr.Time, float64(i)*5*1.02e-3+20e-6*rng.NormFloat64())
	}
	c, err := ClockOf(tr, 1e-3)
	if err != nil {
		t.Fatal(err)
	}
	if c.Loops != 5 || math.Abs(c.Loop/1.02e-3-1) > 1e-4 || math.Abs(c.Jitter/20e-6-1) > 0.12 || c.Missing != lost {
		t.Errorf("%+v", c)
	}
	if math.Abs(c.Loop-1.02e-3) > 4*c.LoopSD {
		t.Errorf("loop %.9g ± %.2g", c.Loop, c.LoopSD)
	}
}

// A winding behind a driver that loses 0.2 V and a sensor whose zero is off by 30 mA.
func TestLockedRotor(t *testing.T) {
	rng := rand.New(rand.NewPCG(61, 2))
	hit, n := 0, 40
	for range n {
		tr := &trace.Trace{}
		for k, v := range []float64{0, 0.5, 0.9, 0, -0.5, -0.9, 0} {
			for i := range 100 {
				cur := 0.03 + 0.02*rng.NormFloat64()
				if v != 0 {
					cur += (v - math.Copysign(0.2, v)) / 2.6 * (1 - math.Exp(-float64(i)*0.002/0.001))
				}
				tr.Time = append(tr.Time, float64(k*100+i)*0.002)
				tr.Voltage, tr.Speed, tr.Current = append(tr.Voltage, v), append(tr.Speed, 0), append(tr.Current, cur)
			}
		}
		l, err := FitLocked(tr, 0.2)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(l.R/2.6-1) > 0.12 {
			t.Errorf("R %.4g", l.R)
		}
		if math.Abs(l.R-2.6) < 1.96*l.RSD {
			hit++
		}
	}
	if hit < 34 {
		t.Errorf("%d of %d intervals hold the truth", hit, n)
	}
}

// An encoder behind free play of 0.3 rad: the motor is turned by what is left of the
// volts when R·I is taken away, and nothing is counted meanwhile.
func TestLostMotionOfACoupling(t *testing.T) {
	const ohms, ke, h, free = 2.0, 0.05, 0.002, 0.3
	tr := &trace.Trace{RadPerCount: 0.003}
	at, counts := 0.0, 0.0
	ramp := func(dir, play float64) {
		turned := 0.0
		for v, seen := 0.1, false; ; v += 0.004 {
			amps, w := v/ohms, 0.0
			if v > 0.9 { // breaks away: from here on at 8 rad/s
				w = 8
				amps = (v - ke*w) / ohms
			}
			if turned += w * h; turned > play {
				counts, seen = counts+dir*w*h/0.003, true
			}
			at += h
			tr.Time, tr.Voltage, tr.Current = append(tr.Time, at), append(tr.Voltage, dir*v), append(tr.Current, dir*amps)
			tr.Counts, tr.Speed = append(tr.Counts, math.Floor(counts)), append(tr.Speed, 0)
			if seen && turned > play+0.2 {
				break
			}
		}
		for range 100 {
			at += h
			tr.Time, tr.Voltage, tr.Current = append(tr.Time, at), append(tr.Voltage, 0), append(tr.Current, 0)
			tr.Counts, tr.Speed = append(tr.Counts, math.Floor(counts)), append(tr.Speed, 0)
		}
	}
	for i := range 8 {
		dir := float64(1 - 2*(i%2))
		ramp(dir, free)
		ramp(dir, 0)
	}
	m, err := FitLostMotion(tr, ohms, ke)
	if err != nil {
		t.Fatal(err)
	}
	turned, same := MeanOf(m.Turned, nil), MeanOf(m.Same, nil)
	if math.Abs(turned.Value-same.Value-free) > 0.03 || turned.N < 6 || same.N < 6 {
		t.Errorf("turned %+v, same %+v, want %g apart", turned, same, free)
	}
}
