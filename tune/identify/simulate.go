package identify

import (
	"math"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// Simulate returns the speed in rad/s that the model gives for the drive of a
// trace, one value a sample, NaN where the sample is masked. Offset and initial
// state are those that fit the trace best; gain, time constants and dead time
// are the model's. Errors as Judge.
func Simulate(tr *trace.Trace, m model.Linear) ([]float64, error) {
	if err := tr.Validate(); err != nil {
		return nil, err
	}
	e, err := Fit{Model: m}.estimate()
	if err != nil {
		return nil, err
	}
	p := e.speeds(tr, false, 0, true)
	out := make([]float64, tr.Len())
	for i := range out {
		out[i] = math.NaN()
	}
	for k, i := range p.index {
		out[i] = p.sim[k]
	}
	return out, nil
}
