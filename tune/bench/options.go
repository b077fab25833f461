package bench

import (
	"gainwright/link"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// Options of a live bench.
type Options struct {
	Job     job.Options
	Program string // name and version
	// Ports lists what could be opened; nil where the port is given.
	Ports func() []job.PortView
	// Open opens a port. It is called again, with the same path, when a port that
	// was lost comes back.
	Open func(path string) (Opened, error)
	// OpenAt opens a port at another line rate, where nothing that can be read comes
	// at that of Open. nil: no other rate is tried.
	OpenAt func(path string, baud int) (Opened, error)
	// Seen is told on which port a board was seen. nil: nobody keeps it.
	Seen func(path, board string)
	// NewSheet makes the record, once the board is known. nil: no record.
	NewSheet func(board string, r rig.Rig) (*sheet.Sheet, error)
	// Simulated says that the far end is a simulated rig of this program's own.
	Simulated bool
	// Hand and Cycle act on a simulated rig: one turn of its shaft, its power. nil
	// where people have to.
	Hand, Cycle func()
	// Work has inputs of a simulated rig worked. nil where people have to.
	Work func([]job.InputBit)
	// Laptop reads battery and sleep. nil: nothing is told.
	Laptop func() job.Laptop
	// Watch is shown every event of the limiter, its state after it and what it called
	// for, where the session lives: it must be quick. nil: nobody watches.
	Watch func(st *safety.State, e safety.Event, out []safety.Effect)
	// AtClose gives a last entry for the record, of kind event; nil: none.
	AtClose func() (name string, v any)
	// OnPanic is called, after a stop was sent, when a goroutine of ours panics.
	OnPanic func(v any, stack []byte)
}

// Opened is an open port.
type Opened struct {
	Port link.Port
	Baud int
	Note string // what opening did to the board's lines, in words
}
