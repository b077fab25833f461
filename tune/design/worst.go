package design

import "math/rand/v2"

// newRand returns the generator that a seed stands for.
func newRand(seed uint64) *rand.Rand { return rand.New(rand.NewPCG(seed, 0x9e3779b97f4a7c15)) }
