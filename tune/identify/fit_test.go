package identify

import (
	"math"
	"math/rand/v2"
	"testing"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// stepTrace is the record that the Cramér–Rao cases describe: rest, then a step
// of u volts at t = 0, first order with dead time, white noise.
func stepTrace(k, tau, dead, u, sigma, h float64, n, pre int, rng *rand.Rand) *trace.Trace {
	tr := &trace.Trace{Hold: trace.From}
	for i := -pre; i < n; i++ {
		t := float64(i) * h
		v, y := u, 0.0
		if i < 0 {
			v = 0
		}
		if t > dead {
			y = -k * u * math.Expm1(-(t-dead)/tau)
		}
		tr.Time = append(tr.Time, t)
		tr.Voltage = append(tr.Voltage, v)
		tr.Speed = append(tr.Speed, y+sigma*rng.NormFloat64())
	}
	return tr
}

func TestSmoke(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	tr := stepTrace(46.477, 0.0354, 0.00174, 6, 2, 0.001, 300, 30, rng)
	e, err := problem{traces: []*trace.Trace{tr}, kind: model.KindFirstOrder, steady: true}.solve()
	if err != nil {
		t.Fatal(err)
	}
	t.Log(e.linear, math.Exp(e.params[0]), e.params[1], e.evals, math.Sqrt(e.cost/float64(e.dof)))
	for i := 0; i < e.dim(); i++ {
		t.Log(math.Sqrt(e.cov[i*e.dim()+i]))
	}
	e, err = problem{traces: []*trace.Trace{tr}, kind: model.KindSecondOrder, steady: true, seed: e}.solve()
	if err != nil {
		t.Fatal(err)
	}
	t.Log(e.linear, math.Exp(e.params[0]), math.Exp(e.params[1]), e.params[2], e.evals, math.Sqrt(e.cost/float64(e.dof)))
}
