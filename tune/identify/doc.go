// Package identify finds a linear model of a motor in a recorded run and says how
// far it is to be believed.
//
// The model is fitted by output error: the speed is simulated from the applied
// voltage alone, on the record's own time stamps, and compared with what was
// measured. Hold, dead time (continuous, never rounded to samples) and the window
// over which the speed is a mean are exact. Gain, offset and initial states,
// which enter linearly, are eliminated; the few others are found by
// Levenberg–Marquardt from many starts with exact derivatives. Where the rounding
// of an encoder is the noise, its counts are fitted and not their differences.
//
// Run fits and judges one record, RunJoint several with one set of parameters,
// Judge holds a fit against another record. Beside the models stand what settled
// levels tell (FitStaircase), friction from torque (FitFriction), resistance and
// Ke from the current (FitElectrical) and the first motion on a ramp
// (FindBreakaway). Solve is the least-squares solver under all of it.
//
// The files: drive.go, kernel.go, second.go simulate; record.go cuts a trace into
// pieces; varpro.go and reduce.go eliminate; solver.go solves; fit.go starts;
// colour.go, whiteness.go, profile.go give the intervals; findings.go and leftover.go
// look at what is left over; judge.go, choose.go decide; run.go is the way in.
//
// The package does no I/O and reads no clock. Times are float64 seconds, speeds
// rad/s at the motor shaft, voltages V.
package identify
