package simrig

import (
	"math"
	"math/rand/v2"
	"time"

	"gainwright/protocol"
)

// Rig is one simulated rig. It is not safe for use by several goroutines; Serve
// puts it behind a lock.
//
// The caller owns the time: Advance carries rig and board to an instant, Receive
// hands bytes to the board at that instant, Output takes what has left it since.
type Rig struct {
	cfg    Config
	plant  plant
	enc    encoder
	noise  *rand.Rand // sensors and edges
	random *rand.Rand // one-time numbers and tokens
	faults []fault
	wrong  map[string]bool // faults of the board that have begun

	now           int64   // ns, console time
	loop, compute int64   // ns
	speedStep     float64 // rad/s that one count over the window is
	current       sensor
	busSensor     sensor
	stored        []uint32
	writes        int
	boots         uint16
	inputs        uint16 // bit 1: in its working position
	board         board
}

// New makes a rig at rest whose power comes on at time zero. Equal cfg and seed
// give equal bytes for equal calls. A cfg that Parse did not make must satisfy
// its ranges.
func New(cfg Config, seed uint64) *Rig {
	r := &Rig{
		cfg:     cfg,
		plant:   newPlant(&cfg),
		noise:   rand.New(rand.NewPCG(cfg.Seed, seed)),
		random:  rand.New(rand.NewPCG(cfg.Seed+1, seed)),
		faults:  makeFaults(cfg.Faults),
		wrong:   map[string]bool{},
		loop:    int64(cfg.Board.LoopUS) * 1000,
		compute: int64(cfg.Board.DelayUS) * 1000,
		boots:   uint16(cfg.Board.Boots),
		inputs:  uint16(1<<len(cfg.Board.Inputs) - 1),
	}
	r.plant.bind()
	r.enc = newEncoder(&cfg, r.noise)
	r.stored = gainBits(&cfg)
	r.speedStep = r.speedQuantum()
	s := &cfg.Sensors
	r.current = sensor{noise: s.CurrentNoise, step: s.CurrentStep, offset: s.CurrentZero}
	r.busSensor = sensor{noise: s.BusNoise, step: s.BusStep}
	r.start("power")
	r.beginFaults()
	return r
}

// Advance carries rig and board to the console time to. An earlier time than
// the last is taken as the last.
func (r *Rig) Advance(to time.Duration) {
	end := int64(to)
	for r.now < end {
		next := r.nextFault(end)
		if r.board.tick <= next {
			r.skip(next)
		}
		if r.board.tick > next {
			r.now = next
			r.beginFaults()
			continue
		}
		r.now = r.board.tick
		r.board.tick += r.loop
		r.sync()
		r.onTick()
		r.beginFaults()
	}
}

// sync carries the plant to the present. Between loop periods the plant may lag:
// it is only brought up where somebody looks at it or acts on it, so that its
// steps stay whole fractions of a loop period.
func (r *Rig) sync() { r.plant.advance(r.now) }

// skip jumps over loop periods up to an instant in which the board would find
// nothing to do and the rig would not change: all at rest, output off, nobody
// listening.
func (r *Rig) skip(until int64) {
	b := &r.board
	p := &r.plant
	if b.state.Moving() || b.state == protocol.Armed || b.tel.every > 0 || b.cap.busy() || !b.booted ||
		p.hand.until > r.now || len(p.driver.queue) > 0 || !b.window.settled() ||
		!p.shaft.still(p.duty(), !p.driver.now.on && !p.driver.shorts) || !p.supply.settle() || !p.slack() {
		return
	}
	n := (until - b.tick) / r.loop
	if n <= 0 {
		return
	}
	b.tick += n * r.loop
	b.heat *= math.Exp(-float64(n*r.loop) * 1e-9 / heatTau)
	r.now = b.tick - r.loop
	r.sync()
	b.pins.accrue(r.now)
}

// Hand has somebody turn the shaft by the given turns of the output shaft over
// two seconds, beginning now.
func (r *Rig) Hand(turns float64) {
	r.sync()
	p := &r.plant
	p.hand = hand{from: r.now, until: r.now + int64(2*time.Second), start: p.shaft.th,
		by: 2 * math.Pi * turns * p.motor.gear}
}

// PowerCycle takes the board's power away and gives it back at once. What lived
// in RAM is gone; the shaft coasts on.
func (r *Rig) PowerCycle() {
	r.board.log = stopLog{}
	r.start("power")
}

// Restart restarts the board without loss of RAM, as a watchdog or a dip of the
// supply does. cause is a word of the identity's boot line.
func (r *Rig) Restart(cause string) {
	r.start(cause)
}

// SetInput sets an input bit by its name; true is the working position. It
// reports whether the board has an input of that name.
func (r *Rig) SetInput(name string, working bool) bool {
	for i, n := range r.cfg.Board.Inputs {
		if n != name {
			continue
		}
		bit := uint16(1) << i
		r.inputs |= bit
		if !working {
			r.inputs &^= bit
		}
		return true
	}
	return false
}
