package job

import (
	"fmt"
	"math"

	"gainwright/safety"
	"gainwright/tune/excite"
)

// doInch arms for inching: each start key moves one bounded inch until the arm
// lapses or is withdrawn.
func (j *Job) doInch() (result, error) {
	way := 1.0
	if j.Env.Reverse {
		a, err := j.h.Ask(Question{Kind: AskChoice, Text: "Which way is the shaft to be inched?", Options: []string{"positive", "negative"}, Default: "positive"})
		if err != nil {
			return "", err
		}
		if a.Text == "negative" {
			way = -1
		}
	}
	plan := excite.Inch(j.sizing(), way)
	r, err := j.run(StepInch, plan, nil)
	if err != nil {
		return "", err
	}
	if r.Reason == safety.EndTripped || r.Reason == safety.EndRefused {
		return "", j.notDone(r)
	}
	moved := 0.0
	if n := len(r.Samples); n > 0 {
		moved = float64(r.Samples[n-1].Counts-r.Samples[0].Counts) * j.ID.RadPerCount() / (2 * math.Pi)
	}
	if !r.Started {
		return "", ErrDeclined
	}
	return result(fmt.Sprintf("moved %+.3f turns of the motor shaft; ended: %s", moved, r.Cause.Words)), nil
}
