package simrig

import (
	"fmt"
	"math"
	"strings"
)

// together checks what no single key can show and fills in the defaults that
// depend on other keys.
func (r *reader) together(c *Config) {
	if c.Friction.Reverse == nil {
		f := c.Friction.Forward
		c.Friction.Reverse = &f
	}
	if c.Nameplate.VoltsMax == 0 {
		c.Nameplate.VoltsMax = c.Nameplate.VoltsRated
	}
	b := &c.Board
	if b.VoltsMax == 0 {
		b.VoltsMax = c.Supply.Volts
	}
	if b.SpeedMax == 0 {
		b.SpeedMax = 1.5 * c.Nameplate.SpeedMax
	}
	if c.Supply.Fold == 0 {
		c.Supply.Fold = c.Supply.Limit
	}
	check := func(ok bool, key, format string, args ...any) {
		if !ok {
			r.fail(key, ErrRange, fmt.Sprintf(format, args...))
		}
	}
	f, v := &c.Friction.Forward, c.Friction.Reverse
	check(f.Static >= f.Coulomb, "friction.forward.static_Nm", "%g is below the Coulomb friction %g", f.Static, f.Coulomb)
	check(v.Static >= v.Coulomb, "friction.reverse.static_Nm", "%g is below the Coulomb friction %g", v.Static, v.Coulomb)
	check(c.Driver.Quadrants != 3, "driver.quadrants", "3 is none of 1, 2, 4")
	check(b.DelayUS <= b.LoopUS, "board.compute_delay_us", "%d µs is over the loop period of %d µs", b.DelayUS, b.LoopUS)
	check(b.BeatMin < b.BeatMax, "board.timeout_max_ms", "%d ms is not over the shortest, %d ms", b.BeatMax, b.BeatMin)
	check(c.Supply.Fold <= c.Supply.Limit, "supply.fold_back_A", "%g is over the limit %g", c.Supply.Fold, c.Supply.Limit)
	check(c.Nameplate.BusMax > c.Supply.Volts, "nameplate.bus_max_V", "%g is not over the supply's %g V", c.Nameplate.BusMax, c.Supply.Volts)
	check(b.ID != "" && !strings.Contains(b.ID, " "), "board.id", "%q is not one word", b.ID)
	check(len(b.Inputs) <= 16, "board.inputs", "%d names for 16 bits", len(b.Inputs))
	check(b.Disc != "incremental" || b.Windup != "back-calculation", "board.anti_windup", "an incremental law has no integral to work back")
	l := &c.Load
	check(l.Coupling > 0 || l.LostMotion == 0, "load.lost_motion_rad", "a rigid coupling has none; give coupling_Nm_rad")
	check(l.Coupling > 0 || l.Rub == 0, "load.friction_Nm", "a rigid load has its friction in [friction]; give coupling_Nm_rad")
	check(l.Coupling == 0 || l.Inertia > 0, "load.inertia_kg_m2", "a coupling needs something behind it")
	check(l.Coupling == 0 || resonance(c) < 2500, "load.coupling_Nm_rad", "resonance at %.0f rad/s; the steps follow up to 2500", resonance(c))
	check(l.Coupling == 0 || c.Driver.Quadrants != 1, "driver.quadrants", "one quadrant is not simulated with an elastic coupling")
	for i, f := range c.Faults {
		_, known := faultKinds[f.Kind]
		check(known, fmt.Sprintf("fault[%d].kind", i), "%q is not a fault; known are %s", f.Kind, strings.Join(FaultKinds(), ", "))
	}
}

// resonance is the natural frequency of rotor against load in rad/s, 0 for a
// rigid coupling.
func resonance(c *Config) float64 {
	g := c.Load.Gear * c.Load.Gear
	if c.Load.Coupling == 0 || c.Load.Inertia == 0 {
		return 0
	}
	return math.Sqrt(c.Load.Coupling / g * (1/c.Motor.Inertia + g/c.Load.Inertia))
}
