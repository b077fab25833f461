package identify

import (
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/google/go-cmp/cmp"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// zooRecord runs a simulated rig on a drive; the seed is that of its noise.
func zooRecord(t testing.TB, r zooRig, h float64, u []float64, seed uint64) *trace.Trace {
	t.Helper()
	return r.run(rand.New(rand.NewPCG(seed, 3)), u, h)
}

// Steps of one rig about several operating points, fitted together, give the
// rig's own numbers, and more precisely than one record alone. Friction differs
// between the records, so each has an offset of its own.
func TestJointFit(t *testing.T) {
	r := zooRig{gain: 20, tau: 0.05, dead: 0.004, noise: 2}
	var traces []*trace.Trace
	for k := range 4 {
		traces = append(traces, zooRecord(t, r, 0.002, stepSet(6+2*float64(k), 1.5, 150, 2), uint64(k)))
		for i := range traces[k].Speed {
			traces[k].Speed[i] -= 3 * float64(k)
		}
	}
	one, err := Run(traces[0], Options{Kind: model.KindFirstOrder})
	if err != nil {
		t.Fatal(err)
	}
	all, err := RunJoint(traces, Options{Kind: model.KindFirstOrder, Holdout: 0.25})
	if err != nil {
		t.Fatal(err)
	}
	f := all.Models[0]
	for name, want := range map[string]float64{"gain": r.gain, "tau": r.tau, "dead_time": r.dead} {
		v, sd, _ := f.Value(name)
		_, alone, _ := one.Models[0].Value(name)
		// The rig moves in steps of h/40 = 0.05 ms: that much is its own error.
		if math.Abs(v-want) > 4*sd+5e-5 {
			t.Errorf("%s %g ± %g, the rig has %g", name, v, sd, want)
		}
		if sd > 0.8*alone {
			t.Errorf("%s: ± %g from three records, ± %g from one", name, sd, alone)
		}
	}
	if !(f.HoldoutNRMSE < 0.15) || f.Verdict != Believed {
		t.Errorf("hold-out NRMSE %.3f, %s %v", f.HoldoutNRMSE, f.Verdict, f.Reasons)
	}
}

// A model from steps is judged on a PRBS, and one of another rig fails there.
func TestJudgeOnAnotherRecord(t *testing.T) {
	r := zooRig{gain: 20, tau: 0.05, dead: 0.004, noise: 1}
	res, err := Run(zooRecord(t, r, 0.002, stepSet(8, 1.5, 150, 3), 1), Options{Kind: model.KindFirstOrder})
	if err != nil {
		t.Fatal(err)
	}
	f := res.Models[0]
	if f.Verdict != Care || !math.IsNaN(f.HoldoutNRMSE) {
		t.Errorf("without hold-out: %s, NRMSE %g", f.Verdict, f.HoldoutNRMSE)
	}
	good, err := Judge(f, zooRecord(t, r, 0.002, prbs(11, 2, 10, 2000), 2))
	if err != nil || good.Verdict != Believed {
		t.Errorf("same rig: %s %v, NRMSE %.3f, %v", good.Verdict, good.Reasons, good.HoldoutNRMSE, err)
	}
	other := r
	other.gain, other.tau = 30, 0.12
	bad, err := Judge(f, zooRecord(t, other, 0.002, prbs(11, 2, 10, 2000), 2))
	if err != nil || bad.Verdict == Believed {
		t.Errorf("another rig: %s, NRMSE %.3f, %v", bad.Verdict, bad.HoldoutNRMSE, err)
	}
}

// No fit runs across a gap: with the middle of a step record lost, during which
// the motor did something else, the numbers are still those of the rig.
func TestGapIsNotFittedAcross(t *testing.T) {
	r := zooRig{gain: 20, tau: 0.05, dead: 0.004, noise: 0.5}
	a := zooRecord(t, r, 0.002, stepSet(8, 1.5, 150, 1), 1)
	b := zooRecord(t, r, 0.002, stepSet(5, 1.5, 150, 1)[40:], 2) // starts in another state
	for i := range b.Time {
		a.Time = append(a.Time, b.Time[i]+3)
		a.Voltage = append(a.Voltage, b.Voltage[i])
		a.Speed = append(a.Speed, b.Speed[i])
	}
	res, err := Run(a, Options{Kind: model.KindFirstOrder})
	if err != nil {
		t.Fatal(err)
	}
	f := res.Models[0]
	within(t, "gain", f.Model.DCGain(), r.gain, 0.01)
	within(t, "time constant", f.Model.Den[0], r.tau, 0.03)
	if f.Masked["gap"] != 1 {
		t.Errorf("masked %v, want one gap", f.Masked)
	}
}

// The window of the speed is modelled: with a window as long as the time
// constant, the dead time is the rig's and not half a window more.
func TestWindowIsNotDeadTime(t *testing.T) {
	tr := &trace.Trace{Window: 0.05}
	rng := rand.New(rand.NewPCG(4, 4))
	const k, tau, dead, h = 20.0, 0.05, 0.007, 0.005
	u := stepSet(0, 4, 80, 2)
	integral := func(t float64) float64 { // of the response to all steps so far
		sum := 0.0
		for j := 1; j < len(u); j++ {
			if s := t - dead - float64(j-1)*h; s > 0 && u[j] != u[j-1] {
				sum += k * (u[j] - u[j-1]) * (s + tau*math.Expm1(-s/tau))
			}
		}
		return sum
	}
	for i := range u {
		t := float64(i) * h
		tr.Time, tr.Voltage = append(tr.Time, t), append(tr.Voltage, u[i])
		tr.Speed = append(tr.Speed, (integral(t)-integral(t-tr.Window))/tr.Window+0.3*rng.NormFloat64())
	}
	res, err := Run(tr, Options{Kind: model.KindFirstOrder, RawMask: true})
	if err != nil {
		t.Fatal(err)
	}
	f := res.Models[0]
	for name, want := range map[string]float64{"gain": k, "tau": tau, "dead_time": dead} {
		if v, sd, _ := f.Value(name); math.Abs(v-want) > 4*sd {
			t.Errorf("%s %g ± %g, want %g", name, v, sd, want)
		}
	}
}

// A result survives JSON, and unknown numbers are null in it.
func TestFitJSON(t *testing.T) {
	res, err := Run(readTrace(t, "motor_generator.csv"), Options{Kind: model.KindFirstOrder})
	if err != nil {
		t.Fatal(err)
	}
	b, err := json.Marshal(res)
	if err != nil {
		t.Fatal(err)
	}
	var keys struct {
		Models []map[string]json.RawMessage
		Chosen *int
	}
	if err := json.Unmarshal(b, &keys); err != nil {
		t.Fatal(err)
	}
	for _, k := range []string{"num", "den", "dead_time", "kind", "ci95", "rmse", "nrmse", "holdout_nrmse", "aicc", "whiteness_p", "verdict", "reasons"} {
		if keys.Models[0][k] == nil {
			t.Errorf("no key %q", k)
		}
	}
	if got := string(keys.Models[0]["holdout_nrmse"]); got != "null" {
		t.Errorf("holdout_nrmse is %s without hold-out, want null", got)
	}
	var back Result
	if err := json.Unmarshal(b, &back); err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(res, back, cmp.Comparer(func(a, b float64) bool { return a == b || math.IsNaN(a) && math.IsNaN(b) })); d != "" {
		t.Error(d)
	}
}

// A number that is not known is null, and does not keep the rest from being
// written.
func TestUnknownNumbersInJSON(t *testing.T) {
	f := Fit{Model: model.FirstOrder(2, 0.1, 0), Params: []Param{{"tau", "s", 0.1, math.NaN()}}, Cov: [][]float64{{math.Inf(1)}}, AICc: math.Inf(-1)}
	b, err := json.Marshal(f)
	if err != nil {
		t.Fatal(err)
	}
	var back Fit
	if err := json.Unmarshal(b, &back); err != nil || !math.IsNaN(back.Params[0].SD) || !math.IsNaN(back.AICc) || back.Cov != nil {
		t.Errorf("%v %+v from %s", err, back, b)
	}
}

// Records without anything to fit are refused with a reason, never with a panic.
func TestRecordsWithoutAFit(t *testing.T) {
	flat := zooRecord(t, zooRig{gain: 20, tau: 0.05, noise: 1}, 0.002, make([]float64, 200), 1)
	short := zooRecord(t, zooRig{gain: 20, tau: 0.05, noise: 1}, 0.002, []float64{1, 1, 2, 2}, 1)
	for name, tr := range map[string]*trace.Trace{"flat": flat, "short": short, "empty": {}} {
		if _, err := Run(tr, Options{}); !errors.Is(err, ErrData) {
			t.Errorf("%s: %v, want ErrData", name, err)
		}
	}
	bad := zooRecord(t, zooRig{gain: 20, tau: 0.05}, 0.002, stepSet(3, 1, 50, 1), 1)
	bad.Speed[7] = math.NaN()
	if _, err := Run(bad, Options{}); !errors.Is(err, trace.ErrInvalid) {
		t.Errorf("NaN: %v, want ErrInvalid", err)
	}
	ok := zooRecord(t, zooRig{gain: 20, tau: 0.05}, 0.002, stepSet(3, 1, 50, 1), 1)
	if _, err := Run(ok, Options{Kind: "cubic"}); err == nil {
		t.Error("an unknown kind was accepted")
	}
	if _, err := Run(ok, Options{Holdout: 1.5}); err == nil {
		t.Error("a hold-out of 1.5 was accepted")
	}
}

// A second time constant is offered only where the data show it, and then it is
// the rig's.
func TestSecondTimeConstantIsEarned(t *testing.T) {
	r := zooRig{gain: 20, tau: 0.05, dead: 0.004, noise: 0.4}
	u := stepSet(8, 1.5, 150, 4)
	res, err := Run(zooRecord(t, r, 0.002, u, 1), Options{Holdout: 0.5})
	if err != nil {
		t.Fatal(err)
	}
	if b := res.Best(); b == nil || b.Model.Kind != model.KindFirstOrder || b.Verdict != Believed {
		t.Errorf("first-order rig: chosen %+v", b)
	}
	if f := find(res.Models, model.KindSecondOrder); f.Verdict != Refused {
		t.Errorf("first-order rig: second order %s %v", f.Verdict, f.Reasons)
	}
	r.tau2 = 0.012
	res, err = Run(zooRecord(t, r, 0.002, u, 1), Options{Holdout: 0.5})
	if err != nil {
		t.Fatal(err)
	}
	b := res.Best()
	if b == nil || b.Model.Kind != model.KindSecondOrder || b.Verdict != Believed {
		t.Fatalf("second-order rig: chosen %+v", b)
	}
	for name, want := range map[string]float64{"tau": r.tau, "tau2": r.tau2} {
		if v, sd, _ := b.Value(name); math.Abs(v-want) > 4*sd+1e-4 {
			t.Errorf("%s %g ± %g, the rig has %g", name, v, sd, want)
		}
	}
}

// A steady drift of the speed (a load that grows) is fitted where it is asked for.
func TestDrift(t *testing.T) {
	r := zooRig{gain: 20, tau: 0.05, dead: 0.004, noise: 0.2}
	tr := zooRecord(t, r, 0.002, stepSet(8, 1.5, 150, 3), 1)
	for i := range tr.Speed {
		tr.Speed[i] -= 3.5 * tr.Time[i]
	}
	for _, window := range []float64{0, 0.002} {
		tr.Window = window
		res, err := Run(tr, Options{Kind: model.KindFirstOrder, Drift: true})
		if err != nil {
			t.Fatal(err)
		}
		f := res.Models[0]
		within(t, "drift", f.Drift, -3.5, 0.02)
		within(t, "gain", f.Model.DCGain(), r.gain, 0.01)
		within(t, "time constant", f.Model.Den[0], r.tau, 0.03)
	}
}

// An integrating motor: the slope is that of the record, by definition.
func TestIntegrating(t *testing.T) {
	tr := &trace.Trace{}
	rng := rand.New(rand.NewPCG(6, 6))
	w, u := 0.0, 0.0
	for i := range 400 {
		if i%40 == 0 {
			u = 2 * float64(1-i/40%2*2)
		}
		w += 35 * u * 0.005 // slope 35 rad/s² per V, no dead time, hold since
		tr.Time = append(tr.Time, 0.005*float64(i))
		tr.Voltage = append(tr.Voltage, u)
		tr.Speed = append(tr.Speed, w+0.05*rng.NormFloat64())
	}
	res, err := Run(tr, Options{Kind: model.KindIntegrating, Holdout: 0.5, RawMask: true})
	if err != nil {
		t.Fatal(err)
	}
	f := res.Models[0]
	within(t, "slope", f.Model.Num[0], 35, 0.005)
	if v, sd, _ := f.Value("offset"); math.Abs(v) > 4*sd {
		t.Errorf("offset %g ± %g rad/s², want 0", v, sd)
	}
	if f.Model.DeadTime > 0.001 || f.Model.Kind != model.KindIntegrating || f.HoldoutNRMSE > 0.1 {
		t.Errorf("%+v", f)
	}
}

// boundedLine is a linear problem of three strongly tied parameters.
type boundedLine struct{ a, b []float64 }

func (boundedLine) Dim() int { return 3 }

func (l boundedLine) Evaluate(p []float64, pt *Point) bool {
	jac := append([]float64(nil), l.a...)
	res := make([]float64, len(l.b))
	for i := range res {
		for j := range p {
			res[i] += l.a[i*3+j] * p[j]
		}
		res[i] -= l.b[i]
	}
	Compress(jac, 3, res, pt)
	return true
}

// With a bound in the way the solver ends at the constrained optimum: the gradient
// vanishes along the free parameters and points out of the bound (conditions of
// Karush, Kuhn and Tucker), in few steps since the problem is linear.
func TestSolverKeepsBounds(t *testing.T) {
	l := boundedLine{
		a: []float64{4, 3, 1, 3, 4, 2, 1, 2, 5, 2, 2, 2, 1, 0, 1},
		b: []float64{1, 9, -2, 4, 0},
	}
	sol, err := Solve(l, []float64{1, 1, 1}, Settings{Lower: []float64{0, -100, 0}, Upper: []float64{100, 100, 100}, CostTol: 1e-14, ParamTol: 1e-12})
	if err != nil {
		t.Fatal(err)
	}
	atBound := 0
	for j := range 3 {
		g := 0.0
		for i := 0; i <= j; i++ {
			g += sol.Point.R[i*3+j] * sol.Point.Qtr[i]
		}
		bound := j != 1 && sol.Params[j] == 0
		if bound {
			atBound++
		}
		if bound && g < 0 || !bound && math.Abs(g) > 1e-6 {
			t.Errorf("parameter %d = %g: gradient %g", j, sol.Params[j], g)
		}
	}
	if atBound == 0 {
		t.Error("no bound was active: the test shows nothing")
	}
	if sol.Evaluations > 8 {
		t.Errorf("%d evaluations for a linear problem", sol.Evaluations)
	}
}
