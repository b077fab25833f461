// Package safety is the console limiter: it decides, from events alone, what may
// be sent to a drive. Envelope.Step is the whole decision; it is pure, knows no
// clock, port, file or screen, and its caller carries the effects out literally.
//
// The words: an Envelope holds the hard limits of a rig; a Plan is what somebody
// wants to drive; Envelope.Admit turns it into an Admitted or says which segment
// is over which limit; only an Admitted can be armed. A stop asks the board to
// put its output off. A trip is a stop that nobody asked for: it keeps its first
// cause until it is acknowledged and then, as a second act, reset.
//
// Nothing here is a safety function in the sense of any standard. The promises
// it does keep, their tests and their gaps are numbered in SAFETY.md; comments
// cite them as (S4).
package safety
