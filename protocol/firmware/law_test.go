package firmware_test

import (
	"fmt"
	"math"
	"testing"

	"gainwright/protocol"
)

// putGainsOff changes the gains of an armed board, which has to be off for it.
func (b *board) putGainsOff(gains map[string]float64) {
	b.t.Helper()
	b.must("ok", "dis", "")
	b.putGains(gains)
	b.arm()
}

func hex16(v uint16) string { return fmt.Sprintf("%04X", v) }

// captured is one sample of a capture.
type captured struct {
	counts         uint16
	volts, current float64 // V, A
}

// capture uploads a full capture, in pieces, and checks its CRC.
func (b *board) capture() (samples []captured, first, stepUS int64) {
	b.t.Helper()
	var state string
	var n int
	f := b.must("ok", "cap", "state")
	if _, err := fmt.Sscan(f, &state, &n, &first, &stepUS); err != nil || state != "full" {
		b.t.Fatalf("cap state %q: %v", f, err)
	}
	var digits []byte
	for at := 0; at < n; at += 8 {
		var index int
		var hex string
		if _, err := fmt.Sscan(b.must("ok", "cap", fmt.Sprintf("get %d", at)), &index, &hex); err != nil || index != at {
			b.t.Fatalf("piece %d: %v", at, err)
		}
		digits = append(digits, hex...)
	}
	if len(digits) != 12*n {
		b.t.Fatalf("%d digits for %d samples", len(digits), n)
	}
	b.must("ok "+hex16(protocol.CRC16(digits)), "cap", "crc")
	word := func(i int) uint16 {
		v, ok := protocol.ParseHex16(digits[4*i : 4*i+4])
		if !ok {
			b.t.Fatalf("digits %q", digits[4*i:4*i+4])
		}
		return v
	}
	for i := range n {
		samples = append(samples, captured{word(3 * i), float64(int16(word(3*i+1))) * 0.002, float64(int16(word(3*i+2))) * 0.001})
	}
	return samples, first, stepUS
}

// law is P8.2 in float64, written down from the paragraph alone: parallel form,
// backward Euler, derivative of the measurement, clamped integral.
type law struct {
	kp, ki, kd, tf, b, kv, ks, h, max float64
	i, d, was                         float64
}

func (l *law) step(r, y float64) float64 {
	next := l.i + l.ki*l.h*(r-y)
	l.d = (l.tf*l.d - l.kd*(y-l.was)) / (l.tf + l.h)
	l.was = y
	u := l.kp*(l.b*r-y) + next + l.d + l.kv*r
	if r != 0 {
		u += math.Copysign(l.ks, r)
	}
	switch {
	case u > l.max:
		u = l.max
		next = math.Min(next, l.i)
	case u < -l.max:
		u = -l.max
		next = math.Max(next, l.i)
	}
	l.i = next
	return u
}

// The drive that a capture shows is what the law of P8.2 makes of the speed that
// the same capture shows, in both builds, sample for sample.
func TestLawIsThatOfTheSpec(t *testing.T) {
	for _, variant := range []string{"float", "fixed"} {
		for _, g := range []map[string]float64{
			{"kp": 0.02, "ki": 0.4, "b": 1},
			{"kp": 0.05, "ki": 2, "kd": 0.0005, "tf": 0.004, "b": 0.6, "kv": 0.02, "ks": 0.25},
			{"kp": 0.3, "ki": 20, "b": 1}, // rests on the limit for a while
			{"kp": 1e-4, "ki": 3e-3, "kv": 0.05},
		} {
			t.Run(fmt.Sprint(variant, g), func(t *testing.T) { lawRun(t, variant, g) })
		}
	}
}

func lawRun(t *testing.T, variant string, g map[string]float64) {
	const limit, win, before, n = 5, 5, 10, 900
	b := start(t, variant)
	b.putGains(g)
	b.putLimits(limitSet(map[string]float64{"vmax": limit, "stall": 5, "nocnt": 5}))
	b.arm()
	b.must("ok", "cap", fmt.Sprintf("arm 1 %d %d", before, n))
	b.must("ok wait 0", "cap", "state")
	b.run(20) // as many samples from before as were asked for
	for i := range 20 {
		r := 80.0
		if i >= 11 {
			r = -50
		}
		b.speed(r)
		b.run(50)
	}
	b.must("ok", "dis", "")
	s, _, step := b.capture()
	if len(s) != n || step != 1000 {
		t.Fatalf("%d samples of %d µs", len(s), step)
	}
	if s[before].volts != 0 || s[before+1].volts == 0 {
		t.Errorf("volts around the first drive line: %v %v (P10.1)", s[before].volts, s[before+1].volts)
	}
	f := func(name string) float64 { return float64(float32(g[name])) }
	l := law{kp: f("kp"), ki: f("ki"), kd: f("kd"), tf: f("tf"), b: f("b"), kv: f("kv"), ks: f("ks"), h: 0.001, max: limit}
	perCount := 2 * math.Pi / 2000 / (win * 0.001)
	// The setpoint changes between two latches; it is found as the one after
	// which the law holds again.
	worst, saturated, last, r := 0.0, 0, 0.0, 80.0
	for i := before; i+1 < n; i++ {
		y := float64(int16(s[i].counts-s[i-win].counts)) * perCount
		if variant == "fixed" {
			y = math.Round(y*1000) / 1000 // it works in mrad/s
		}
		try := l
		u := try.step(r, y)
		mean := func(u float64) float64 { return last + (u-last)*0.8 } // 200 of 1000 µs the drive before
		if r > 0 && i > 300 && math.Abs(mean(u)-s[i+1].volts) > 0.1 {
			r = -50
			try = l
			u = try.step(r, y)
		}
		l = try
		if off := math.Abs(mean(u) - s[i+1].volts); off > worst {
			worst = off
		}
		if math.Abs(u) == limit {
			saturated++
		}
		last = u
	}
	if worst > 0.003 { // 1 mV of drive, half of 2 mV of scale, and the rounding of mrad/s times kp
		t.Errorf("worst difference %.4f V", worst)
	}
	if r > 0 {
		t.Error("the change of setpoint was not found: the law held throughout")
	}
	if f("kp") > 0.2 && saturated < 20 {
		t.Errorf("only %d samples on the limit: this case is there for the clamp", saturated)
	}
}

func TestCapture(t *testing.T) {
	b := ready(t, nil)
	b.must("ok idle 0", "cap", "state")
	b.must("no 5", "cap", "get 0")
	b.must("no 8", "cap", "now 1 4001")
	b.must("no 8", "cap", "arm 1 50 50")
	b.must("no 4", "cap", "now 0 10")
	b.must("ok", "cap", "now 3 100")
	for i := range 8 {
		b.volts(float64(i))
		b.run(50)
	}
	s, first, step := b.capture()
	if len(s) != 100 || step != 3000 {
		t.Fatalf("%d samples of %d µs", len(s), step)
	}
	end := first + 99*step
	if x := b.truth(); first <= 0 || end > x.US || end%1000 != 0 {
		t.Errorf("samples from %d to %d µs, now %d", first, end, x.US)
	}
	if a, c := s[0].volts, s[99].volts; a >= c || c < 4 {
		t.Errorf("volts %v … %v", a, c)
	}
	if again := b.must("ok", "cap", "get 92"); again != b.must("ok", "cap", "get 92") {
		t.Error("a piece differs when it is asked for again (P10.4)")
	}
	b.must("no 4", "cap", "get 100")
	b.must("ok", "cap", "now 1 4000")
	b.volts(3)
	b.run(100)
	b.must("ok", "stop", "")
	s, _, _ = b.capture()
	if len(s) < 50 || len(s) > 200 {
		t.Errorf("%d samples of a capture that a stop ended (P10.2)", len(s))
	}
}
