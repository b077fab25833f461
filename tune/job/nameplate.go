package job

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"gainwright/safety/rig"
)

// NameplateText writes the rig file that a nameplate gives. Keys that a nameplate
// does not give are left out: they have the rig file's defaults.
func NameplateText(r rig.Rig) []byte {
	b := fmt.Appendf(nil, "name = %q\n\n[motor]\nvoltage_rated_V = %g\nspeed_max_rpm = %.9g\ncurrent_max_A = %g\n", r.Name, r.Motor.VoltageRated, r.Motor.SpeedMax, r.Motor.CurrentMax)
	b = fmt.Appendf(b, "\n[drive]\nkind = %q\nquadrants = %d\nbus_nominal_V = %g\n", r.Drive.Kind, r.Drive.Quadrants, r.Drive.BusNominal)
	for _, k := range []struct {
		key   string
		value float64
	}{{"bus_max_V", r.Drive.BusMax}, {"bus_min_V", r.Drive.BusMin}, {"bus_capacitance_uF", r.Drive.BusCapacitance}} {
		if k.value > 0 || k.key == "bus_min_V" && r.Drive.BusMax > 0 {
			b = fmt.Appendf(b, "%s = %g\n", k.key, k.value)
		}
	}
	b = fmt.Appendf(b, "supply_can_sink = %v\n", r.Drive.SupplySinks)
	b = fmt.Appendf(b, "\n[encoder]\ncounts_per_turn = %g\nside = %q\ngear_ratio = %g\n", r.Encoder.CountsPerTurn, r.Encoder.Side, r.Encoder.GearRatio)
	if r.Limits.Volts > 0 || r.Limits.Acceleration > 0 || r.Limits.Turns > 0 {
		b = append(b, "\n[limits]\n"...)
	}
	for _, k := range []struct {
		key   string
		value float64
	}{{"volts_V", r.Limits.Volts}, {"acceleration_rad_s2", r.Limits.Acceleration}, {"turns", r.Limits.Turns}} {
		if k.value > 0 {
			b = fmt.Appendf(b, "%s = %g\n", k.key, k.value)
		}
	}
	b = fmt.Appendf(b, "\n[load]\nstate = %q\n", r.Load.State)
	if r.Load.Gravity {
		b = append(b, "gravity = true\n"...)
	}
	return b
}

// askNameplate has the person type what stands on the labels, where no rig file
// was given. What the board says of itself is offered as the answer.
func (j *Job) askNameplate() error {
	r := rig.Rig{Drive: rig.Drive{Kind: "volts"}}
	name, err := j.h.Ask(Question{Kind: AskText, Text: "Name of the rig, as it is spoken of", Default: "rig-" + j.ID.Board,
		Detail: []string{"No rig file was given: the next answers make one. It is kept in the record."}})
	if err != nil {
		return err
	}
	if r.Name = strings.TrimSpace(name.Text); r.Name == "" {
		r.Name = "rig-" + j.ID.Board
	}
	quad, gear := float64(max(j.ID.Quadrants, 1)), math.Max(j.ID.GearRatio, 1)
	gravity := 0.0
	for _, q := range []struct {
		to              *float64
		text, unit      string
		offer, min, max float64
	}{
		{&r.Motor.VoltageRated, "Rated voltage on the motor's label", "V", j.ID.BusNominal, 0.5, 400},
		{&r.Motor.SpeedMax, "Highest speed that motor and load may have together", "rpm", 0, 1, 200000},
		{&r.Motor.CurrentMax, "Highest current, for a short time", "A", j.ID.AmpsMax, 0.001, 10000},
		{&r.Drive.BusNominal, "Supply voltage", "V", j.ID.BusNominal, 0.5, 400},
		{&quad, "Quadrants of the drive: 1 one way, 2 one way and brakes, 4 both ways", "1", quad, 1, 4},
		{&r.Encoder.CountsPerTurn, "Counts per turn of the encoder's own shaft, all edges", "1", j.ID.CountsPerTurn, 1, 1e7},
		{&gear, "Gear ratio, motor turns per output turn", "1", gear, 0.001, 100000},
		{&gravity, "Does gravity pull on the load? 0 no, 1 yes", "1", 0, 0, 1},
	} {
		if *q.to, err = j.askNumber(q.text, q.unit, q.offer, q.min, q.max); err != nil {
			return err
		}
	}
	r.Drive.Quadrants, r.Encoder.GearRatio = int64(quad), gear
	if r.Encoder.Side = j.ID.EncoderSide; r.Encoder.Side == "" {
		r.Encoder.Side = "motor"
	}
	r.Load.State, r.Load.Gravity = "coupled", gravity != 0
	text := NameplateText(r)
	parsed, err := rig.Parse("the answers", text)
	if err != nil {
		return refuse(719, "nameplate", err.Error(), "give other answers, or a rig file with --rig")
	}
	j.Rig, j.RigText = parsed, text
	return nil
}

// askNumber asks until the answer is a number in its range.
func (j *Job) askNumber(text, unit string, offer, min, max float64) (float64, error) {
	q := Question{Kind: AskNumber, Text: text, Unit: unit}
	if offer >= min && offer <= max {
		q.Default = strconv.FormatFloat(offer, 'g', 6, 64)
	}
	for {
		a, err := j.h.Ask(q)
		if err != nil {
			return 0, err
		}
		s := strings.ReplaceAll(strings.TrimSpace(a.Text), ",", ".")
		if s == "" {
			s = q.Default
		}
		v, err := strconv.ParseFloat(s, 64)
		if err == nil && v >= min && v <= max {
			return v, nil
		}
		q.Detail = []string{fmt.Sprintf("%q is not a number from %g to %g %s", s, min, max, unit)}
	}
}
