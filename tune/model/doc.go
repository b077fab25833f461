// Package model holds linear models of a motor as a speed loop sees it: a
// rational transfer function in s with an exact dead time, from the applied
// input (V, or A for a drive in current mode) to the speed at the motor shaft
// in rad/s. It answers what such a model does: frequency response, step
// response, sampled form under a zero-order hold. Beside it stand the equations
// of the permanent-magnet DC motor from which such a model comes.
//
// Dead time is exact everywhere; no rational approximation of it is made. The
// package does no I/O and reads no clock. Times are float64 seconds, because
// everything here is a numeric kernel.
package model
