// Package link moves bytes between the console and a board and decides in
// which order they leave. It knows nothing of what the bytes mean: a line is a
// line, and a stop is whatever bytes the caller hands to the stop lane.
//
//	supervisor ── Stop ──────────────┐ overtakes, voids what is queued
//	supervisor ── Motion, Heartbeat ─┼─► Writer.Run ─► Port ─► board
//	supervisor ── Request ───────────┘ one line in flight
//	                                    Reader.Run ◄─ Port ◄─ board
//
// The vocabulary, once:
//
//   - A Port is an open serial port, a pseudo-terminal, a recording or a fake.
//   - A line is one Write. Nothing joins two lines into one Write.
//   - A line is in flight from the start of its Write until its Write has
//     returned and its bytes have had the time to leave at the line's rate.
//   - The rate of a line is ten bit times a byte: eight data bits, one start
//     and one stop bit, no parity.
//
// What the package promises, each with its test:
//
//   - At most one line is ever ahead of a stop (TestStopIsOnTheWireWithinTwoLineTimes).
//   - A stop voids every line that was queued before it (TestStopVoidsWhatWasQueued),
//     and a line that was decided on before the stop can be refused afterwards
//     by its stamp (TestStampRefusesLinesOlderThanTheStop).
//   - Stop, Motion, Heartbeat and Request never wait for the port
//     (TestLanesNeverWaitForThePort).
//   - A Write that does not end is reported and the session is over; the
//     goroutine that hangs in it is left behind (TestStalledWriteEndsTheSession).
//   - Every queue has a bound: RequestsMax lines, one motion, one heartbeat,
//     StopMax bytes of stop, ChunkMax bytes a read.
//
// What it does not cover: bytes that a USB adapter or a driver keeps in buffers
// of its own after Write has returned. Pacing makes it unlikely that more than
// one line lies there; it cannot make it impossible.
package link
