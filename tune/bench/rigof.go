package bench

import (
	"fmt"
	"math"

	"gainwright/link/simrig"
	"gainwright/safety/rig"
	"gainwright/tune/job"
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
	r.Load.State, r.Load.Gravity = "coupled", c.Load.Gravity > 0
	text := job.NameplateText(r)
	parsed, err := rig.Parse(c.Name+" (nameplate)", text)
	if err != nil {
		return rig.Rig{}, nil, fmt.Errorf("the nameplate of %s makes no rig file: %w", c.Name, err)
	}
	return parsed, text, nil
}
