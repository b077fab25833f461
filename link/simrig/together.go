package simrig

import (
	"fmt"
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
	for i, f := range c.Faults {
		_, known := faultKinds[f.Kind]
		check(known, fmt.Sprintf("fault[%d].kind", i), "%q is not a fault; known are %s", f.Kind, strings.Join(FaultKinds(), ", "))
	}
}
