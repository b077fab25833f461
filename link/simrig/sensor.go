package simrig

import (
	"math"
	"math/rand/v2"
)

// sensor is a measured quantity as the board's converter sees it.
type sensor struct {
	noise  float64 // RMS, in the unit of the quantity
	step   float64 // quantum, 0 for none
	offset float64
}

func (s *sensor) read(x float64, rng *rand.Rand) float64 {
	x += s.offset
	if s.noise > 0 {
		x += s.noise * rng.NormFloat64()
	}
	if s.step > 0 {
		x = math.Round(x/s.step) * s.step
	}
	return x
}
