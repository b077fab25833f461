package simrig

import (
	"math"
	"strconv"
	"strings"

	"gainwright/protocol"
)

// identity answers the bare id, whose answer carries the number 0.
func (r *Rig) identity(n uint16) {
	a := answer{n: n}
	r.identityLines(&a)
	r.sendAll(a.lines)
}

func f32(v float64) string { return hex32(math.Float32bits(float32(v))) }

func (r *Rig) identityLines(a *answer) {
	c, b := &r.cfg, &r.cfg.Board
	sc := r.board.tel.scales
	itoa := strconv.Itoa
	bus := "nominal "
	if c.Sensors.Bus {
		bus = "measured "
	}
	lines := []string{
		"proto 1.0",
		"fw " + b.Firmware,
		"board " + b.ID,
		"boot " + itoa(int(r.boots)) + " " + r.board.rx.bootCause,
		"baud " + itoa(b.Baud),
		"loop " + itoa(b.LoopUS),
		"delay " + itoa(b.DelayUS),
		"win " + itoa(b.Window),
		"law " + b.Law,
		"form " + b.Form,
		"deriv " + b.Deriv,
		"disc " + b.Disc,
		"windup " + b.Windup,
		"num " + b.Number,
		"gains " + strings.Join(r.board.gains.names, " "),
		"limits " + strings.Join(limitNames, " "),
		"input V",
		"bus " + bus + f32(r.nominal()),
		"quad " + itoa(c.Driver.Quadrants),
		"off " + c.Driver.Off,
		"enc " + f32(float64(c.Encoder.PerTurn)) + " " + c.Encoder.Side + " " + f32(c.Load.Gear),
		"scale " + f32(sc.SpeedLSB) + " " + f32(sc.VoltsLSB) + " " + f32(sc.CurrentLSB) + " " + f32(sc.BusLSB),
		"max " + f32(b.VoltsMax) + " " + f32(b.SpeedMax) + " " + f32(b.AmpsMax),
		"beat " + itoa(b.BeatMin) + " " + itoa(b.BeatMax),
	}
	if b.Number == "int" {
		one := " " + f32(math.Ldexp(1, -b.Shift))
		lines = append(lines, "glsb"+strings.Repeat(one, len(r.board.gains.names)))
	}
	var can []string
	if b.Capture > 0 {
		can = append(can, "capture")
	}
	if b.Ramp {
		can = append(can, "ramp")
	}
	if b.Exper {
		can = append(can, "exper")
	}
	if len(can) > 0 {
		lines = append(lines, "can "+strings.Join(can, " "))
	}
	if b.Capture > 0 {
		lines = append(lines, "cap "+itoa(b.Capture))
	}
	if len(b.Inputs) > 0 {
		lines = append(lines, "inputs "+strings.Join(b.Inputs, " "))
	}
	for _, l := range lines {
		a.line("id " + l)
	}
	a.ok(itoa(len(lines)))
}

// scales chooses the steps of the wire: the speed's divides one count over the
// window, so that a board's speed travels without rounding where 16 bits allow.
func (r *Rig) scales() protocol.Scales {
	c := &r.cfg
	whole := 32767.0
	quantum := r.speedQuantum()
	lsb := 1.25 * c.Board.SpeedMax / whole
	if n := math.Floor(quantum / lsb); n >= 1 {
		lsb = quantum / n
	}
	s := protocol.Scales{SpeedLSB: lsb, VoltsLSB: step125(1.25 * c.Board.VoltsMax / whole)}
	if c.Sensors.Current {
		s.CurrentLSB = step125(2 * c.Supply.Volts / c.Motor.Ohms / whole)
	}
	if c.Sensors.Bus {
		s.BusLSB = step125(2 * c.Nameplate.BusMax / whole)
	}
	for _, x := range []*float64{&s.SpeedLSB, &s.VoltsLSB, &s.CurrentLSB, &s.BusLSB} {
		*x = float64(float32(*x)) // as it travels in the identity
	}
	return s
}

// speedQuantum is one count over the speed window, in rad/s.
func (r *Rig) speedQuantum() float64 {
	return 1 / r.enc.perRad / (float64(r.cfg.Board.Window) * float64(r.loop) * 1e-9)
}

// step125 is the smallest of 1, 2, 5 times a power of ten that is not below x,
// and not below a thousandth.
func step125(x float64) float64 {
	for d := 0.001; ; d *= 10 {
		for _, k := range []float64{1, 2, 5} {
			if k*d >= x {
				return k * d
			}
		}
	}
}
