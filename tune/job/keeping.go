package job

import (
	"fmt"
	"math"

	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
)

// Steering a proposal by its worst case (our choice).
const (
	keepDraws = 250  // enough to steer by; what comes out is judged on all draws
	keepStep  = 0.05 // of the bound, from one try to the next
	keepLeast = 1.15
	keepOver  = 1.01 // as for rounding
)

// keeping proposes so that the bound on Ms holds for 95 % of the motors of the
// worst case: by a smaller bound on the model itself where it does not.
func (s DesignSettings) keeping(loop model.Linear, f identify.Fit) ([]design.Proposal, int, error) {
	careful := s.cautious(loop, f)
	all, chosen, err := s.propose(careful)
	if err != nil || chosen < 0 || !s.Keep95 {
		return all, chosen, err
	}
	spread := s.spread(f, loop)
	asked := s.MsMax
	for first := true; ; first = false {
		w, err := design.WorstOf(loop, linear(all[chosen].Gains), spread, keepDraws)
		if err != nil {
			return all, chosen, err
		}
		if float64(w.Ms) <= asked*keepOver {
			if !first {
				all[chosen].Notes = append(all[chosen].Notes, fmt.Sprintf("designed for Ms %.2f, so that 95 %% of the motors of the worst case keep %.2f", s.MsMax, asked))
			}
			return all, chosen, nil
		}
		if s.MsMax = math.Round((s.MsMax-keepStep)*100) / 100; s.MsMax < keepLeast {
			all[chosen].Notes = append(all[chosen].Notes, fmt.Sprintf("no gains keep Ms %.2f for 95 %% of the motors of the worst case: at best %.2f; narrow the range of the rig file", asked, float64(w.Ms)))
			return all, chosen, nil
		}
		next, best, err := s.propose(careful)
		if err != nil || best < 0 {
			return all, chosen, err
		}
		all, chosen = next, best
	}
}

// alsoDrawn says what else the motors of the worst case differ in.
func (s DesignSettings) alsoDrawn() string {
	words := ""
	if s.InertiaMin > 0 {
		words += fmt.Sprintf(", inertia ×%.3g to ×%.3g", s.InertiaMin, s.InertiaMax)
	}
	if s.BusLow > 0 {
		words += fmt.Sprintf(", bus down to %.0f %% of its nominal voltage, which the board does not make up for", 100*s.BusLow)
	}
	return words
}
