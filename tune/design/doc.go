// Package design turns a model of a motor into speed-loop gains and says what
// they are worth: exact margins of the loop as it runs (sampled or continuous,
// with its whole dead time), step and load responses, the published tuning
// rules side by side, a rule of its own that finds the largest integral gain
// under a robustness bound, the worst case over what is not known of the
// motor, and the forms and units that boards hold gains in.
//
// Speeds are in rad/s, drives in V, times in s. The package does no I/O, reads no
// clock and draws random numbers only from the seed that it is given.
package design
