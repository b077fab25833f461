// Package ptyport opens pseudo-terminals that look like serial ports, so that a
// board in software can be reached by its path, by this console or by any other
// program. The board holds the master; the console opens the path.
//
// A pseudo-terminal differs from a serial port in ways this package hides:
//
//   - It starts in a mode that echoes and edits lines. Open sets it raw before
//     anyone can write.
//   - When the last program has closed the path, the master's Read fails. Here
//     it waits for the next program instead. What the gone program did not read
//     is thrown away, and its exclusive lock, which a killed program leaves
//     behind, is taken off.
//   - While nobody has the path open, a board's bytes would pile up and greet the
//     next program. Here they are lost, as on a cable without a far end.
//
// What it does not have: a line rate, modem lines, parity. Rates are accepted
// and ignored by the kernel.
package ptyport

import "errors"

// ErrNoPTY says that this system has no pseudo-terminals.
var ErrNoPTY = errors.New("this system has no pseudo-terminals; simulated boards can only be used inside the program here")
