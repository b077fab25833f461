package identify

import (
	"fmt"
	"math"
	"sort"

	"gainwright/tune/trace"
)

// Bounds of the verdict. VAF of 95 % and 80 %, and ±10 % for the gain and ±20 % for
// the time constant: common practice, no source. The rest is our choice.
const (
	nrmseBelieved         = 0.224 // VAF 95 %
	nrmseRefused          = 0.447 // VAF 80 %
	noiseAllowance        = 1.25  // hold-out RMSE over fit RMSE that chance explains
	gainCare, gainRefused = 0.10, 0.30
	tauCare, tauRefused   = 0.20, 0.60
	aiccSupport           = 10.0 // fall of AICc that a second time constant has to bring
)

// verdicts collects reasons; the worst one counts.
type verdicts struct {
	worst   Verdict
	reasons []string
	helps   string
}

func (v *verdicts) add(level Verdict, help, format string, args ...any) {
	rank := map[Verdict]int{"": 0, Believed: 0, Care: 1, Refused: 2}
	if rank[level] > rank[v.worst] {
		v.worst = level
		v.helps = help
	}
	if v.helps == "" {
		v.helps = help
	}
	v.reasons = append(v.reasons, fmt.Sprintf(format, args...))
}

// judged reports the estimate and judges it.
func (r *run) judged(e *estimate) Fit {
	f := e.report()
	f.Masked = r.masked
	r.holdout(e, &f)
	f.judge()
	return f
}

// judge makes the verdict from the numbers of the fit.
func (f *Fit) judge() {
	v := &verdicts{worst: Believed}
	judgeResponse(f, v)
	judgeWidths(f, v)
	judgeTwins(f, v)
	judgeMasks(f, v)
	judgePrediction(f, v)
	judgeFindings(f, v)
	f.Verdict, f.Reasons, f.Helps = v.worst, v.reasons, v.helps
}

// holdout fills the hold-out measures, if anything was held out.
func (r *run) holdout(e *estimate, f *Fit) {
	steady := e.steady()
	switch {
	case r.split > 0:
		p := e.speeds(r.whole[0], steady, r.split, false).from(r.split)
		if len(p.y) > 0 {
			f.HoldoutNRMSE, f.HoldoutRMSE = p.nrmse()
		}
	case len(r.held) > 0:
		f.HoldoutNRMSE, f.HoldoutRMSE = e.judgeTraces(r.held)
	}
}

func (e *estimate) steady() bool {
	for _, s := range e.proj.pieces {
		for _, sp := range s.spans {
			if sp.steady {
				return true
			}
		}
	}
	return false
}

// judgeTraces simulates other records, each with its own offset and initial
// state, and returns the measures over all of them.
func (e *estimate) judgeTraces(held []*trace.Trace) (nrmse, rmse float64) {
	var num, den float64
	n := 0
	for _, tr := range held {
		p := e.speeds(tr, false, 0, true)
		for i := range p.y {
			d := p.y[i] - p.sim[i]
			num += d * d
		}
		s := deviation(p.y)
		den += s * s
		n += len(p.y)
	}
	if n == 0 {
		return math.NaN(), math.NaN()
	}
	return math.Sqrt(num / den), math.Sqrt(num / float64(n))
}

// judgeResponse refuses a motor that does not answer, or answers backwards.
func judgeResponse(f *Fit, v *verdicts) {
	p := f.Params[0]
	if p.SD > 0 && math.Abs(p.Value) < 4*p.SD {
		v.add(Refused, "a larger step, after a sign check", "the speed does not answer the voltage: %s %.3g ± %.2g %s", p.Name, p.Value, 1.96*p.SD, p.Unit)
		return
	}
	if p.Value < 0 {
		v.add(Refused, "sign check", "wrong sign: a positive voltage gives a negative speed (%s %.3g %s)", p.Name, p.Value, p.Unit)
	}
}

func judgeWidths(f *Fit, v *verdicts) {
	for _, p := range f.Params {
		care, refused := 0.0, 0.0
		switch p.Name {
		case "gain", "slope":
			care, refused = gainCare, gainRefused
		case "tau", "natural_frequency":
			care, refused = tauCare, tauRefused
		default:
			continue
		}
		half := 1.96 * p.SD / math.Abs(p.Value)
		switch {
		case !finite(half):
			v.add(Refused, "more repeats, a larger step, or a longer record", "%s is not shown by the record", p.Name)
		case half > refused:
			v.add(Refused, "more repeats, a larger step, or a longer record", "%s is known to ±%.0f %% only", p.Name, 100*half)
		case half > care:
			v.add(Care, "more repeats or a larger step", "%s is known to ±%.0f %% only", p.Name, 100*half)
		}
	}
}

// twinSigmas is how many standard deviations of its own the squared distance of two
// time constants must be from nothing for each to be called known (our choice).
const twinSigmas = 3.5

// judgeTwins says where two time constants are too near to each other to be told
// apart: T1,2 = s/2 ± √(s²/4 − p) from sum s and product p, which are well known, has no
// slope at equal ones, so that a small error of either moves both far. A loop cares
// for s and p.
func judgeTwins(f *Fit, v *verdicts) {
	a, b := -1, -1
	for i, p := range f.Params {
		switch p.Name {
		case "tau":
			a = i
		case "tau2":
			b = i
		}
	}
	if a < 0 || b < 0 || len(f.Cov) <= max(a, b) {
		return
	}
	apart := math.Abs(f.Params[a].Value - f.Params[b].Value)
	spread := f.Cov[a][a] + f.Cov[b][b] - 2*f.Cov[a][b]
	if spread > 0 && apart < 2*twinSigmas*math.Sqrt(spread) {
		sum := f.Cov[a][a] + f.Cov[b][b] + 2*f.Cov[a][b]
		v.add(Care, "more repeats or a larger step", "the two time constants are near to each other and not told apart: their sum, %.3g ± %.1g ms, is known, one by one they are not",
			1e3*(f.Params[a].Value+f.Params[b].Value), 1.96e3*math.Sqrt(math.Max(sum, 0)))
	}
}

// judgePrediction holds the fit, and the hold-out where there is one, against the
// bounds. A hold-out error that the noise seen in the fit explains is not held
// against the model; it is then said that the hold-out decides nothing.
func judgePrediction(f *Fit, v *verdicts) {
	if !finite(f.HoldoutNRMSE) {
		v.add(Care, "a second record, of another kind if there is one", "not judged on data it has not seen")
		judgeLevel(f.NRMSE, "on the data of the fit", v)
		return
	}
	noise := f.RMSE
	if finite(f.Noise) {
		noise = math.Min(noise, f.Noise)
	}
	if f.HoldoutNRMSE > nrmseBelieved && f.HoldoutRMSE <= noiseAllowance*noise {
		v.add(Care, "a hold-out with larger motion", "the hold-out moves too little against the noise to judge by (NRMSE %.2f, of which noise alone gives %.2f)",
			f.HoldoutNRMSE, f.HoldoutNRMSE*noise/f.HoldoutRMSE)
		judgeLevel(f.NRMSE, "on the data of the fit", v)
		return
	}
	judgeLevel(f.HoldoutNRMSE, "on the hold-out", v)
}

func judgeLevel(nrmse float64, where string, v *verdicts) {
	switch {
	case nrmse > nrmseRefused:
		v.add(Refused, "steps of the same size at other speeds, to find what the model misses", "simulated speed misses %s: NRMSE %.2f is over %.3f", where, nrmse, nrmseRefused)
	case nrmse > nrmseBelieved:
		v.add(Care, "a second kind of excitation (PRBS after steps)", "simulated speed is rough %s: NRMSE %.2f is over %.3f", where, nrmse, nrmseBelieved)
	}
}

// Shares of the samples left out beyond which the rest is not trusted as before.
const maskedCare, maskedRefused = 0.02, 0.40

func judgeMasks(f *Fit, v *verdicts) {
	for _, m := range []struct{ mask, what, help string }{
		{"sag", "because the bus sagged: they measure the supply", "a smaller step, or a supply with a higher limit"},
		{"saturated", "because the drive was saturated", "a smaller step"},
		{"stall", "because the shaft stood still under drive", "free the shaft, then a larger step from a moving start"},
		{"slip", "because counts and shaft disagree", "look at the encoder and its coupling"},
	} {
		n := f.Masked[m.mask]
		share := float64(n) / float64(max(f.Used+n, 1))
		switch {
		case share > maskedRefused:
			v.add(Refused, m.help, "%d samples (%.0f %%) left out %s", n, 100*share, m.what)
		case share > maskedCare:
			v.add(Care, m.help, "%d samples (%.0f %%) left out %s", n, 100*share, m.what)
		}
	}
}

// rule says from which sizes on a finding counts, and what it means.
type rule struct {
	test          string
	care, refused float64
	text          string // with the effect in percent
	helps         string
}

// rules are in the order in which reasons of equal strength are given. The sizes
// are our choice: care begins below what moves a parameter by a tenth.
var rules = []rule{
	{testSlip, 0.2, 2, "the speed jumps between two samples by %.0f %% of its spread, more than any step makes it: encoder or coupling slipping, or samples lost", "look at the encoder and its coupling, then repeat"},
	{testBreak, 0.04, 0.15, "the gain changes suddenly by %+.0f %% within the record: encoder or coupling slipping, or the load changed", "look at the encoder, its coupling and the load, then repeat"},
	{testDrift, 0.05, 0.2, "the gain drifts by %+.0f %% over the record", "warm up until repeats agree, then repeat"},
	{testLevel, 0.2, 1, "the slope changes by %+.0f %% from the lowest voltage to the highest: the gain depends on the level, or the drive saturates", "a staircase, then smaller steps about one level"},
	{testTop, 0.2, 1, "the slope changes by %+.0f %% above a knee: the drive saturates, or the gain depends on the level", "a staircase, then smaller steps below the knee"},
	{testDirection, 0.15, 0.7, "rising and falling speed differ in time constant by %+.0f %%: drive and coast are not alike", "steps that stay well above zero voltage, or a drive that brakes as it drives"},
	{testReversal, 0.08, 0.3, "friction changes sign with the speed (%+.0f %% of the voltage)", "steps in one direction, away from standstill"},
	{testThroughZero, 0.03, 0.3, "the record goes through zero speed, where friction and play in gears (backlash) take over: %.0f %% of the motion is missed", "steps in one direction, away from standstill"},
	{testResonance, 0.03, 0.3, "the residual has a sharp peak (%.0f %% of the motion): a resonance that the model lacks", "PRBS or multisine for the frequency response, then a filter or a stiffer coupling"},
	{testDynamics, 0.03, 0.2, "past voltages explain a further %.0f %% of the motion: dynamics, or a resonance, that the model lacks", "PRBS with a shorter clock and faster sampling"},
	{testSystematic, 0.025, 0.3, "%.0f %% of the motion is missed in a way that is not noise", "a staircase and steps at other levels, to find what the model misses"},
}

// findingLevel is how many standard deviations an effect must be away from none.
const findingLevel = 3.5

// reasonsMost is how many findings are given as reasons.
const reasonsMost = 4

// judgeFindings turns what the tests of the residuals found into reasons,
// strongest first.
func judgeFindings(f *Fit, v *verdicts) {
	type hit struct {
		rule
		Finding
	}
	var hits []hit
	for _, r := range rules {
		for _, x := range f.Findings {
			if x.Test == r.test && math.Abs(x.Effect) >= r.care && x.z() >= findingLevel {
				hits = append(hits, hit{r, x})
			}
		}
	}
	sort.SliceStable(hits, func(i, j int) bool { return hits[i].z() > hits[j].z() })
	for i, h := range hits {
		level := Care
		if math.Abs(h.Effect) >= h.refused {
			level = Refused
		}
		if i < reasonsMost || level == Refused {
			v.add(level, h.helps, h.text, 100*h.Effect)
		}
	}
	if d, _, ok := f.Value("damping"); ok && d < dampingCare {
		w, _, _ := f.Value("natural_frequency")
		v.add(Care, "frequency response by PRBS or multisine", "a resonance at %.3g rad/s with damping %.2f: no motor alone has that", w, d)
	}
}

// dampingCare is the damping below which a second-order model is a resonance of
// what hangs on the motor: electrical and mechanical time constants of equal size
// give 0.5.
const dampingCare = 0.3
