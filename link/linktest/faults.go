package linktest

import (
	"io"
	"math/rand/v2"
	"sync"
	"time"

	"gainwright/link"
)

// Drop loses bytes from the board, each with the chance p (0 to 1).
func Drop(port link.Port, seed uint64, p float64, on *Switch) link.Port {
	rng := rand.New(rand.NewPCG(seed, 1))
	return editReads(port, on, func(b []byte) []byte {
		kept := b[:0]
		for _, c := range b {
			if rng.Float64() >= p {
				kept = append(kept, c)
			}
		}
		return kept
	})
}

// Garble flips one bit of bytes from the board, each with the chance p (0 to 1).
func Garble(port link.Port, seed uint64, p float64, on *Switch) link.Port {
	rng := rand.New(rand.NewPCG(seed, 2))
	return editReads(port, on, func(b []byte) []byte {
		for i := range b {
			if rng.Float64() < p {
				b[i] ^= 1 << rng.IntN(8)
			}
		}
		return b
	})
}

// Mute loses everything from the board: it hears but does not answer.
func Mute(port link.Port, on *Switch) link.Port {
	return editReads(port, on, func(b []byte) []byte { return nil })
}

// editReads passes what is read through edit while on is active.
func editReads(port link.Port, on *Switch, edit func([]byte) []byte) link.Port {
	return &edited{Port: port, on: on, edit: edit}
}

type edited struct {
	link.Port
	on   *Switch
	edit func([]byte) []byte
}

func (e *edited) Read(p []byte) (int, error) {
	n, err := e.Port.Read(p)
	if e.on.active() {
		n = len(e.edit(p[:n]))
	}
	return n, err
}

// Deaf loses everything to the board: Write succeeds, nothing arrives.
func Deaf(port link.Port, on *Switch) link.Port { return &deaf{port, on} }

type deaf struct {
	link.Port
	on *Switch
}

func (d *deaf) Write(p []byte) (int, error) {
	if d.on.active() {
		return len(p), nil
	}
	return d.Port.Write(p)
}

// Stall makes Write hang from the moment on is set until it is cleared or the
// port is closed, as a port does whose far end no longer takes bytes. Pass a
// Switch; it is looked at every millisecond.
func Stall(port link.Port, on *Switch) link.Port {
	return &stall{Port: port, on: on, shut: make(chan struct{})}
}

type stall struct {
	link.Port
	on   *Switch
	once sync.Once
	shut chan struct{}
}

func (s *stall) Write(p []byte) (int, error) {
	for s.on.active() {
		select {
		case <-s.shut:
			return 0, io.ErrClosedPipe
		case <-time.After(time.Millisecond):
		}
	}
	return s.Port.Write(p)
}

func (s *stall) Close() error {
	s.once.Do(func() { close(s.shut) })
	return s.Port.Close()
}

// HalfWrite takes half of each Write, rounded up, and reports no error, as a
// terminal device does whose buffer is nearly full.
func HalfWrite(port link.Port, on *Switch) link.Port { return &halfWrite{port, on} }

type halfWrite struct {
	link.Port
	on *Switch
}

func (h *halfWrite) Write(p []byte) (int, error) {
	if h.on.active() {
		p = p[:(len(p)+1)/2]
	}
	return h.Port.Write(p)
}

// OneByte hands out one byte a Read.
func OneByte(port link.Port, on *Switch) link.Port { return &oneByte{port, on} }

type oneByte struct {
	link.Port
	on *Switch
}

func (o *oneByte) Read(p []byte) (int, error) {
	if len(p) > 1 && o.on.active() {
		p = p[:1]
	}
	return o.Port.Read(p)
}

// Flood answers every Read in full: where the board sends nothing, with junk,
// repeated. It never pauses; the reader of it sets the pace.
func Flood(port link.Port, junk []byte, on *Switch) link.Port {
	return &flood{Port: port, junk: junk, on: on}
}

type flood struct {
	link.Port
	junk []byte
	at   int
	on   *Switch
}

func (f *flood) Read(p []byte) (int, error) {
	if !f.on.active() || len(f.junk) == 0 {
		return f.Port.Read(p)
	}
	for i := range p {
		p[i] = f.junk[f.at]
		f.at = (f.at + 1) % len(f.junk)
	}
	return len(p), nil
}
