package simrig

import (
	"testing"
	"time"

	"gainwright/protocol"
)

// BenchmarkBoard turns the whole rig: board, motor and telemetry. One operation
// is one simulated second; the metric is simulated seconds a second.
//
// The floor in the same run is a bare motor with the same friction, by the
// classic Runge–Kutta scheme at 20 kHz.
func BenchmarkBoard(b *testing.B) {
	b.Run("floor-rk4-20kHz", func(b *testing.B) {
		m := newPlant(ptr(benchConfig())).motor
		var i, w float64
		f := func(i, w float64) (float64, float64) {
			d := m.fwd.coulomb + m.fwd.excess(w) + m.fwd.viscous*w
			return (8 - m.r*i - m.k*w) / m.l, (m.k*i - d) / m.j
		}
		const h = 50e-6
		for b.Loop() {
			for range 20_000 {
				a1, b1 := f(i, w)
				a2, b2 := f(i+h/2*a1, w+h/2*b1)
				a3, b3 := f(i+h/2*a2, w+h/2*b2)
				a4, b4 := f(i+h*a3, w+h*b3)
				i += h / 6 * (a1 + 2*a2 + 2*a3 + a4)
				w += h / 6 * (b1 + 2*b2 + 2*b3 + b4)
			}
		}
		b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "sim-s/s")
	})
	for _, bc := range []struct {
		name string
		line func(k, token uint16) []byte
	}{
		{"driving", func(k, t uint16) []byte { return protocol.AppendDriveVolts(nil, k, t, 8) }},
		{"looping", func(k, t uint16) []byte { return protocol.AppendDriveSpeed(nil, k, t, 120) }},
		{"armed", func(k, t uint16) []byte { return protocol.AppendBeat(nil, k, t) }},
	} {
		b.Run(bc.name, func(b *testing.B) {
			r := New(benchConfig(), 1)
			r.Advance(200 * time.Millisecond)
			r.board.limits.inUse = true
			r.board.limits.judged[limRun], r.board.limits.judged[limBreak] = 0x7F000000, 0
			r.Receive(protocol.AppendRequest(nil, "rate", 1, "125 x tu"))
			r.board.arm = arming{armed: true, token: 7, beatAt: r.now, driveAt: r.now}
			r.board.state = protocol.Armed
			now, k := r.Now(), uint16(0)
			for b.Loop() {
				r.board.arm.driveAt = r.now
				for range 50 {
					k++
					r.Receive(bc.line(k, 7))
					now += 20 * time.Millisecond
					r.Advance(now)
					r.Output()
				}
			}
			if r.board.state == protocol.Off || r.board.trip != 0 {
				b.Fatalf("stopped: %v", r.board.trip)
			}
			b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "sim-s/s")
		})
	}
	b.Run("at-rest", func(b *testing.B) {
		r := New(benchConfig(), 1)
		now := time.Duration(0)
		for b.Loop() {
			now += time.Second
			r.Advance(now)
		}
		b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "sim-s/s")
	})
}

func ptr[T any](v T) *T { return &v }
