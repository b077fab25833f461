package rig

import "math"

// key is one row of the rig file: everything that README, checks, defaults and
// Marshal know about it.
type key struct {
	path    string // dotted
	unit    string
	min     float64 // of numbers, inclusive
	max     float64
	oneOf   []string // of words
	must    bool     // no default
	def     string   // the default, in words
	derive  func(r *Rig) float64
	word    string // default of words
	yes     bool   // default of yes/no
	meaning string
	at      func(r *Rig) any // *float64, *int64, *string, *bool
	// loose: a value above the default is a limit loosened and needs a reason.
	loose bool
}

const big = 1e9

func fixed(v float64) func(*Rig) float64 { return func(*Rig) float64 { return v } }

// keys stand in the order of README and Marshal; a default may use keys above it.
var keys = []key{
	{path: "name", must: true, meaning: "name of the rig, as it is spoken of", at: func(r *Rig) any { return &r.Name }},
	{path: "board", def: "any board", meaning: "unique id of its board; another board is refused", at: func(r *Rig) any { return &r.Board }},

	{path: "motor.voltage_rated_V", unit: "V", min: 0.5, max: 400, must: true, meaning: "rated voltage of the nameplate", at: func(r *Rig) any { return &r.Motor.VoltageRated }},
	{path: "motor.speed_max_rpm", unit: "rpm", min: 1, max: 2e5, must: true, meaning: "highest speed of motor and load together, at the motor shaft", at: func(r *Rig) any { return &r.Motor.SpeedMax }},
	{path: "motor.current_max_A", unit: "A", min: 1e-3, max: 1e4, must: true, meaning: "highest current, for a short time", at: func(r *Rig) any { return &r.Motor.CurrentMax }},
	{path: "motor.current_continuous_A", unit: "A", min: 1e-4, max: 1e4, def: "half of current_max_A", derive: func(r *Rig) float64 { return r.Motor.CurrentMax / 2 }, meaning: "current that may flow for ever; with the time constant it is the heat budget", at: func(r *Rig) any { return &r.Motor.CurrentContinuous }},
	{path: "motor.heat_time_constant_s", unit: "s", min: 0.5, max: 1e4, def: "30", derive: fixed(30), meaning: "time constant of the winding's temperature", at: func(r *Rig) any { return &r.Motor.HeatTau }},
	{path: "motor.resistance_ohm", unit: "Ω", min: 0, max: 1e4, def: "0: not known", derive: fixed(0), meaning: "winding and leads at 25 °C", at: func(r *Rig) any { return &r.Motor.Resistance }},
	{path: "motor.ke_V_s_per_rad", unit: "V·s/rad", min: 0, max: 100, def: "0: not known", derive: fixed(0), meaning: "back-EMF constant", at: func(r *Rig) any { return &r.Motor.Ke }},
	{path: "motor.inertia_kg_m2", unit: "kg·m²", min: 0, max: 1e3, def: "0: not known", derive: fixed(0), meaning: "rotor and load together, at the motor shaft", at: func(r *Rig) any { return &r.Motor.Inertia }},
	{path: "motor.serial", def: "none", meaning: "type and serial number, for the card", at: func(r *Rig) any { return &r.Motor.Serial }},

	{path: "drive.kind", oneOf: []string{"volts", "current"}, must: true, meaning: "what the drive takes; `volts` includes duty. A current-mode drive is read but not driven", at: func(r *Rig) any { return &r.Drive.Kind }},
	{path: "drive.quadrants", min: 1, max: 4, must: true, meaning: "1: one way, no braking; 2: one way, brakes; 4: both ways, brakes (3 is refused)", at: func(r *Rig) any { return &r.Drive.Quadrants }},
	{path: "drive.bus_nominal_V", unit: "V", min: 0.5, max: 400, must: true, meaning: "nominal supply voltage", at: func(r *Rig) any { return &r.Drive.BusNominal }},
	{path: "drive.bus_max_V", unit: "V", min: 0.5, max: 450, def: "1.25 × bus_nominal_V, and not over 57 V where the nominal is under 57 V", derive: busMax, loose: true, meaning: "bus above which the run is cut; the driver's own maximum if that is lower", at: func(r *Rig) any { return &r.Drive.BusMax }},
	{path: "drive.bus_min_V", unit: "V", min: 0, max: 400, def: "0.7 × bus_nominal_V", derive: func(r *Rig) float64 { return 0.7 * r.Drive.BusNominal }, meaning: "bus below which the run is cut; 0: not judged", at: func(r *Rig) any { return &r.Drive.BusMin }},
	{path: "drive.supply_can_sink", def: "false", meaning: "the supply takes energy back when the motor brakes", at: func(r *Rig) any { return &r.Drive.SupplySinks }},
	{path: "drive.bus_capacitance_uF", unit: "µF", min: 0, max: 1e7, def: "0: not known", derive: fixed(0), meaning: "capacitance on the bus; takes the braking energy where the supply does not", at: func(r *Rig) any { return &r.Drive.BusCapacitance }},

	{path: "encoder.counts_per_turn", unit: "counts", min: 1, max: 1e7, must: true, meaning: "counts, all edges, per turn of the shaft it sits on", at: func(r *Rig) any { return &r.Encoder.CountsPerTurn }},
	{path: "encoder.side", oneOf: []string{"motor", "load"}, word: "motor", def: "motor", meaning: "which side of the gear it sits on", at: func(r *Rig) any { return &r.Encoder.Side }},
	{path: "encoder.gear_ratio", unit: "1", min: 1e-3, max: 1e5, def: "1", derive: fixed(1), meaning: "motor turns per load turn", at: func(r *Rig) any { return &r.Encoder.GearRatio }},

	{path: "limits.volts_V", unit: "V", min: 1e-3, max: 400, def: "motor.voltage_rated_V", derive: func(r *Rig) float64 { return r.Motor.VoltageRated }, loose: true, meaning: "largest drive either way", at: func(r *Rig) any { return &r.Limits.Volts }},
	{path: "limits.speed_rpm", unit: "rpm", min: 1e-3, max: 2e5, def: "motor.speed_max_rpm", derive: func(r *Rig) float64 { return r.Motor.SpeedMax }, loose: true, meaning: "speed ceiling either way, at the motor shaft", at: func(r *Rig) any { return &r.Limits.Speed }},
	{path: "limits.current_A", unit: "A", min: 1e-4, max: 1e4, def: "motor.current_max_A", derive: func(r *Rig) float64 { return r.Motor.CurrentMax }, loose: true, meaning: "largest current either way", at: func(r *Rig) any { return &r.Limits.Current }},
	{path: "limits.acceleration_rad_s2", unit: "rad/s²", min: 1e-3, max: big, def: "limits.speed_rpm, in rad/s, within 2 ms", derive: func(r *Rig) float64 { return r.Limits.Speed * math.Pi / 30 / 0.002 }, meaning: "largest acceleration, also of a setpoint", at: func(r *Rig) any { return &r.Limits.Acceleration }},
	{path: "limits.slew_V_per_s", unit: "V/s", min: 1e-3, max: big, def: "limits.volts_V within 5 ms", derive: func(r *Rig) float64 { return r.Limits.Volts / 0.005 }, meaning: "largest rate of change of the drive", at: func(r *Rig) any { return &r.Limits.Slew }},
	{path: "limits.turns", unit: "turns", min: 1e-3, max: big, def: "limits.speed_rpm for 120 s", derive: func(r *Rig) float64 { return math.Min(big, r.Limits.Speed/60*120) }, meaning: "turns of the motor shaft either way from where a run begins; give it where travel is limited", at: func(r *Rig) any { return &r.Limits.Turns }},
	{path: "limits.temperature_degC", unit: "°C", min: 0, max: 250, def: "80", derive: fixed(80), loose: true, meaning: "temperature that the board reports, if it does; 0: not judged", at: func(r *Rig) any { return &r.Limits.Temperature }},
	{path: "limits.stall_volts_V", unit: "V", min: 1e-3, max: 400, def: "0.4 × motor.voltage_rated_V", derive: func(r *Rig) float64 { return 0.4 * r.Motor.VoltageRated }, meaning: "drive above which the shaft is expected to turn; lower it once breakaway is known", at: func(r *Rig) any { return &r.Limits.StallVolts }},
	{path: "limits.stall_time_s", unit: "s", min: 0.02, max: 10, def: "0.4", derive: fixed(0.4), meaning: "how long there may be drive and no counts", at: func(r *Rig) any { return &r.Limits.StallTime }},
	{path: "limits.wrong_way_time_s", unit: "s", min: 0.02, max: 5, def: "0.15", derive: fixed(0.15), meaning: "how long drive and speed may be opposite while the speed does not fall", at: func(r *Rig) any { return &r.Limits.WrongWayTime }},
	{path: "limits.run_time_s", unit: "s", min: 0.1, max: 3600, def: "120", derive: fixed(120), meaning: "longest run", at: func(r *Rig) any { return &r.Limits.RunTime }},
	{path: "limits.rest_speed_rpm", unit: "rpm", min: 1e-4, max: 2e4, def: "0.01 × motor.speed_max_rpm", derive: func(r *Rig) float64 { return 0.01 * r.Motor.SpeedMax }, meaning: "speed at or below which the shaft counts as still", at: func(r *Rig) any { return &r.Limits.RestSpeed }},
	{path: "limits.creep_speed_rpm", unit: "rpm", min: 1e-3, max: 2e5, def: "0.3 × motor.speed_max_rpm", derive: func(r *Rig) float64 { return 0.3 * r.Motor.SpeedMax }, meaning: "ceiling of the checks that run at creep speed", at: func(r *Rig) any { return &r.Limits.CreepSpeed }},
	{path: "limits.sign_volts_V", unit: "V", min: 1e-3, max: 400, def: "0.4 × motor.voltage_rated_V", derive: func(r *Rig) float64 { return 0.4 * r.Motor.VoltageRated }, meaning: "ceiling of the sign ramp", at: func(r *Rig) any { return &r.Limits.SignVolts }},
	{path: "limits.sign_turns", unit: "turns", min: 1e-4, max: 1000, def: "3", derive: fixed(3), meaning: "turns of the motor shaft allowed to the sign ramp", at: func(r *Rig) any { return &r.Limits.SignTurns }},
	{path: "limits.locked_time_s", unit: "s", min: 0, max: 60, def: "2", derive: fixed(2), meaning: "longest run with the shaft held", at: func(r *Rig) any { return &r.Limits.LockedTime }},
	{path: "limits.inch_turns", unit: "turns", min: 1e-4, max: 100, def: "0.1", derive: fixed(0.1), meaning: "turns of the motor shaft under drive in one inch; it may run on by as much again", at: func(r *Rig) any { return &r.Limits.InchTurns }},
	{path: "limits.inch_time_s", unit: "s", min: 0.2, max: 5, def: "1", derive: fixed(1), meaning: "longest drive of one inch", at: func(r *Rig) any { return &r.Limits.InchTime }},
	{path: "limits.loosened_reason", def: "none", meaning: "why a limit is looser than its default; asked for where one is, and kept", at: func(r *Rig) any { return &r.Limits.Loosened }},

	{path: "timing.heartbeat_ms", unit: "ms", min: 10, max: 400, def: "50", derive: fixed(50), meaning: "interval of heartbeats", at: func(r *Rig) any { return &r.Timing.Heartbeat }},
	{path: "timing.board_timeout_ms", unit: "ms", min: 100, max: 1000, def: "250", derive: fixed(250), meaning: "the board cuts when it has heard nothing for so long; at least 2 heartbeats and 20 ms", at: func(r *Rig) any { return &r.Timing.BoardTimeout }},
	{path: "timing.telemetry_age_ms", unit: "ms", min: 30, max: 500, def: "150", derive: fixed(150), meaning: "how old the newest sample may be in motion", at: func(r *Rig) any { return &r.Timing.TelemetryAge }},
	{path: "timing.screen_lease_ms", unit: "ms", min: 500, max: 3000, def: "1000", derive: fixed(1000), meaning: "how old the newest frame on screen may be", at: func(r *Rig) any { return &r.Timing.Lease }},
	{path: "timing.arm_lapse_s", unit: "s", min: 5, max: 60, def: "60", derive: fixed(60), meaning: "an arm that is not used lapses", at: func(r *Rig) any { return &r.Timing.ArmLapse }},
	{path: "timing.count_down_s", unit: "s", min: 3, max: 30, def: "3", derive: fixed(3), meaning: "from start key to motion; any key ends it", at: func(r *Rig) any { return &r.Timing.CountDown }},

	{path: "load.state", oneOf: []string{"bare", "coupled", "loaded"}, must: true, meaning: "bare shaft, coupled and unloaded, or under load", at: func(r *Rig) any { return &r.Load.State }},
	{path: "load.gravity", def: "false", meaning: "gravity can turn the shaft; refused unless a holding brake is listed", at: func(r *Rig) any { return &r.Load.Gravity }},
	{path: "load.holding_brake", def: "false", meaning: "a brake holds the load when power is off", at: func(r *Rig) any { return &r.Load.HoldingBrake }},
	{path: "load.inertia_least", unit: "1", min: 0.05, max: 1, def: "1", derive: fixed(1), meaning: "least inertia in service, as a factor on that of the day of tuning; the worst case of a proposal keeps its bounds down to it", at: func(r *Rig) any { return &r.Load.InertiaLeast }},
	{path: "load.inertia_most", unit: "1", min: 1, max: 20, def: "1", derive: fixed(1), meaning: "most inertia in service, as a factor", at: func(r *Rig) any { return &r.Load.InertiaMost }},
	{path: "load.note", def: "none", meaning: "anything the next person should know", at: func(r *Rig) any { return &r.Load.Note }},

	{path: "targets.overshoot_percent", unit: "%", min: 0, max: 100, def: "10", derive: fixed(10), meaning: "largest overshoot of a step", at: func(r *Rig) any { return &r.Targets.Overshoot }},
	{path: "targets.settling_time_s", unit: "s", min: 0, max: 1000, def: "0: no target", derive: fixed(0), meaning: "longest settling time of a step", at: func(r *Rig) any { return &r.Targets.Settling }},

	{path: "stop.style", oneOf: []string{"cut", "ramp-and-cut"}, word: "cut", def: "cut", meaning: "what the first press of the stop key asks for; `ramp-and-cut` works in a checked closed loop only, and the second press cuts", at: func(r *Rig) any { return &r.Stop.Style }},

	{path: "stop.off", oneOf: []string{"any", "coast", "short"}, word: "any", def: "any", meaning: "what *output off* has to do on this rig: let the motor coast, or short its winding to brake it. It is the board's doing; a board that does the other is refused", at: func(r *Rig) any { return &r.Stop.Off }},

	{path: "checks.limit", def: "false", meaning: "arming asks for the limit check of the session", at: func(r *Rig) any { return &r.Checks.Limit }},
	{path: "checks.interlock", def: "false", meaning: "a file without an input to check is refused; where inputs are named, arming asks for the interlock check of the session in any case", at: func(r *Rig) any { return &r.Checks.Interlock }},
}

// busMax keeps a 48 V rig under 60 V, the ceiling of touch voltage for PELV in
// the dry (EN 60204-1, 6.4.1), with 3 V in hand for the time to cut.
func busMax(r *Rig) float64 {
	b := 1.25 * r.Drive.BusNominal
	if r.Drive.BusNominal < 57 {
		b = math.Min(b, 57)
	}
	return b
}
