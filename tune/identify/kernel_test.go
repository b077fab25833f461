package identify

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// randomTrace is a record with a random staircase of voltage and meaningless
// speeds, on even or uneven stamps.
func randomTrace(seed uint64, n int, even bool) *trace.Trace {
	rng := rand.New(rand.NewPCG(seed, 7))
	tr := &trace.Trace{Window: 0.004, RadPerCount: 0.01}
	u := 1.0
	for i := 0; i < n; i++ {
		t := 0.01 * float64(i)
		if !even {
			t += 0.004 * rng.Float64()
		}
		if rng.IntN(9) == 0 {
			u = 4 * rng.NormFloat64()
		}
		tr.Time = append(tr.Time, t)
		tr.Voltage = append(tr.Voltage, u)
		tr.Speed = append(tr.Speed, rng.NormFloat64())
		tr.Counts = append(tr.Counts, 30*rng.NormFloat64())
	}
	return tr
}

// eulerMean simulates y = response of the structure to the trace's voltage by
// many small steps, as an independent account of hold, dead time and window.
func eulerMean(tr *trace.Trace, a1, a2, dead, window float64, kind string) []float64 {
	const dt = 1e-5
	at := func(t float64) float64 { // voltage applied at time t, hold since
		for i := range tr.Time {
			if t < tr.Time[i] {
				return tr.Voltage[i]
			}
		}
		return tr.Voltage[len(tr.Voltage)-1]
	}
	x, v := tr.Voltage[0], 0.0
	if kind == model.KindIntegrating {
		x = 0
	}
	start := tr.Time[0] - 0.1
	steps := int((tr.Time[len(tr.Time)-1]-start)/dt) + 2
	sum := make([]float64, steps+1)
	val := make([]float64, steps+1)
	for k := 0; k < steps; k++ {
		val[k] = x
		u := at(start + (float64(k)+0.5)*dt - dead)
		old := x
		switch kind {
		case model.KindFirstOrder:
			x += (u - x) * -math.Expm1(-dt/a1)
		case model.KindSecondOrder:
			v += dt * (u - x - a1*v) / a2
			x += dt * v
		default:
			x += dt * u
		}
		sum[k+1] = sum[k] + dt*(old+x)/2
	}
	out := make([]float64, tr.Len())
	for i, t := range tr.Time {
		b := int(math.Round((t - start) / dt))
		if window == 0 {
			out[i] = val[b]
			continue
		}
		a := int(math.Round((t - window - start) / dt))
		out[i] = (sum[b] - sum[a]) / window
	}
	return out
}

// The exact responses agree with a brute-force simulation in small steps.
func TestResponseAgainstSmallSteps(t *testing.T) {
	for _, even := range []bool{true, false} {
		tr := randomTrace(3, 60, even)
		for _, c := range []struct {
			kind   string
			a1, a2 float64
		}{
			{model.KindFirstOrder, 0.05, 0},
			{model.KindSecondOrder, 0.05, 0.0004}, // real poles
			{model.KindSecondOrder, 0.01, 0.0004}, // complex pair
			{model.KindIntegrating, 0, 0},
		} {
			for _, dead := range []float64{0, 0.0137} {
				for _, obs := range []observation{instant, windowMean} {
					name := fmt.Sprintf("%s a1=%g dead=%g obs=%d even=%v", c.kind, c.a1, dead, obs, even)
					p, params := projectionFor(t, tr, c.kind, c.a1, c.a2, dead, obs)
					window := 0.0
					if obs == windowMean {
						window = tr.Window
					}
					want := eulerMean(tr, c.a1, c.a2, dead, window, c.kind)
					p.each(params, false, func(gm *spanGram, s *stretch, sp span, cols [][]float64) {
						// An integrator's start is a free constant: compare from the first sample on.
						zero := 0.0
						if c.kind == model.KindIntegrating {
							zero = cols[0][10] - want[10]
						}
						for i := 1; i < len(want); i++ {
							if d := math.Abs(cols[0][i] - zero - want[i]); d > 4e-3 {
								t.Fatalf("%s: sample %d: %g, small steps give %g", name, i, cols[0][i]-zero, want[i])
							}
						}
					})
				}
			}
		}
	}
}

func projectionFor(t *testing.T, tr *trace.Trace, kind string, a1, a2, dead float64, obs observation) (*projection, []float64) {
	t.Helper()
	kern, err := newKernel(kind)
	if err != nil {
		t.Fatal(err)
	}
	steady := kind != model.KindIntegrating
	p := newProjection(kern, stretches(tr, 0, obs, steady), offsetShared, true)
	params := []float64{dead}
	switch kern.shapes() {
	case 1:
		params = []float64{math.Log(a1), dead}
	case 2:
		params = []float64{math.Log(a1), math.Log(a2), dead}
	}
	return p, params
}

// Every derivative column agrees with central differences, for every structure
// and kind of observation, with a steady and with a free start.
func TestDerivativesAgainstDifferences(t *testing.T) {
	for _, even := range []bool{true, false} {
		for _, steady := range []bool{true, false} {
			tr := randomTrace(5, 50, even)
			for _, kind := range []string{model.KindFirstOrder, model.KindSecondOrder, model.KindIntegrating} {
				for _, a2 := range []float64{0.0004, 0.000625 * (1 + 1e-9), 0.003} {
					for _, obs := range []observation{instant, windowMean, position} {
						kern, _ := newKernel(kind)
						p := newProjection(kern, stretches(tr, 0, obs, steady), offsetShared, false)
						_, params := projectionFor(t, tr, kind, 0.05, a2, 0.0133, obs)
						compareDerivatives(t, fmt.Sprintf("%s a2=%g obs=%d even=%v steady=%v", kind, a2, obs, even, steady), p, params)
					}
				}
			}
		}
	}
}

func compareDerivatives(t *testing.T, name string, p *projection, params []float64) {
	t.Helper()
	grab := func(params []float64) (cols [][]float64, l layout) {
		p.each(params, true, func(gm *spanGram, _ *stretch, _ span, c [][]float64) {
			l = gm.lay
			for _, col := range c {
				cols = append(cols, append([]float64(nil), col...))
			}
		})
		return cols, l
	}
	exact, l := grab(params)
	head := l.globals + l.locals
	for m := range params {
		const eps = 1e-6
		hi, lo := append([]float64(nil), params...), append([]float64(nil), params...)
		hi[m] += eps
		lo[m] -= eps
		up, _ := grab(hi)
		down, _ := grab(lo)
		check := func(what string, base, by int) {
			scale := 0.0
			for i := range exact[by] {
				scale = math.Max(scale, math.Abs(exact[by][i]))
			}
			for i := range exact[base] {
				num := (up[base][i] - down[base][i]) / (2 * eps)
				if math.Abs(num-exact[by][i]) > 1e-5*scale+1e-9 {
					t.Fatalf("%s: %s by parameter %d, sample %d: %g, differences give %g", name, what, m, i, exact[by][i], num)
				}
			}
		}
		check("response", 0, head+m)
		for k := 0; k < l.frees && m < len(params)-1; k++ {
			check("free state", l.globals+l.freeAt+k, head+l.shapes+k*(len(params)-1)+m)
		}
	}
}
