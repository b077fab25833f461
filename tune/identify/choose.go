package identify

import (
	"fmt"
	"math"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// compare sets the structures of one record against each other. A second time
// constant has to be earned; a first order that it beats is not believed.
func compare(fits []Fit) {
	first, second := find(fits, model.KindFirstOrder), find(fits, model.KindSecondOrder)
	if first == nil || second == nil {
		return
	}
	// Coloured residuals carry less: the fall of the criterion is divided by the
	// widening they cause in the better model.
	widening := math.Max(second.Inflation, 1)
	gain := (first.AICc - second.AICc) / (widening * widening)
	supported := gain > aiccSupport && secondShown(second)
	switch {
	case !supported:
		second.unsupported(gain)
	case first.Verdict == Believed && first.NRMSE > 1.02*second.NRMSE:
		first.Verdict = Care
		first.Reasons = append(first.Reasons, fmt.Sprintf("the second-order model describes the record better (AICc lower by %.0f)", gain))
		first.Helps = "use the second-order model"
	}
}

// unsupported refuses a second time constant that the data do not show.
func (f *Fit) unsupported(gain float64) {
	f.Verdict = Refused
	f.Reasons = append(f.Reasons, fmt.Sprintf("the data do not support a second time constant (AICc lower by %.1f, want %.0f)", math.Max(gain, 0), aiccSupport))
	if f.Helps == "" {
		f.Helps = "faster sampling, or a PRBS with a shorter clock"
	}
}

// secondShown reports whether the second time constant, or the damping, differs
// from nothing by more than its interval.
func secondShown(f *Fit) bool {
	if v, sd, ok := f.Value("tau2"); ok {
		return v > 1.96*sd
	}
	v, sd, ok := f.Value("damping")
	return ok && v > 0 && sd < v
}

func find(fits []Fit, kind string) *Fit {
	for i := range fits {
		if fits[i].Model.Kind == kind {
			return &fits[i]
		}
	}
	return nil
}

// choose returns the index of the best verdict, among those with the same the
// one with the least AICc; nil when every model is refused.
func choose(fits []Fit) *int {
	best := -1
	for _, want := range []Verdict{Believed, Care} {
		for i, f := range fits {
			if f.Verdict == want && (best < 0 || fits[best].Verdict == want && f.AICc < fits[best].AICc) {
				best = i
			}
		}
	}
	if best < 0 {
		return nil
	}
	return &best
}

// Judge holds a fitted model against another record, best one of another kind
// (PRBS after steps): the record gets an offset and an initial state of its own,
// gain, time constants and dead time stay. It returns the fit with the hold-out
// measures and the verdict made anew. The error wraps ErrData where the record
// has nothing to judge by, trace.ErrInvalid where it is malformed.
func Judge(f Fit, holdout *trace.Trace) (Fit, error) {
	if err := holdout.Validate(); err != nil {
		return f, err
	}
	e, err := f.estimate()
	if err != nil {
		return f, err
	}
	c := *holdout
	if c.Mask != nil {
		c.Mask = append([]trace.Mask(nil), c.Mask...)
	}
	c.MarkGaps()
	c.MarkDrive()
	nrmse, rmse := e.judgeTraces([]*trace.Trace{&c})
	if !finite(nrmse) {
		return f, fmt.Errorf("%w: no usable motion in the hold-out record", ErrData)
	}
	f.HoldoutNRMSE, f.HoldoutRMSE = nrmse, rmse
	f.judge()
	return f, nil
}

// estimate rebuilds what a simulation needs from a reported model.
func (f Fit) estimate() (*estimate, error) {
	m := f.Model
	if err := m.Validate(); err != nil {
		return nil, err
	}
	e := &estimate{kind: m.Kind}
	den := m.Den
	switch {
	case len(m.Num) != 1:
	case len(den) == 2 && den[1] == 0:
		e.kind = model.KindIntegrating
		e.linear, e.params = []float64{m.Num[0] / den[0]}, []float64{m.DeadTime}
	case len(den) == 2 && den[0]/den[1] > 0:
		e.kind = model.KindFirstOrder
		e.linear, e.params = []float64{m.Num[0] / den[1]}, []float64{math.Log(den[0] / den[1]), m.DeadTime}
	case len(den) == 3 && den[0]/den[2] > 0 && den[1]/den[2] > 0:
		e.kind = model.KindSecondOrder
		e.linear = []float64{m.Num[0] / den[2]}
		e.params = []float64{math.Log(den[1] / den[2]), math.Log(den[0] / den[2]), m.DeadTime}
	}
	if e.params == nil {
		return nil, fmt.Errorf("identify: a model with num %v and den %v is none that was fitted here", m.Num, den)
	}
	e.proj = &projection{offset: offsetOwn}
	return e, nil
}
