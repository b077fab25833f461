package design

import "gainwright/tune/model"

// OpenLoop returns L(jω) of the loop that g closes around m at the frequencies
// w in rad/s, each above 0; in a sampled loop at most π/SampleTime. Errors as
// Judge.
func OpenLoop(m model.Linear, g Gains, w []float64) ([]complex128, error) {
	l, err := newLoop(m, g)
	if err != nil {
		return nil, err
	}
	out := make([]complex128, len(w))
	for i, x := range w {
		out[i] = l.at(x)
	}
	return out, nil
}
