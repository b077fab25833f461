// Package serialport opens serial ports and finds out which there are. It is the
// only package that knows the serial library; everybody else sees a link.Port.
//
// What opening does to a board. Linux and macOS raise DTR and RTS whenever a
// port is opened for the first time, and no program can prevent it; boards that
// tie DTR to their reset restart then. When the last program closes the port
// both lines fall again, unless hang-up on close (HUPCL) is off. So, unless
// asked otherwise, Open switches HUPCL off: the first opening may restart a
// board, the next ones should not. Windows lets a program open a port with both
// lines low, and Open does. What was done is written in Opened.Lines, for the
// screen and the record. Open itself sends no byte.
//
// Who else has the port. Open takes a lock that names its holder; the system
// drops it when the holder ends, however it ends. On Linux the lock files of
// other programs (/var/lock/LCK..NAME, Filesystem Hierarchy Standard 3.0,
// section 5.9) are respected.
//
// What was tried: Linux on pseudo-terminals. Windows, macOS and the BSDs are
// built, not run; a real adapter has not been tried on any.
package serialport

import "time"

// ReadTimeout is how long a Read waits before it returns 0, nil. It bounds how
// long it takes a reader to see that its session is over, nothing else: bytes
// are handed over when they arrive.
const ReadTimeout = 50 * time.Millisecond

// UsualBauds are the line rates that boards use, most usual first, in bit/s.
func UsualBauds() []int {
	return []int{115200, 921600, 57600, 38400, 230400, 460800, 1000000, 2000000, 500000, 250000, 19200, 9600}
}
