package job

import (
	"fmt"
	"math"
	"strings"

	"gainwright/tune/design"
)

// DelayPart is one source of the delay round the speed loop.
type DelayPart struct {
	Name    string
	Seconds float64
}

// DelayBudget is the delay round the loop by its sources, from the speed that the
// shaft has to what the drive does about it: dead is the dead time of motor and
// drive (s), window that over which the speed is a mean (s; it delays by half of
// itself), compute the time from the latched counts to the drive (s), period that
// of the loop (s; a held drive is half of it late). Hold and mean are delays up to
// their own rates only; Franklin, Powell and Workman, Digital Control of Dynamic
// Systems, on the hold (from memory).
func DelayBudget(dead, window, compute, period float64) (parts []DelayPart, total float64) {
	parts = []DelayPart{{"motor and drive", dead}, {"speed window", window / 2}, {"computing", compute}, {"sample and hold", period / 2}}
	for _, p := range parts {
		total += p.Seconds
	}
	return parts, total
}

// delayFact is the budget as a line of the design page, with what it costs at the
// gain crossover.
func (j *Job) delayFact(m design.Margins, g design.Gains) []Fact {
	f := j.Fit.Best()
	if f == nil {
		return nil
	}
	parts, total := DelayBudget(f.Model.DeadTime, j.ID.Window().Seconds(), g.ComputeDelay, g.SampleTime)
	words := make([]string, len(parts))
	for i, p := range parts {
		words[i] = fmt.Sprintf("%s %.3g ms", p.Name, p.Seconds*1000)
	}
	why := strings.Join(words, ", ")
	if m.Crossover.Known() {
		why += fmt.Sprintf("; together %.0f° of phase at the crossover", float64(m.Crossover)*total*180/math.Pi)
	}
	return []Fact{{Name: "delay", Value: fmt.Sprintf("%.3g ms", total*1000), Why: why + "; the wire is not in it, the loop runs on the board"}}
}
