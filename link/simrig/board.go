package simrig

import (
	"strconv"
	"time"

	"gainwright/protocol"
)

// board is what the microcontroller holds in RAM.
type board struct {
	power  int64 // ns at which its clock started
	tick   int64 // ns of the next loop period
	booted bool

	state   protocol.State
	trip    protocol.Cause // latched
	cuts    uint16
	log     stopLog
	rx      receiver
	tx      transmitter
	tel     telemetry
	cap     capture
	gains   gainSet
	limits  limitSet
	arm     arming
	run     run
	law     law
	window  window
	pins    pins
	heat    float64 // A²s
	counts  int64
	speed   float32 // rad/s over the window
	amps    float64 // as last measured
	busV    float64
	clipped bool

	restCount int64 // where the counter was when it last moved by two counts
	movedAt   int64
}

// restTime is how long the counter has to stand for the shaft to be at rest.
const restTime = int64(100 * time.Millisecond)

// start puts the board into its state after a start: off, stored gains, hard
// limits, not armed.
func (r *Rig) start(cause string) {
	r.sync()
	now := r.now
	r.plant.driver.off(now)
	r.boots++
	r.board = board{power: now, log: r.board.log}
	b := &r.board
	b.tx.byteNS = 10 * int64(time.Second) / int64(r.cfg.Board.Baud)
	b.tick = now + int64(r.cfg.Board.BootMS)*int64(time.Millisecond)
	b.tx.skipTo(now)
	b.pins.last = now
	b.busV = r.nominal()
	b.tel.scales = r.scales()
	b.gains = newGainSet(&r.cfg, r.stored)
	b.limits = newLimitSet(&r.cfg)
	b.cap.memory = r.cfg.Board.Capture
	b.rx.bootCause = cause
}

// wake is the first loop period after a start.
func (r *Rig) wake() {
	b := &r.board
	b.booted = true
	b.counts = r.enc.count()
	b.window.restart(b.counts, r.cfg.Board.Window)
	b.restCount, b.movedAt = b.counts, r.now
	b.pins.last = r.now
	b.tx.put(r.now, []byte{'\n'}) // ends what the last run may have left half sent
	r.event("ev boot " + strconv.Itoa(int(r.boots)) + " " + b.rx.bootCause)
}

// clockUS is the board's own time in µs since its start.
func (r *Rig) clockUS(at int64) uint64 { return uint64(at-r.board.power) / 1000 }

// low32 is the low 32 bits of the board's time in µs, as answers carry it.
func (r *Rig) low32(at int64) string {
	return strconv.FormatUint(uint64(uint32(r.clockUS(at))), 10)
}

// event queues a line that nobody asked for.
func (r *Rig) event(body string) { r.line([]byte(body)) }

// halt takes the output away at once and ends whatever was going on. The stop is
// logged if there was anything to end.
func (r *Rig) halt(cause protocol.Cause, seen int64) {
	b := &r.board
	active := b.state == protocol.Armed || b.state.Moving()
	r.sync()
	r.plant.driver.off(r.now)
	b.pins.off(r.now)
	if active {
		b.log.add(stop{cause: cause, seen: seen, beat: b.arm.beatAt, off: r.now, speed: b.speed, power: b.power})
		b.cap.stop()
	}
	if cause.Trip() {
		if b.trip == protocol.CauseNone {
			b.trip = cause
			r.event("ev trip " + strconv.Itoa(int(cause)) + " " + r.low32(seen))
		}
	} else if active {
		r.event("ev off " + strconv.Itoa(int(cause)) + " " + r.low32(seen))
	}
	b.state = protocol.Off
	if b.trip != protocol.CauseNone {
		b.state = protocol.Tripped
	}
	b.arm.void()
	b.run = run{}
}

// cut is what the cut byte and the stop line do.
func (r *Rig) cut() {
	if r.wrong[FaultIgnoresCut] {
		return
	}
	b := &r.board
	r.halt(protocol.CauseCut, r.now)
	b.cuts++
	r.event("cut " + strconv.Itoa(int(b.cuts)) + " " + r.low32(r.now))
}

// atRest reports whether the counter has stood still.
func (r *Rig) atRest() bool { return r.now-r.board.movedAt >= restTime }

// stop is one entry of the stop log; times in ns of the rig.
type stop struct {
	cause           protocol.Cause
	seen, beat, off int64
	power           int64 // start of the board clock then in use
	speed           float32
}

// stopLog keeps the last stops.
type stopLog struct {
	ring  [8]stop
	total int
}

func (l *stopLog) add(s stop) {
	l.ring[l.total%len(l.ring)] = s
	l.total++
}

// get returns stop number i from the newest.
func (l *stopLog) get(i int) (stop, bool) {
	if i < 0 || i >= min(l.total, len(l.ring)) {
		return stop{}, false
	}
	return l.ring[(l.total-1-i)%len(l.ring)], true
}
