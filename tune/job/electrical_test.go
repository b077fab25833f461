package job

import (
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/protocol/si"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
)

// ramps makes breakaway ramps of a motor by its circuit alone: at rest the current
// is (volts − dead band)/R, and it starts to turn at start. Noise is 20 mA.
func ramps(ohm, dead, start float64, withCurrent bool) []Sample {
	rnd := rand.New(rand.NewPCG(1, 2))
	var out []Sample
	counts := int64(0)
	add := func(v, i float64) {
		s := Sample{Sample: protocol.Sample{Volts: si.Volts(v), Counts: counts, Has: protocol.HasCounts}}
		if withCurrent {
			s.Has |= protocol.HasCurrent
			s.Current = si.Amps(i + 0.02*rnd.NormFloat64())
		}
		s.Slow.HasTmp, s.Slow.Temp = true, 22.5
		out = append(out, s)
	}
	for n := range 8 {
		dir := 1.0
		if n%2 == 1 {
			dir = -1
		}
		for range 20 {
			add(0, 0)
		}
		for v := 0.02; v < start+0.1; v += 0.01 {
			i := math.Max(0, v-dead) / ohm
			if v > start { // turning: back-EMF takes the current down
				counts += int64(dir) * 5
				i *= 0.3
			}
			add(dir*v, dir*i)
		}
	}
	return out
}

// The resistance is found within its own ± (three standard deviations) whatever
// the dead band, and not at all without a current.
func TestStandstillResistance(t *testing.T) {
	for _, tt := range []struct{ ohm, dead, start float64 }{{2.6, 0.2, 1.4}, {0.5, 0, 0.8}, {12, 0.3, 3}} {
		e := standstill(ramps(tt.ohm, tt.dead, tt.start, true))
		if e == nil {
			t.Fatalf("%v: nothing found", tt)
		}
		if math.Abs(e.R-tt.ohm) > 3*e.RSD || e.RSD > 0.05*tt.ohm {
			t.Errorf("R %.3f ± %.3f, want %.3f", e.R, e.RSD, tt.ohm)
		}
		if e.Temp == nil || *e.Temp != 22.5 {
			t.Errorf("temperature %v", e.Temp)
		}
	}
	if e := standstill(ramps(2.6, 0.2, 1.4, false)); e != nil {
		t.Errorf("a resistance without a current: %v", e)
	}
	if e := standstill(nil); e != nil {
		t.Errorf("a resistance of nothing: %v", e)
	}
}

// Ke and friction come back from levels made by V = R·I + Ke·ω + V0 and
// Ke·I = Tc + b·ω, and J from tau and gain of the motor equations without
// inductance: gain = Ke/(Ke² + R·b), tau = R·J/(Ke² + R·b).
func TestRunningValues(t *testing.T) {
	const ohm, ke, tc, b, v0, inertia = 2.6, 0.045, 0.016, 1.2e-5, 0.2, 6.5e-5
	var levels []identify.Level
	for _, w := range []float64{30, 90, 150, 210, 270} {
		for _, dir := range []float64{1, -1} {
			i := (tc + b*w) / ke
			levels = append(levels, identify.Level{Volts: dir * (ohm*i + ke*w + v0), Speed: dir * w, Current: dir * i, N: 50, Settled: true})
		}
	}
	e := &electrical{R: ohm, RSD: 0.01}
	e.running(levels)
	if math.Abs(e.Ke-ke) > 1e-9 || math.Abs(e.Coulomb-tc) > 1e-9 || math.Abs(e.Idle-(tc+b*270)/ke) > 1e-12 {
		t.Errorf("Ke %v, Coulomb %v, idle %v", e.Ke, e.Coulomb, e.Idle)
	}
	var m sheet.MotorRecord
	e.motor(&m, ke/(ke*ke+ohm*b), ohm*inertia/(ke*ke+ohm*b))
	if math.Abs(*m.JKgM2/inertia-1) > 1e-9 {
		t.Errorf("J %v, want %v", *m.JKgM2, inertia)
	}
	var none *electrical
	m = sheet.MotorRecord{}
	none.motor(&m, 20, 0.1)
	if m.ROhm != nil || m.KeVsPerRad != nil || m.JKgM2 != nil || none.quantities("f") != nil {
		t.Errorf("values without a current: %+v", m)
	}
}

// The law survives its way through the record: 0.0001 s and 1 ms do not lose a
// nanosecond.
func TestLawThroughTheRecord(t *testing.T) {
	for _, us := range []int{1, 37, 100, 333, 1000, 12345} {
		id := protocol.Identity{Form: "parallel", Number: "float", Loop: micros(us), ComputeDelay: micros(us / 3), WindowLoops: 4, Quadrants: 4, GainNames: []string{"kp"}}
		back := LawOf(id).identity()
		if back.Loop != id.Loop || back.ComputeDelay != id.ComputeDelay || back.Form != id.Form || back.Quadrants != id.Quadrants {
			t.Errorf("%d µs: %+v", us, back)
		}
	}
}

func micros(us int) time.Duration { return time.Duration(us) * time.Microsecond }
