package bench

import (
	"fmt"
	"math"

	"gainwright/link/simrig"
	"gainwright/safety/rig"
)

// RigOf makes a rig file from the nameplate that a simulated rig carries: what a
// person would type off its labels.
func RigOf(c simrig.Config) (rig.Rig, []byte, error) {
	n := c.Nameplate
	volts := n.VoltsMax
	if volts == 0 {
		volts = n.VoltsRated
	}
	r := rig.Rig{Name: c.Name}
	r.Motor = rig.Motor{VoltageRated: n.VoltsRated, SpeedMax: n.SpeedMax * 60 / (2 * math.Pi), CurrentMax: n.AmpsMax}
	r.Drive = rig.Drive{Kind: "volts", Quadrants: int64(c.Driver.Quadrants), BusNominal: c.Supply.Volts, BusMax: n.BusMax, BusMin: n.BusMin,
		SupplySinks: c.Supply.Sinks, BusCapacitance: c.Supply.Farads * 1e6}
	r.Encoder = rig.Encoder{CountsPerTurn: float64(c.Encoder.PerTurn), Side: c.Encoder.Side, GearRatio: c.Load.Gear}
	r.Limits.Volts = volts
	r.Limits.Acceleration, r.Limits.Turns = n.AccelMax, n.TurnsMax
	r.Load.State = "coupled"
	text := nameplateText(r)
	parsed, err := rig.Parse(c.Name+" (nameplate)", text)
	if err != nil {
		return rig.Rig{}, nil, fmt.Errorf("the nameplate of %s makes no rig file: %w", c.Name, err)
	}
	return parsed, text, nil
}

// nameplateText writes the keys that a nameplate gives; every other key has the
// rig file's default.
func nameplateText(r rig.Rig) []byte {
	b := fmt.Appendf(nil, "name = %q\n\n[motor]\nvoltage_rated_V = %g\nspeed_max_rpm = %.9g\ncurrent_max_A = %g\n", r.Name, r.Motor.VoltageRated, r.Motor.SpeedMax, r.Motor.CurrentMax)
	b = fmt.Appendf(b, "\n[drive]\nkind = %q\nquadrants = %d\nbus_nominal_V = %g\nbus_max_V = %g\nbus_min_V = %g\nsupply_can_sink = %v\nbus_capacitance_uF = %g\n",
		r.Drive.Kind, r.Drive.Quadrants, r.Drive.BusNominal, r.Drive.BusMax, r.Drive.BusMin, r.Drive.SupplySinks, r.Drive.BusCapacitance)
	b = fmt.Appendf(b, "\n[encoder]\ncounts_per_turn = %g\nside = %q\ngear_ratio = %g\n", r.Encoder.CountsPerTurn, r.Encoder.Side, r.Encoder.GearRatio)
	b = fmt.Appendf(b, "\n[limits]\nvolts_V = %g\n", r.Limits.Volts)
	if r.Limits.Acceleration > 0 {
		b = fmt.Appendf(b, "acceleration_rad_s2 = %g\n", r.Limits.Acceleration)
	}
	if r.Limits.Turns > 0 {
		b = fmt.Appendf(b, "turns = %g\n", r.Limits.Turns)
	}
	return fmt.Appendf(b, "\n[load]\nstate = %q\n", r.Load.State)
}
