// Package sheet keeps the record of one job: a folder that a person can read in
// twenty years without the program. It knows what a record looks like and
// whether one was changed; it does not know how a motor is tuned.
//
// # The folder
//
//	index.txt                     one line for each entry, oldest first
//	0001-header-job.json          who, where, when, with which program
//	0002-identity-board.json      NNNN-kind-name, one file for each entry
//	0003-rig-pump-3.toml
//	0009-trace-step-forward.csv   names, units, then rows
//	tape-session.txt              a stream: grows through the whole job
//	0042-close-accepted.json      the last entry
//
// A line of the index holds seven words: number, time, kind, file, bytes,
// sha256 of the file, chain. The chain is the sha256 of the chain of the line
// before, one blank, and the line up to and including the sha256; the first
// line follows the sha256 of the lines that begin with #. Those lines say so
// themselves, and sha256sum is enough to do the sum by hand.
//
// # What it promises
//
// Nothing is overwritten: every file is made anew or not at all, and only the
// index and the streams grow, at their end. A file is complete and on the disk
// before its line is written, so a kill at any byte leaves a folder that opens,
// and at most the entry being written is lost. The first disk error is returned
// and stays: no later entry pretends to have been kept.
//
// Check says whether and where a folder was changed, cut, re-ordered, added to
// or taken from. The chain proves order and integrity, not who did it: whoever
// rewrites every line after a change makes a new chain that agrees with itself.
// The hash on the printed card is what such a chain is held against.
package sheet
