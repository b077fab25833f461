// Package conformance holds a board against protocol/SPEC.md, paragraph by
// paragraph, and says what it may be used for.
//
// The checks know nothing of ports: they speak through a Line, which carries
// bytes and has a clock. OnPort makes one of an open port in real time; a test
// makes one of a simulated board in virtual time.
//
// Nothing here moves a motor unless Options.Permit says so at that moment: the
// ordinary checks arm the board but never send it a drive line that it could
// take, and the voltage in the lines that it must not take is 0 mV.
//
// What the checks change on a board: the limits in use, the running and the
// stored gains (one bit of one of them, twice written, then as found again), the
// rate of telemetry and a latched trip. At the end limits and gains are as found.
//
// Reading order: runner.go (how checks are run and counted), session.go (the
// talk with the board), then one file for each part of SPEC.md.
package conformance
