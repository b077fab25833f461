package rig

import (
	"math"
	"time"

	"gainwright/protocol/si"
	"gainwright/safety"
)

// Rig is one rig file with every default filled in. Units stand in the keys.
type Rig struct {
	Name       string   `toml:"name"`
	Board      string   `toml:"board"`
	Checklist  []string `toml:"checklist"`
	Acceptance []string `toml:"acceptance"`

	Motor      Motor       `toml:"motor"`
	Drive      Drive       `toml:"drive"`
	Encoder    Encoder     `toml:"encoder"`
	Limits     Limits      `toml:"limits"`
	Timing     Timing      `toml:"timing"`
	Load       Load        `toml:"load"`
	Targets    Targets     `toml:"targets"`
	Stop       Stop        `toml:"stop"`
	Checks     Checks      `toml:"checks"`
	Interlocks []Interlock `toml:"interlock"`

	// Hash is the SHA-256 of the file's bytes, in hex.
	Hash string `toml:"-"`
}

// Motor is the nameplate.
type Motor struct {
	VoltageRated      float64 `toml:"voltage_rated_V"`
	SpeedMax          float64 `toml:"speed_max_rpm"`
	CurrentMax        float64 `toml:"current_max_A"`
	CurrentContinuous float64 `toml:"current_continuous_A"`
	HeatTau           float64 `toml:"heat_time_constant_s"`
	Resistance        float64 `toml:"resistance_ohm"`
	Ke                float64 `toml:"ke_V_s_per_rad"`
	Inertia           float64 `toml:"inertia_kg_m2"`
	Serial            string  `toml:"serial"`
}

// Drive is the driver and its supply.
type Drive struct {
	Kind           string  `toml:"kind"`
	Quadrants      int64   `toml:"quadrants"`
	BusNominal     float64 `toml:"bus_nominal_V"`
	BusMax         float64 `toml:"bus_max_V"`
	BusMin         float64 `toml:"bus_min_V"`
	SupplySinks    bool    `toml:"supply_can_sink"`
	BusCapacitance float64 `toml:"bus_capacitance_uF"`
}

// Encoder says how counts and turns belong together.
type Encoder struct {
	CountsPerTurn float64 `toml:"counts_per_turn"`
	Side          string  `toml:"side"`
	GearRatio     float64 `toml:"gear_ratio"`
}

// Limits are the edges of the envelope.
type Limits struct {
	Volts        float64 `toml:"volts_V"`
	Speed        float64 `toml:"speed_rpm"`
	Current      float64 `toml:"current_A"`
	Acceleration float64 `toml:"acceleration_rad_s2"`
	Slew         float64 `toml:"slew_V_per_s"`
	Turns        float64 `toml:"turns"`
	Temperature  float64 `toml:"temperature_degC"`
	StallVolts   float64 `toml:"stall_volts_V"`
	StallTime    float64 `toml:"stall_time_s"`
	WrongWayTime float64 `toml:"wrong_way_time_s"`
	RunTime      float64 `toml:"run_time_s"`
	RestSpeed    float64 `toml:"rest_speed_rpm"`
	CreepSpeed   float64 `toml:"creep_speed_rpm"`
	SignVolts    float64 `toml:"sign_volts_V"`
	SignTurns    float64 `toml:"sign_turns"`
	LockedTime   float64 `toml:"locked_time_s"`
	InchTurns    float64 `toml:"inch_turns"`
	InchTime     float64 `toml:"inch_time_s"`
	Loosened     string  `toml:"loosened_reason"`
}

// Timing is how long things may take.
type Timing struct {
	Heartbeat    float64 `toml:"heartbeat_ms"`
	BoardTimeout float64 `toml:"board_timeout_ms"`
	TelemetryAge float64 `toml:"telemetry_age_ms"`
	Lease        float64 `toml:"screen_lease_ms"`
	ArmLapse     float64 `toml:"arm_lapse_s"`
	CountDown    float64 `toml:"count_down_s"`
}

// Load is what the motor turns.
type Load struct {
	State        string `toml:"state"`
	Gravity      bool   `toml:"gravity"`
	HoldingBrake bool   `toml:"holding_brake"`
	Note         string `toml:"note"`

	// InertiaLeast and InertiaMost are what the inertia may become in service, as
	// factors on that of today.
	InertiaLeast float64 `toml:"inertia_least"`
	InertiaMost  float64 `toml:"inertia_most"`
}

// Targets are what a verify is judged by.
type Targets struct {
	Overshoot float64 `toml:"overshoot_percent"`
	Settling  float64 `toml:"settling_time_s"`
}

// Stop is what the stop key asks for.
type Stop struct {
	Style string `toml:"style"`
	Off   string `toml:"off"`
}

// Checks are asked for in every session beyond the usual ones.
type Checks struct {
	Limit     bool `toml:"limit"`
	Interlock bool `toml:"interlock"`
}

// Interlock is one input bit of the board.
type Interlock struct {
	Bit  int64  `toml:"bit"`
	Name string `toml:"name"`
	Kind string `toml:"kind"` // KindInput where the file gives none
}

// The kinds of inputs. An enabling switch has one contact that is closed in its
// middle position and may have another that opens when it is pressed through.
const (
	KindInput    = "interlock"
	KindEnabling = "enabling"
	KindThrough  = "enabling-through"
)

// CountsPerMotorTurn is how many counts one turn of the motor shaft gives.
func (r Rig) CountsPerMotorTurn() float64 {
	if r.Encoder.Side == "load" {
		return r.Encoder.CountsPerTurn / r.Encoder.GearRatio
	}
	return r.Encoder.CountsPerTurn
}

// Energy is ½Jω² at the speed limit, in J; 0 where the inertia is not known.
func (r Rig) Energy() float64 {
	w := float64(si.FromRPM(r.Limits.Speed))
	return r.Motor.Inertia * w * w / 2
}

// Envelope is the rig as the console limiter takes it. It has no model to look
// ahead with: that comes from a fit.
func (r Rig) Envelope() safety.Envelope {
	l, t := r.Limits, r.Timing
	env := safety.Envelope{
		VoltsMax: si.Volts(l.Volts), SpeedMax: si.FromRPM(l.Speed), CurrentMax: si.Amps(l.Current),
		BusMax: si.Volts(r.Drive.BusMax), BusMin: si.Volts(r.Drive.BusMin), TempMax: si.Celsius(l.Temperature),
		AccelMax: l.Acceleration, SlewMax: l.Slew, TurnsMax: l.Turns,
		CurrentContinuous: si.Amps(r.Motor.CurrentContinuous), HeatTau: seconds(r.Motor.HeatTau),
		StallVolts: si.Volts(l.StallVolts), StallTime: seconds(l.StallTime), WrongWayTime: seconds(l.WrongWayTime),
		RestSpeed: si.FromRPM(l.RestSpeed), CreepMax: si.FromRPM(l.CreepSpeed),
		SignVolts: si.Volts(l.SignVolts), SignTurns: l.SignTurns, LockedMax: seconds(l.LockedTime),
		InchTurns: l.InchTurns, InchTime: seconds(l.InchTime),
		RunTimeMax: seconds(l.RunTime), TelemetryAgeMax: seconds(t.TelemetryAge / 1000), LeaseMax: seconds(t.Lease / 1000),
		ArmLapse: seconds(t.ArmLapse), CountDown: seconds(t.CountDown),
		Heartbeat: seconds(t.Heartbeat / 1000), BoardTimeout: seconds(t.BoardTimeout / 1000),
		Resistance: r.Motor.Resistance, Ke: r.Motor.Ke, RadPerCount: 2 * math.Pi / r.CountsPerMotorTurn(),
		Reverse: r.Drive.Quadrants == 4, Brake: r.Drive.Quadrants >= 2, VoltageDrive: r.Drive.Kind == "volts",
		GravityLoad: r.Load.Gravity, BrakeListed: r.Load.HoldingBrake,
		Hash: r.Hash, Loosened: l.Loosened,
	}
	if r.Stop.Style == "ramp-and-cut" {
		env.Stop = safety.StopRamp
	}
	if r.Checks.Limit {
		env.ChecksAsked = env.ChecksAsked.With(safety.CheckLimit)
	}
	if len(r.Interlocks) > 0 {
		env.ChecksAsked = env.ChecksAsked.With(safety.CheckInterlock)
	}
	if len(r.Checklist) > 0 {
		env.ChecksAsked = env.ChecksAsked.With(safety.CheckTicked)
	}
	for _, in := range r.Interlocks {
		switch in.Kind {
		case KindEnabling:
			env.Enabling.Listed, env.Enabling.Name, env.Enabling.Bit = true, in.Name, uint8(in.Bit)
		case KindThrough:
			env.Enabling.Two, env.Enabling.ThroughBit = true, uint8(in.Bit)
		default:
			env.Inputs = append(env.Inputs, safety.Input{Bit: uint8(in.Bit), Name: in.Name})
		}
	}
	return env
}

func seconds(s float64) time.Duration { return time.Duration(math.Round(s * 1e9)) }
