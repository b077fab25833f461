// Package excite makes the plans of the experiments: which drive, how long,
// both ways, and why that size. It decides nothing about permission: every plan
// still has to be admitted by an envelope. It knows no board and no clock.
package excite

import (
	"fmt"
	"math"
	"time"

	"gainwright/safety"
)

// Known is what sizes an experiment. Zero means not known.
type Known struct {
	Env          safety.Envelope
	StartForward float64 // V at which the shaft was seen to start, forward
	StartReverse float64 // V, a positive number
	Gain         float64 // rad/s per V
	Tau          float64 // s, slowest time constant
	SpeedStep    float64 // rad/s, smallest step of the reported speed
	Noise        float64 // rad/s, standard deviation of the speed at rest
	Loop         float64 // s
	Patterns     bool    // the board's loop makes relay, sequence and steps itself
	FallSlope    float64 // V/s at which the drive may fall towards zero, for what braking gives back; 0: at once
	Dips         bool    // the drive falls by way of zero, where a shorted winding brakes and gives nothing back
	BrakeVolts   float64 // V of back-EMF up to which the drive may go to zero at once and brake; above it a run ends with the output off
}

// builder collects segments and keeps every change of drive inside the slope
// that the envelope allows.
type builder struct {
	mode  safety.Mode
	slope float64 // largest change a second, V/s or rad/s²
	fall  float64 // the same towards zero; 0: as slope
	at    float64
	segs  []safety.Segment
}

func volts(env safety.Envelope) *builder {
	return &builder{mode: safety.ModeVolts, slope: 0.9 * env.SlewMax}
}

func speeds(env safety.Envelope) *builder {
	return &builder{mode: safety.ModeSpeed, slope: 0.8 * env.AccelMax}
}

// jumpTime is how long the quickest allowed change to value takes, never less
// than one tick of the console.
func (b *builder) jumpTime(value float64) time.Duration {
	slope := b.slope
	if b.fall > 0 && math.Abs(value) < math.Abs(b.at) {
		slope = math.Min(slope, b.fall)
	}
	return max(10*time.Millisecond, seconds(math.Abs(value-b.at)/slope))
}

// hold goes to value as quickly as allowed and stays there for d in all.
func (b *builder) hold(value float64, d time.Duration, note string) {
	b.holdUntil(value, d, safety.Until{}, note)
}

func (b *builder) holdUntil(value float64, d time.Duration, until safety.Until, note string) {
	if value != b.at {
		j := b.jumpTime(value)
		b.segs = append(b.segs, safety.Segment{Mode: b.mode, From: b.at, To: value, Duration: j, Note: note})
		d = max(d-j, 10*time.Millisecond)
		b.at = value
	}
	b.segs = append(b.segs, safety.Segment{Mode: b.mode, From: value, To: value, Duration: d, Until: until, Note: note})
}

// ramp goes from the present value to another in d, ended early by until.
func (b *builder) ramp(to float64, d time.Duration, until safety.Until, note string) {
	d = max(d, b.jumpTime(to))
	b.segs = append(b.segs, safety.Segment{Mode: b.mode, From: b.at, To: to, Duration: d, Until: until, Note: note})
	b.at = to
}

func seconds(s float64) time.Duration { return time.Duration(math.Ceil(s*1e6)) * time.Microsecond }

// restMax is how long a shaft may take to come to rest before the next part of a
// plan begins all the same.
const restMax = 4 * time.Second

// off takes the drive to zero at once and waits for rest. After a segment that
// may have ended early the present drive is not known, so the way down starts
// from zero: less drive is always allowed.
func (b *builder) off(note string) {
	b.at = 0
	b.segs = append(b.segs, safety.Segment{Mode: b.mode, Duration: restMax, Until: safety.Until{Kind: safety.UntilRest}, Note: note})
}

// end takes the drive from value to zero and waits for rest where the shaft may be
// braked like that. Else the plan is over: the output goes off and the motor
// coasts.
func (b *builder) end(k Known, value float64) {
	if math.Abs(value) <= k.BrakeVolts {
		b.off("rest")
	}
}

// fallTo brings the speed down to that of a lower drive and holds it for d. Under
// zero drive the back-EMF decays with the time constant towards minus the sliding
// friction, so that it needs Tau·ln(from/to).
func (b *builder) fallTo(k Known, value float64, d time.Duration, note string) {
	if k.Dips && value > 0 && b.at > value {
		b.hold(0, max(10*time.Millisecond, seconds(k.Tau*math.Log(b.at/value))), "dip")
		b.hold(value, d, note)
		return
	}
	b.hold(value, b.jumpTime(value)+d, note)
}

// motionCounts is how many counts end a ramp as motion seen.
const motionCounts = 12

// Sign makes the bounded ramp each way that ends with the first counts.
func Sign(k Known) safety.Plan {
	b := volts(k.Env)
	top := 0.98 * float64(k.Env.SignVolts)
	until := safety.Until{Kind: safety.UntilMotion, Counts: motionCounts}
	for _, dir := range k.ways() {
		b.ramp(dir*top, seconds(2.5), until, "ramp "+way(dir))
		b.off("rest")
	}
	return safety.Plan{Name: "sign check", Check: safety.CheckSign, TurnsMax: k.Env.SignTurns, SpeedMax: float64(k.Env.SpeedMax) / 2,
		Purpose: "positive drive must give positive counts", Segments: b.segs}
}

func (k Known) ways() []float64 {
	if k.Env.Reverse {
		return []float64{1, -1}
	}
	return []float64{1}
}

func way(dir float64) string {
	if dir < 0 {
		return "reverse"
	}
	return "forward"
}

// CreepVolts is the drive that should give half the creep ceiling: the friction
// seen at the start of motion, less what static friction has over sliding, and
// the rest by the gain.
func (k Known) CreepVolts() float64 {
	target := 0.5 * float64(k.Env.CreepMax)
	return math.Min(0.85*k.StartForward+target/k.Gain, 0.9*float64(k.Env.VoltsMax))
}

// Creep makes a run at creep speed of length d for the check c.
func Creep(k Known, c safety.Check, d time.Duration) safety.Plan {
	b := volts(k.Env)
	v := k.CreepVolts()
	// Kicked off a little above the start voltage, so that static friction does
	// not decide whether it turns.
	if kick := 1.15 * k.StartForward; kick > v {
		b.ramp(kick, 300*time.Millisecond, safety.Until{Kind: safety.UntilMotion, Counts: motionCounts}, "start")
		b.at = v
	}
	b.ramp(v, 200*time.Millisecond, safety.Until{}, "to creep")
	b.hold(v, d, "creep")
	p := safety.Plan{Check: c, SpeedMax: float64(k.Env.CreepMax), Segments: b.segs}
	switch c {
	case safety.CheckStop:
		p.Name, p.Purpose = "stop check", "press the stop key while the shaft creeps"
	case safety.CheckSilence:
		p.Name, p.Purpose = "silence check", "the console goes silent; the board must stop by itself"
		p.SilenceAt = 900 * time.Millisecond
	default:
		p.Name, p.Purpose = "limit check", "the board's speed ceiling is low on purpose; it must trip"
	}
	return p
}

// Rates of the slow part of a breakaway ramp, as a share of the start a second: a
// coarse encoder sees the first motion late, and needs a slower one.
const (
	rampRate   = 0.35
	rampSlow   = 0.12
	coarseTurn = 0.05 // rad a count
)

// Coarse reports whether the encoder is one that needs slow ramps.
func (k Known) Coarse() bool { return k.Env.RadPerCount > coarseTurn }

// Breakaway makes n slow ramps each way, each ended by the first motion, with a
// rest between them.
func Breakaway(k Known, n int, slow bool) safety.Plan {
	b := volts(k.Env)
	top := float64(k.Env.VoltsMax)
	rate, quick := rampRate, 0.5
	if slow {
		rate, quick = rampSlow, 0.6
	}
	until := safety.Until{Kind: safety.UntilMotion, Counts: motionCounts}
	for i := range n {
		for _, dir := range k.ways() {
			start := k.StartForward
			if dir < 0 {
				start = k.StartReverse
			}
			// Quick to about half of what was seen, then slowly past it: the slow part
			// is what is measured.
			half := dir * quick * start
			b.ramp(half, 100*time.Millisecond, until, fmt.Sprintf("%s %d", way(dir), i+1))
			end := math.Min(1.8*start, 0.95*top)
			b.ramp(dir*end, seconds((end-quick*start)/math.Max(rate*start, 0.02)), until, fmt.Sprintf("%s %d", way(dir), i+1))
			b.off("rest")
		}
	}
	return safety.Plan{Name: "breakaway", Purpose: "the voltage at which the shaft starts to turn, each way", Segments: b.segs,
		SpeedMax: float64(k.Env.SpeedMax) / 2}
}

// Stair is one level of a staircase as planned.
type Stair struct {
	Volts    float64
	From, To time.Duration // of its second half, where it counts as settled
	Up       bool
}

// Staircase makes levels of voltage up to top volts in the direction dir (1
// forward, -1 reverse), and down again where down is set. Each level is held for
// five time constants, at least 0.4 s, and its second half is what is averaged.
func Staircase(k Known, levels int, top, dir float64, down bool) (safety.Plan, []Stair) {
	b := volts(k.Env)
	var stairs []Stair
	at := time.Duration(0)
	dwell := seconds(math.Max(0.4, 5*k.Tau))
	level := func(v float64, up bool) {
		b.hold(v, dwell, fmt.Sprintf("%.3g V", v))
		stairs = append(stairs, Stair{Volts: v, From: at + dwell/2, To: at + dwell, Up: up})
		at += dwell
	}
	start := k.StartForward
	if dir < 0 {
		start = k.StartReverse
	}
	low := math.Min(1.25*start, 0.6*top)
	for i := range levels {
		level(dir*(low+(top-low)*float64(i)/float64(levels-1)), true)
	}
	for i := levels - 2; i >= 0 && down; i-- {
		level(dir*(low+(top-low)*float64(i)/float64(levels-1)), false)
	}
	if down {
		b.off("rest")
	}
	name := "staircase"
	if dir < 0 {
		name = "staircase reverse"
	}
	return safety.Plan{Name: name, Purpose: "steady speed against voltage", Segments: b.segs}, stairs
}

// RelaySpec is a relay about a middle: High until the speed has come to Upper, Low
// until it has come to Lower.
type RelaySpec struct {
	Bias, High, Low float64 // V
	Upper, Lower    float64 // rad/s
	Cycles          int
}

// Relay makes a relay-feedback run from the console: every half of a cycle ends at
// its threshold, and in any case after six time constants. Its end is the number
// of cycles.
func Relay(k Known, r RelaySpec) safety.Plan {
	b := volts(k.Env)
	b.fall = k.FallSlope
	ramp, settle := leadIn(k)
	b.ramp(r.Bias, seconds(ramp), safety.Until{}, "to the middle")
	b.hold(r.Bias, seconds(settle), "settle")
	if k.patterns() {
		return b.relayOnBoard(k, r)
	}
	longest := seconds(math.Max(0.3, 6*k.Tau))
	half := func(v float64, until safety.Until, note string) {
		j := b.jumpTime(v)
		b.segs = append(b.segs, safety.Segment{Mode: b.mode, From: b.at, To: v, Duration: j, Until: until, Note: note},
			safety.Segment{Mode: b.mode, From: v, To: v, Duration: longest, Until: until, Note: note})
		b.at = v
	}
	for range r.Cycles {
		half(r.High, safety.Until{Kind: safety.UntilAbove, Speed: r.Upper}, "relay high")
		half(r.Low, safety.Until{Kind: safety.UntilBelow, Speed: r.Lower}, "relay low")
	}
	b.end(k, r.Low)
	return safety.Plan{Name: "relay", Purpose: "limit cycle under a relay: gain and phase where a loop would cross over", Segments: b.segs}
}

// Coast makes a run up to a steady speed that ends there: the output goes off and
// the shaft coasts, which is what is looked at.
func Coast(k Known, drive float64) safety.Plan {
	b := volts(k.Env)
	ramp, settle := leadIn(k)
	b.ramp(drive, seconds(ramp), safety.Until{}, "up")
	b.hold(drive, seconds(settle), "steady, then output off")
	return safety.Plan{Name: "coast-down", Purpose: "friction: how the shaft slows down with the output off", Segments: b.segs}
}

// Times of the small-signal tests: the console renews a drive every 10 ms, and a
// level has to last some of those.
func leadIn(k Known) (ramp, settle float64) {
	return math.Max(0.1, 4*k.Tau), math.Max(0.15, 6*k.Tau)
}

// Step makes n steps up and down about bias, each held for five time constants.
// amplitude is the size of a step to either side.
func Step(k Known, bias, amplitude float64, n int) safety.Plan {
	b := volts(k.Env)
	b.fall = k.FallSlope
	hold := seconds(math.Max(0.06, 5*k.Tau))
	ramp, settle := leadIn(k)
	b.ramp(bias, seconds(ramp), safety.Until{}, "to the middle")
	b.hold(bias, seconds(settle), "settle")
	if k.patterns() {
		b.pattern(k, safety.Pattern{Kind: safety.PatternSquare, Amplitude: amplitude, Loops: k.loops(hold), Steps: 2 * n}, hold, "steps in the board's loop")
		return safety.Plan{Name: "step test", Purpose: "time constant and dead time about one operating point", Segments: b.segs}
	}
	for range n {
		b.hold(bias+amplitude, hold, "up")
		b.fallTo(k, bias-amplitude, hold, "down")
	}
	b.hold(bias, hold, "middle")
	b.end(k, bias)
	return safety.Plan{Name: "step test", Purpose: "time constant and dead time about one operating point", Segments: b.segs}
}

// Heights makes n steps up of different heights about bias, with slow ways down
// between them: a record of another kind where the drive may not fall at once.
func Heights(k Known, bias, amplitude float64, n int, seed uint32) safety.Plan {
	b := volts(k.Env)
	b.fall = k.FallSlope
	ramp, settle := leadIn(k)
	b.ramp(bias, seconds(ramp), safety.Until{}, "to the middle")
	b.hold(bias, seconds(settle), "settle")
	bits := sequence(9, seed)
	share := func(i int) float64 { // 0.3 to 1 from three bits
		s := 0.0
		for _, up := range bits[3*i%len(bits):][:3] {
			if s *= 2; up {
				s++
			}
		}
		return 0.3 + 0.1*s
	}
	for i := range n {
		low := bias - amplitude*share(2*i)
		b.fallTo(k, low, seconds(math.Max(0.1, 2.5*k.Tau)), "down")
		b.hold(bias+amplitude*share(2*i+1), seconds(math.Max(0.1, 3.5*k.Tau)), "up")
	}
	b.end(k, bias)
	return safety.Plan{Name: "heights", Purpose: "a record that the model has not seen", Segments: b.segs}
}

// register is a seed of a register of so many stages, made from one of any size.
func register(stages int, seed uint32) uint16 {
	return max(1, uint16(seed&(1<<stages-1)))
}

// sequence is one period of a register of so many stages.
func sequence(stages int, seed uint32) []bool {
	return safety.Pattern{Kind: safety.PatternSequence, Stages: stages, Seed: register(stages, seed)}.Levels()
}

// PRBS makes a pseudo-random binary sequence of amplitude about bias: clock is
// the length of one bit, bits the length of the register.
func PRBS(k Known, bias, amplitude float64, clock time.Duration, bits int, seed uint32, longest time.Duration) safety.Plan {
	b := volts(k.Env)
	b.fall = k.FallSlope
	ramp, settle := leadIn(k)
	b.ramp(bias, seconds(ramp), safety.Until{}, "to the middle")
	b.hold(bias, seconds(settle), "settle")
	p := safety.Plan{Name: "prbs", Purpose: "a record that the model has not seen"}
	if k.patterns() {
		for bits > 3 && time.Duration(1<<bits-1)*clock > longest {
			bits--
		}
		p.Segments = b.pattern(k, safety.Pattern{Kind: safety.PatternSequence, Amplitude: amplitude, Stages: bits, Loops: k.loops(clock), Seed: register(bits, seed)}, 0, "prbs in the board's loop")
		return p
	}
	var total time.Duration
	for _, up := range sequence(bits, seed) {
		if total += clock; total > longest {
			break
		}
		v := bias - amplitude
		if up {
			v = bias + amplitude
		}
		b.hold(v, clock, "prbs")
	}
	b.end(k, bias)
	p.Segments = b.segs
	return p
}

// Setpoint is a closed-loop profile: levels in rad/s, each held for hold, the
// way to it included. slope is how fast the setpoint moves, in rad/s²; the
// envelope may make it slower.
func Setpoint(k Known, name, purpose string, levels []float64, hold time.Duration, slope float64) safety.Plan {
	b := speeds(k.Env)
	b.slope = math.Min(b.slope, slope)
	for _, v := range levels {
		b.hold(v, hold, fmt.Sprintf("%.0f rpm", v*60/(2*math.Pi)))
	}
	return safety.Plan{Name: name, Purpose: purpose, Segments: b.segs}
}
