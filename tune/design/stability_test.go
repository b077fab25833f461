package design

import (
	"math"
	"math/cmplx"
	"testing"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"

	"gainwright/tune/model"
)

// loopMatrix returns the matrix that takes the whole state of a sampled loop
// (motor, drives under way, law) from one sample to the next, found by running
// one sample from each unit state. It shares nothing with the frequency
// response.
func loopMatrix(t interface{ Fatal(...any) }, m model.Linear, g Gains) *mat.Dense {
	fresh := func() (*sampledPlant, *law) {
		p, err := newSampledPlant(m, g)
		if err != nil {
			t.Fatal(err)
		}
		p.k = 10 * len(p.past) // the ring is full and starts at its first place
		return p, newLaw(g)
	}
	read := func(p *sampledPlant, c *law) []float64 {
		v := append([]float64{}, p.x...)
		for j := 1; j <= len(p.past); j++ {
			v = append(v, p.at(j))
		}
		return append(v, c.integral, c.derivative, c.lastErr, c.lastIn)
	}
	p, c := fresh()
	size := len(read(p, c))
	out := mat.NewDense(size, size, nil)
	for i := range size {
		p, c := fresh()
		n, r := len(p.x), len(p.past)
		switch {
		case i < n:
			p.x[i] = 1
		case i < n+r:
			p.past[(p.k-(i-n+1))%r] = 1
		default:
			*[]*float64{&c.integral, &c.derivative, &c.lastErr, &c.lastIn}[i-n-r] = 1
		}
		p.apply(c.next(0, p.speed(), 0))
		for j, v := range read(p, c) {
			out.Set(j, i, v)
		}
	}
	return out
}

// The verdict by the principle of the argument against the eigenvalues of the
// whole loop, on random loops of every law.
func TestStabilityAgainstEigenvalues(t *testing.T) {
	var stable, unstable int
	rapid.Check(t, func(t *rapid.T) {
		tau := func(name string) float64 { return math.Pow(10, rapid.Float64Range(-3, 0).Draw(t, name)) }
		m := model.Linear{Num: []float64{math.Pow(10, rapid.Float64Range(-1, 2).Draw(t, "gain"))}}
		switch rapid.IntRange(0, 3).Draw(t, "kind") {
		case 0:
			m.Den = []float64{tau("tau"), 1}
		case 1:
			m.Den = polyMul([]float64{tau("tau"), 1}, []float64{tau("tau2"), 1})
		case 2:
			w := 1 / tau("wn")
			m.Den = []float64{1 / (w * w), 2 * rapid.Float64Range(0.05, 1).Draw(t, "zeta") / w, 1}
		case 3:
			m.Den = []float64{tau("tau"), 1, 0}
		}
		h := 0.001 * rapid.Float64Range(0.2, 10).Draw(t, "h")
		m.DeadTime = h * rapid.Float64Range(0, 4).Draw(t, "dead")
		kp := math.Pow(10, rapid.Float64Range(-2, 1.5).Draw(t, "kp")) / m.Num[0]
		g := PI(kp, kp/tau("ti"), h, h*rapid.Float64Range(0, 1).Draw(t, "delay"))
		g.Discretisation = rapid.SampledFrom([]string{BackwardEuler, ForwardEuler, Tustin}).Draw(t, "law")
		if rapid.Bool().Draw(t, "pid") {
			g.Kd = kp * h * rapid.Float64Range(0.1, 5).Draw(t, "td")
			g.DerivativeFilter = h * rapid.Float64Range(0.6, 3).Draw(t, "tf")
		}
		var eig mat.Eigen
		if !eig.Factorize(loopMatrix(t, m, g), mat.EigenNone) {
			t.Skip("eigenvalues did not converge")
		}
		radius := 0.0
		for _, v := range eig.Values(nil) {
			radius = math.Max(radius, cmplx.Abs(v))
		}
		if math.Abs(radius-1) < 1e-5 {
			t.Skip("on the border")
		}
		got, err := JudgeFrequency(m, g)
		if err != nil {
			t.Fatal(err)
		}
		if got.Stable != (radius < 1) {
			t.Fatalf("stable %v, but the largest eigenvalue is %.9g\nmodel %+v\ngains %+v", got.Stable, radius, m, g)
		}
		if got.Stable {
			stable++
		} else {
			unstable++
		}
	})
	if stable < 10 || unstable < 10 {
		t.Errorf("%d stable and %d unstable loops: too one-sided to show anything", stable, unstable)
	}
}
