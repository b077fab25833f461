package protocol

import "math/bits"

// registerTaps are those of maximal-length registers of 3 to 16 stages, bit 0 the
// stage that goes out (P13.3): P. Alfke, Xilinx application note 052 (1996),
// table 3, from memory; a test walks through every register.
var registerTaps = [...]uint16{3: 0x3, 0x3, 0x5, 0x3, 0x3, 0x1D, 0x11, 0x9, 0x5, 0x941, 0x1601, 0x2A01, 0x3, 0x100B}

// Sequence is one period of a binary sequence of maximal length, 2^stages − 1 bits,
// from a register of 3 to 16 stages that begins as seed, from 1 to 2^stages − 1.
func Sequence(stages int, seed uint16) []bool {
	out := make([]bool, 1<<stages-1)
	for i := range out {
		out[i] = seed&1 == 1
		odd := uint16(bits.OnesCount16(seed&registerTaps[stages]) & 1)
		seed = seed>>1 | odd<<(stages-1)
	}
	return out
}
