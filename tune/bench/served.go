package bench

import (
	"time"

	"gainwright/link"
	"gainwright/link/ptyport"
	"gainwright/link/simrig"
	"gainwright/tune/job"
)

// ErrNoPTY says that this system has no pseudo-terminals.
var ErrNoPTY = ptyport.ErrNoPTY

// Served is a simulated rig in real time behind a port.
type Served struct {
	Path string // of the pseudo-terminal; "memory" for a pipe
	srv  *simrig.Server
	far  link.Port
}

// ServePTY serves a rig behind a new pseudo-terminal.
func ServePTY(r *simrig.Rig) (*Served, error) {
	m, path, err := ptyport.Open()
	if err != nil {
		return nil, err
	}
	m.SetLossy(true) // a board does not wait for a console that reads slowly
	return &Served{Path: path, srv: simrig.Serve(r, m, since())}, nil
}

// ServePipe serves a rig behind a pipe in memory.
func ServePipe(r *simrig.Rig) *Served {
	near, far := link.Pipe()
	return &Served{Path: "memory", srv: simrig.Serve(r, near, since()), far: far}
}

func since() func() time.Duration {
	start := time.Now()
	return func() time.Duration { return time.Since(start) }
}

// Port is the console's end of a pipe.
func (s *Served) Port() link.Port { return s.far }

// Hand has the shaft turned by one turn of the output shaft.
func (s *Served) Hand() { s.srv.Do(func(r *simrig.Rig) { r.Hand(1) }) }

// Cycle switches the board's power off and on.
func (s *Served) Cycle() { s.srv.Do(func(r *simrig.Rig) { r.PowerCycle() }) }

// Rig gives access to the rig, carried to the present.
func (s *Served) Rig(f func(*simrig.Rig)) { s.srv.Do(f) }

// Close ends the serving.
func (s *Served) Close() error { return s.srv.Close() }

// Work has inputs of the rig worked.
func (s *Served) Work(set []job.InputBit) { s.srv.Do(func(r *simrig.Rig) { WorkInputs(r, set) }) }
