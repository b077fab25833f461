// Package job is the order of work on one rig, from the first identity to the
// signed card: what each step is for, what it needs, what it does to the motor
// and what comes out. A step is a plain procedure over what is known so far
// (Known) and a pair of hands (Hands) that asks the person, talks to the board,
// runs an admitted plan and keeps the record. It knows neither a port nor a
// clock nor a screen; tune/bench lends it hands, live or in virtual time.
package job
