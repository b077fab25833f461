package simrig

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// section is a discrete transfer function b(z)/a(z) of at most first order run in
// float64 as a difference equation: the textbook forms of the integral and of the
// filtered derivative under each rule (Åström and Wittenmark, Computer-Controlled
// Systems, 1997, chapter 8; from memory), written out independently of law.go.
type section struct {
	b0, b1, a1 float64
	x, y       float64
}

func (s *section) step(x float64) float64 {
	s.y = s.b0*x + s.b1*s.x - s.a1*s.y
	s.x = x
	return s.y
}

// textbook makes integral and derivative: s is replaced by (z-1)/(h·z) backward,
// (z-1)/h forward, 2(z-1)/(h(z+1)) Tustin.
func textbook(disc string, ki, kd, tf, h float64) (i, d section) {
	switch disc {
	case "forward-euler":
		return section{b1: ki * h, a1: -1}, section{b0: kd / tf, b1: -kd / tf, a1: h/tf - 1}
	case "tustin":
		n := 2*tf + h
		return section{b0: ki * h / 2, b1: ki * h / 2, a1: -1}, section{b0: 2 * kd / n, b1: -2 * kd / n, a1: (h - 2*tf) / n}
	default: // backward Euler, of which incremental is another realisation
		return section{b0: ki * h, a1: -1}, section{b0: kd / (tf + h), b1: -kd / (tf + h), a1: -tf / (tf + h)}
	}
}

func TestLawIsItsTransferFunction(t *testing.T) {
	const h = 0.002
	for _, disc := range []string{"backward-euler", "forward-euler", "tustin", "incremental"} {
		for _, onError := range []bool{false, true} {
			t.Run(fmt.Sprint(disc, onError), func(t *testing.T) {
				l := law{kp: 0.08, ki: 0.9, kd: 0.0004, tf: 0.01, b: 0.7, kv: 0.02, ks: 0.5,
					period: h, disc: disc, windup: "none", onError: onError}
				in, dn := textbook(disc, 0.9, 0.0004, 0.01, h)
				rng := rand.New(rand.NewPCG(7, 7))
				r := 0.0
				for k := range 1000 {
					if k%100 == 0 {
						r = 200*rng.Float64() - 100
					}
					y := r*0.9 + 10*rng.Float64()
					e := r - y
					x := -y
					if onError {
						x = e
					}
					want := 0.08*(0.7*r-y) + in.step(e) + dn.step(x) + 0.02*r + math.Copysign(0.5, r)
					got, clipped := l.step(float32(r), float32(y), -1e6, 1e6)
					if clipped || math.Abs(float64(got)-want) > 2e-3 { // binary32 summed over 1000 periods
						t.Fatalf("period %d: %g, transfer function %g", k, got, want)
					}
				}
			})
		}
	}
}

func TestAntiWindup(t *testing.T) {
	// An error of 10 for 500 periods against a limit of 5, then of -1: the time
	// until the output leaves the limit.
	leave := func(disc, windup string) int {
		l := law{kp: 0.1, ki: 2, b: 1, tt: 0.05, period: 0.002, disc: disc, windup: windup}
		for range 500 {
			l.step(10, 0, -5, 5)
		}
		for k := range 5000 {
			if u, _ := l.step(10, 11, -5, 5); u < 5 {
				return k
			}
		}
		return 5000
	}
	// Unwinding takes (ki·h·Σe - 5 + …)/(ki·h) periods where nothing holds the
	// integral: it reached 2·0.002·10·500 = 20, and falls by 0.004 a period.
	if n := leave("backward-euler", "none"); n < 3500 || n > 3800 {
		t.Errorf("no anti-windup: leaves after %d periods, want about 3700", n)
	}
	for _, c := range []struct{ disc, windup string }{
		{"backward-euler", "clamp"}, {"forward-euler", "clamp"}, {"tustin", "clamp"}, {"backward-euler", "back-calculation"}, {"incremental", "none"},
	} {
		if n := leave(c.disc, c.windup); n > 2 {
			t.Errorf("%v: leaves after %d periods", c, n)
		}
	}
}
