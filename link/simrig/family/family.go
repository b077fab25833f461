// Package family draws whole families of simulated rigs from ranges: motors from
// coreless to geared flywheel, encoders, loop periods, delays, noise, dead band,
// friction that differs by direction, sag, and a share of faulty ones. It writes
// BOARD.toml texts and knows nothing of what becomes of them. The same seed gives
// the same bytes.
//
// The ranges are those of bench motors of 12 to 48 V and 5 to 300 W: winding 0.1
// to 20 Ω, mechanical time constant 3 to 30 ms bare and up to a second loaded,
// electrical 0.1 to 2 ms, breakaway 2 to 8 % of rated volts bare and 5 to 20 %
// geared, static over Coulomb friction 1.1 to 2, encoders of 48 counts read every
// 10 ms to 10 000 read every millisecond (common practice, no source).
package family

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
)

// FaultShare is the share of rigs with a fault (our choice).
const FaultShare = 0.2

// Rig is one drawn rig.
type Rig struct {
	Name  string
	Fault string // the word of its fault; "" where it has none
	Text  []byte // BOARD.toml
}

// Make draws n rigs. Each depends on seed and its own number only.
func Make(n int, seed uint64) []Rig {
	out := make([]Rig, n)
	for i := range out {
		d := &draw{Rand: rand.New(rand.NewPCG(seed, uint64(i)))}
		out[i] = d.rig(i)
	}
	return out
}

type draw struct {
	*rand.Rand
	b strings.Builder
}

func (d *draw) between(lo, hi float64) float64 { return lo + (hi-lo)*d.Float64() }

// ratio draws evenly on a logarithmic scale.
func (d *draw) ratio(lo, hi float64) float64 { return lo * math.Pow(hi/lo, d.Float64()) }

func (d *draw) chance(p float64) bool { return d.Float64() < p }

func pick[T any](d *draw, of ...T) T { return of[d.IntN(len(of))] }

func (d *draw) line(format string, args ...any) { fmt.Fprintf(&d.b, format+"\n", args...) }

// motor is what is drawn first, and what the rest is sized by.
type motor struct {
	kind             string
	volts            float64
	ohms, k, j       float64 // of the rotor alone
	tau, tauE        float64 // s, with all inertia
	load, gear       float64 // inertia at the output, ratio
	top, stall, amps float64 // rad/s, A, A
	idle             float64 // A that friction draws
}

func (d *draw) motor() motor {
	m := motor{volts: pick(d, 12.0, 24.0, 24.0, 36.0, 48.0), gear: 1}
	watts := d.ratio(5, 300)
	m.ohms = math.Min(20, math.Max(0.1, m.volts*m.volts/(8*watts)*d.between(0.6, 1.6)))
	m.k = m.volts / (d.ratio(3000, 9000) * math.Pi / 30)
	bare := d.ratio(0.008, 0.03)
	m.kind = pick(d, "bare", "bare", "coreless", "disc", "disc", "disc", "flywheel", "geared", "geared", "slow-winding")
	m.tau = bare
	switch m.kind {
	case "coreless":
		m.tau = d.ratio(0.004, 0.01)
	case "disc":
		m.tau = bare * d.ratio(1.5, 8)
	case "flywheel":
		m.tau = d.ratio(0.2, 0.8)
	case "geared":
		m.gear, m.tau = pick(d, 5.0, 10.0, 20.0, 50.0), bare*d.ratio(1.1, 4)
	case "slow-winding":
		m.tau = d.ratio(0.03, 0.08)
	}
	m.tauE = math.Min(d.ratio(0.0001, 0.002), m.tau/6)
	if m.kind == "slow-winding" {
		m.tauE = m.tau / d.ratio(4, 10)
	}
	total := m.tau * m.k * m.k / m.ohms
	m.j = math.Min(bare, m.tau) * m.k * m.k / m.ohms
	if m.kind == "slow-winding" {
		m.j = total
	}
	m.load = math.Max(0, total-m.j) * m.gear * m.gear
	m.top, m.stall = m.volts/m.k, m.volts/m.ohms
	m.amps = math.Min(99, m.stall*d.between(0.45, 0.95))
	return m
}

func (d *draw) rig(i int) Rig {
	m := d.motor()
	r := Rig{Name: fmt.Sprintf("r%04d-%s", i, m.kind)}
	if d.chance(FaultShare) {
		r.Fault = pick(d, faults...)
	}
	d.line("# Drawn from a family: a %s motor of %g V.", m.kind, m.volts)
	d.line("name = %q", r.Name)
	if r.Fault != "" {
		d.line("expect = \"refused\"\ncause = %q", r.Fault)
	}
	d.line("seed = %d", 1+d.IntN(1_000_000))
	d.line("\n[nameplate]\nvoltage_rated_V = %g\nspeed_max_rad_s = %.4g\ncurrent_max_A = %.4g\nbus_max_V = %.4g\nbus_min_V = %.4g", m.volts, m.top*d.between(0.85, 1), m.amps, math.Min(57, 1.25*m.volts), 0.75*m.volts)
	d.line("\n[motor]\nresistance_ohm = %.4g\ninductance_H = %.4g\ntorque_constant_Nm_A = %.4g\ninertia_kg_m2 = %.4g", m.ohms, m.tauE*m.ohms, m.k, m.j)
	if d.chance(0.5) {
		d.line("ambient_degC = %.3g\nthermal_resistance_K_W = %.3g\nthermal_time_constant_s = %.3g", d.between(5, 35), math.Min(20, 60*4*m.ohms/(m.volts*m.volts)), d.between(30, 120))
	}
	d.friction(&m)
	d.rest(m, r.Fault)
	r.Text = []byte(d.b.String())
	return r
}

// friction draws breakaway as a share of the rated volts.
func (d *draw) friction(m *motor) {
	share := d.ratio(0.02, 0.08)
	if m.gear > 1 {
		share = d.ratio(0.05, 0.15)
	}
	if m.load > 0 {
		d.line("\n[load]\ninertia_kg_m2 = %.4g", m.load)
		if m.gear > 1 {
			d.line("gear_ratio = %g", m.gear)
		}
	} else if m.gear > 1 {
		d.line("\n[load]\ngear_ratio = %g", m.gear)
	}
	static, over, viscous, stribeck := share*m.stall*m.k, d.between(1.1, 1.8), d.ratio(0.002, 0.04)*m.k*m.k/m.ohms, d.ratio(0.004, 0.012)*m.top
	m.idle = share / over * m.stall
	side := func(name string, f float64) {
		d.line("\n[friction.%s]\ncoulomb_Nm = %.4g\nstatic_Nm = %.4g\nviscous_Nms = %.4g\nstribeck_rad_s = %.3g", name, f*static/over, f*static, viscous, stribeck)
	}
	side("forward", 1)
	switch {
	case d.chance(0.1):
		side("reverse", d.between(0.6, 1.6))
	case d.chance(0.6):
		side("reverse", d.between(0.88, 1.14))
	}
}

// counter is an encoder with the loop that reads it.
type counter struct{ counts, loopUS, window int }

// counters are from a cheap magnet to fine optics.
var counters = []counter{{48, 10000, 1}, {64, 10000, 1}, {256, 5000, 1}, {400, 5000, 2}, {1000, 2000, 2}, {2000, 1000, 4}, {2000, 1000, 5}, {4000, 1000, 2}, {10000, 1000, 1}, {4000, 500, 4}}

// rest draws what measures, drives and feeds the motor.
func (d *draw) rest(m motor, fault string) {
	c := pick(d, counters...)
	// A loop needs some periods within a time constant, or nobody would run it.
	for float64(c.loopUS)*1e-6*float64(4+c.window) > m.tau {
		c = counters[4+d.IntN(len(counters)-4)]
		if c.window > 1 && float64(c.loopUS)*1e-6*float64(4+c.window) > m.tau {
			c = counter{4000, 500, 1}
			break
		}
	}
	loop := float64(c.loopUS) * 1e-6
	d.line("\n[driver]\ndead_band_V = %.3g\ndead_time_s = %.3g\nduty_step = %g", d.between(0, 0.015)*m.volts, d.ratio(0.1, 1.2)*math.Min(loop, 0.15*m.tau), pick(d, 0, 0.001, 0.0005))
	sinks := d.chance(0.5)
	d.line("\n[supply]\nvoltage_V = %g\nresistance_ohm = %.3g\ncurrent_limit_A = %.4g\ncan_sink = %v\ncapacitance_F = %.3g", m.volts, d.between(0.01, 0.04)*m.ohms, 1.3*m.amps, sinks, d.ratio(0.5, 4)*1e-3*math.Max(1, m.amps/5))
	d.line("\n[encoder]\ncounts_per_turn = %d\nedge_noise_counts = %.2g", c.counts, d.between(0, 0.1))
	d.line("\n[sensors]")
	if d.chance(0.7) {
		d.line("current = true\ncurrent_noise_A = %.3g\ncurrent_step_A = %.3g", 0.004*m.stall, 0.001*m.stall)
	}
	// A fold-back that no sensor can see is not a fault to be named.
	if d.chance(0.7) || fault == "supply-folds" {
		d.line("bus = true\nbus_noise_V = %.2g\nbus_step_V = %.2g", 0.001*m.volts, 0.001*m.volts)
	}
	d.board(c)
	d.gains(m, fault)
}

func (d *draw) board(c counter) {
	d.line("\n[board]\nid = \"F-%06X\"\nbaud = %d\nloop_us = %d\nwindow_loops = %d\ncompute_delay_us = %d\ncapture_samples = %d", d.IntN(1<<24), pick(d, 115200, 115200, 230400, 460800, 921600), c.loopUS, c.window,
		int(d.between(0, 0.5)*float64(c.loopUS)), pick(d, 0, 600, 2000, 2000))
	windup, law := pick(d, "clamp", "clamp", "back-calculation"), pick(d, "backward-euler", "backward-euler", "tustin", "forward-euler", "incremental")
	if law == "incremental" { // has no integral to work back
		windup = "clamp"
	}
	d.line("anti_windup = %q\ndiscretisation = %q", windup, law)
}

// gains draws the form of the gains, gains as found that are somewhere between
// slow and lively, and the fault.
func (d *draw) gains(m motor, fault string) {
	form := pick(d, "parallel", "parallel", "ideal", "series")
	law := pick(d, "pi", "pi", "pi", "pid")
	d.line("form = %q\nlaw = %q", form, law)
	kp, ti := d.ratio(0.05, 1)*m.k, d.ratio(0.5, 4)*m.tau
	if form == "parallel" {
		d.line("\n[gains]\nkp = %.4g\nki = %.4g", kp, kp/ti)
	} else {
		d.line("\n[gains]\nkc = %.4g\nti = %.4g", kp, ti)
	}
	if fault == "" {
		return
	}
	d.line("\n[[fault]]\nkind = %q", fault)
	switch fault {
	case "encoder-slips":
		d.line("value = %.3g", d.between(0.15, 0.5))
	case "resets-itself":
		d.line("value = %.3g", d.between(3, 20))
	case "supply-folds":
		// Less than half of what friction alone draws at half drive.
		d.line("value = %.3g", 0.02+d.between(0.2, 0.45)*m.idle/2)
	case "mute", "deaf", "restarts":
		d.line("at_s = %.3g", d.between(2, 60))
	}
}

// faults are what may be wrong with a rig.
var faults = []string{"encoder-reversed", "encoder-dead", "encoder-slips", "stalled", "supply-folds", "no-timeout", "ignores-cut", "stored-gains-differ",
	"lies-about-limits", "resets-itself", "wrong-crc", "arms-on-old-number", "stale-sequence", "mute", "deaf", "restarts"}
