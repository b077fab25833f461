package simrig

// Config is one simulated rig: the content of a BOARD.toml. Each field's tags
// give its key, unit, range, default and meaning; a field without a default must
// be given. README.md is checked against them.
type Config struct {
	Name   string `toml:"name" doc:"what the rig is called"`
	Expect string `toml:"expect" one:"accepted refused" default:"accepted" doc:"what the whole job should come to; a refusal counts as right only where this says so"`
	Cause  string `toml:"cause" default:"" doc:"for a rig that must be refused: the cause that should be named, in the word of its fault"`
	Seed   uint64 `toml:"seed" range:"0..1e18" default:"1" doc:"start of all random numbers of the rig; the seed given to New is mixed in"`

	Nameplate Nameplate   `toml:"nameplate" doc:"what the plate on the rig says, and with it the envelope where no rig file is given"`
	Motor     MotorSpec   `toml:"motor" doc:"winding and rotor"`
	Friction  Friction    `toml:"friction" doc:"friction at the motor shaft"`
	Load      LoadSpec    `toml:"load" doc:"what the motor turns"`
	Driver    DriverSpec  `toml:"driver" doc:"the power stage"`
	Supply    SupplySpec  `toml:"supply" doc:"what feeds the power stage"`
	Encoder   EncoderSpec `toml:"encoder" doc:"counts"`
	Sensors   SensorSpec  `toml:"sensors" doc:"what else the board measures"`
	Board     BoardSpec   `toml:"board" doc:"the microcontroller and its firmware"`
	Gains     GainSpec    `toml:"gains" doc:"the gains stored in the board when the job begins, in the board's own form"`
	Faults    []FaultSpec `toml:"fault" doc:"what is wrong with the rig; any number of [[fault]] tables"`
}

// Nameplate is the envelope that the rig's plate allows. Speeds are at the motor
// shaft.
type Nameplate struct {
	VoltsRated float64 `toml:"voltage_rated_V" unit:"V" range:"1..60" doc:"rated voltage of the motor"`
	VoltsMax   float64 `toml:"voltage_max_V" unit:"V" range:"0..60" default:"0" doc:"highest drive allowed; 0: the rated voltage"`
	SpeedMax   float64 `toml:"speed_max_rad_s" unit:"rad/s" range:"1..5000" doc:"highest speed allowed"`
	AmpsMax    float64 `toml:"current_max_A" unit:"A" range:"0.01..100" doc:"highest winding current allowed"`
	BusMax     float64 `toml:"bus_max_V" unit:"V" range:"1..100" doc:"highest bus voltage allowed"`
	BusMin     float64 `toml:"bus_min_V" unit:"V" range:"0..60" default:"0" doc:"lowest bus voltage allowed; 0: not judged"`
	AccelMax   float64 `toml:"acceleration_max_rad_s2" unit:"rad/s²" range:"0..1e7" default:"0" doc:"highest acceleration allowed; 0: not judged"`
	TurnsMax   float64 `toml:"turns_max" unit:"turns" range:"0..1e6" default:"0" doc:"farthest from where a run began; 0: not judged"`
}

// MotorSpec is a brushed permanent-magnet motor.
type MotorSpec struct {
	Ohms     float64 `toml:"resistance_ohm" unit:"Ω" range:"0.01..200" doc:"winding resistance at 25 °C, brushes and driver included"`
	Henry    float64 `toml:"inductance_H" unit:"H" range:"1e-6..0.5" doc:"winding inductance"`
	K        float64 `toml:"torque_constant_Nm_A" unit:"N·m/A" range:"1e-4..10" doc:"torque constant, equal to the back-EMF constant in V·s/rad"`
	Inertia  float64 `toml:"inertia_kg_m2" unit:"kg·m²" range:"1e-9..10" doc:"of the rotor"`
	Ambient  float64 `toml:"ambient_degC" unit:"°C" range:"-40..60" default:"25" doc:"air around the winding, and the winding at the start"`
	PerWatt  float64 `toml:"thermal_resistance_K_W" unit:"K/W" range:"0..100" default:"0" doc:"winding to air; 0: the winding stays at ambient"`
	ThermalS float64 `toml:"thermal_time_constant_s" unit:"s" range:"1..1e5" default:"60" doc:"of the winding"`
	CelsMax  float64 `toml:"winding_max_degC" unit:"°C" range:"40..250" default:"130" doc:"the board trips above it where it measures temperature"`
}

// Friction is per direction of rotation.
type Friction struct {
	Forward SideSpec  `toml:"forward" doc:"turning in the positive direction"`
	Reverse *SideSpec `toml:"reverse" doc:"turning in the negative direction; without this table as forward"`
}

// SideSpec is the friction of one direction.
type SideSpec struct {
	Coulomb  float64 `toml:"coulomb_Nm" unit:"N·m" range:"0..100" doc:"at any speed"`
	Static   float64 `toml:"static_Nm" unit:"N·m" range:"0..100" doc:"at rest; at least the Coulomb friction"`
	Viscous  float64 `toml:"viscous_Nms" unit:"N·m·s/rad" range:"0..10" default:"0" doc:"per rad/s"`
	Stribeck float64 `toml:"stribeck_rad_s" unit:"rad/s" range:"0.01..1000" default:"2" doc:"speed at which exp(-1) of the excess of static over Coulomb friction is left"`
}

// LoadSpec is what hangs on the shaft.
type LoadSpec struct {
	Inertia    float64 `toml:"inertia_kg_m2" unit:"kg·m²" range:"0..100" default:"0" doc:"at the output shaft"`
	Gear       float64 `toml:"gear_ratio" unit:"1" range:"0.1..1000" default:"1" doc:"motor turns per output turn"`
	Torque     float64 `toml:"torque_Nm" unit:"N·m" range:"-100..100" default:"0" doc:"at the output shaft, active, pulling towards negative angles"`
	Gravity    float64 `toml:"gravity_Nm" unit:"N·m" range:"0..100" default:"0" doc:"amplitude at the output shaft, zero at the angle of the start"`
	Coupling   float64 `toml:"coupling_Nm_rad" unit:"N·m/rad" range:"0..1e6" default:"0" doc:"spring between rotor and load, at the output shaft; 0: rigid"`
	Damping    float64 `toml:"coupling_damping_Nms" unit:"N·m·s/rad" range:"0..1e3" default:"0" doc:"of that spring"`
	LostMotion float64 `toml:"lost_motion_rad" unit:"rad" range:"0..1" default:"0" doc:"free play of the coupling from stop to stop, at the output shaft"`
	Rub        float64 `toml:"friction_Nm" unit:"N·m" range:"0..100" default:"0" doc:"Coulomb friction of a load behind a coupling, at the output shaft"`
}

// DriverSpec is the power stage.
type DriverSpec struct {
	Quadrants int     `toml:"quadrants" range:"1..4" default:"4" doc:"4: both directions; 2: positive drive, the current may reverse; 1: positive drive, it may not"`
	DeadBand  float64 `toml:"dead_band_V" unit:"V" range:"0..10" default:"0" doc:"lost by the bridge whichever way it drives"`
	DeadTime  float64 `toml:"dead_time_s" unit:"s" range:"0..0.2" default:"0" doc:"from an order of the board to the winding; any value, not whole loop periods"`
	DutyStep  float64 `toml:"duty_step" unit:"1" range:"0..0.1" default:"0" doc:"quantum of the duty, such as 1/1024; 0: none"`
	Off       string  `toml:"off" one:"coast short" default:"coast" doc:"what off does: winding open or shorted"`
}

// SupplySpec is the source and the bus capacitor.
type SupplySpec struct {
	Volts  float64 `toml:"voltage_V" unit:"V" range:"1..60" doc:"without load"`
	Ohms   float64 `toml:"resistance_ohm" unit:"Ω" range:"1e-3..10" default:"0.02" doc:"of source and leads"`
	Limit  float64 `toml:"current_limit_A" unit:"A" range:"0.05..200" doc:"most it gives at full voltage"`
	Fold   float64 `toml:"fold_back_A" unit:"A" range:"0..200" default:"0" doc:"most it gives into a short circuit; 0: as the limit, a constant current"`
	Sinks  bool    `toml:"can_sink" default:"false" doc:"takes current back; a source that does not lets the bus rise on braking"`
	Farads float64 `toml:"capacitance_F" unit:"F" range:"1e-5..1" default:"0.001" doc:"on the bus"`
	Rest   float64 `toml:"standby_A" unit:"A" range:"0..1" default:"0.02" doc:"drawn by board and driver"`
}

// EncoderSpec is the counter.
type EncoderSpec struct {
	PerTurn int     `toml:"counts_per_turn" unit:"counts" range:"4..1000000" doc:"per turn of the shaft it sits on, all edges counted"`
	Side    string  `toml:"side" one:"motor load" default:"motor" doc:"which side of the gear it sits on"`
	Edge    float64 `toml:"edge_noise_counts" unit:"counts" range:"0..0.3" default:"0" doc:"RMS error of the place of an edge on the disc, another for each edge and for good: a shaft at rest reads still, a turning one repeats its error every turn"`
}

// SensorSpec is what the converter measures. A step of 0 is a converter without
// quantum.
type SensorSpec struct {
	Current      bool    `toml:"current" default:"false" doc:"winding current is measured"`
	CurrentNoise float64 `toml:"current_noise_A" unit:"A" range:"0..10" default:"0" doc:"RMS"`
	CurrentStep  float64 `toml:"current_step_A" unit:"A" range:"0..10" default:"0" doc:"quantum"`
	CurrentZero  float64 `toml:"current_offset_A" unit:"A" range:"-10..10" default:"0" doc:"reading at no current"`
	Bus          bool    `toml:"bus" default:"false" doc:"bus voltage is measured, and the duty worked out from it"`
	BusNoise     float64 `toml:"bus_noise_V" unit:"V" range:"0..10" default:"0" doc:"RMS"`
	BusStep      float64 `toml:"bus_step_V" unit:"V" range:"0..10" default:"0" doc:"quantum"`
	Temperature  bool    `toml:"temperature" default:"false" doc:"winding temperature is measured"`
}

// BoardSpec is the microcontroller.
type BoardSpec struct {
	ID       string   `toml:"id" doc:"unique id"`
	Firmware string   `toml:"firmware" default:"simrig 1.0" doc:"name and version, as identity words"`
	Boots    int      `toml:"boots" range:"0..65535" default:"0" doc:"starts before this one"`
	Baud     int      `toml:"baud" unit:"baud" range:"1200..4000000" default:"115200" doc:"rate of the line; bytes leave no faster than baud/10 a second"`
	LoopUS   int      `toml:"loop_us" unit:"µs" range:"50..100000" doc:"loop period"`
	DelayUS  int      `toml:"compute_delay_us" unit:"µs" range:"0..100000" default:"0" doc:"from latching the counts to the output that uses them, at most one loop period"`
	Window   int      `toml:"window_loops" unit:"loops" range:"1..1000" default:"1" doc:"length of the speed window"`
	Law      string   `toml:"law" one:"pi pid" default:"pi" doc:"control law"`
	Form     string   `toml:"form" one:"parallel ideal series" default:"parallel" doc:"form of the gains"`
	Deriv    string   `toml:"derivative" one:"measurement error" default:"measurement" doc:"what the derivative acts on"`
	Disc     string   `toml:"discretisation" one:"backward-euler forward-euler tustin incremental" default:"backward-euler" doc:"of integral and derivative"`
	Number   string   `toml:"gain_number" one:"float int" default:"float" doc:"how a gain is held: binary32, or a whole number of units of 2 to the power of minus gain_shift"`
	Shift    int      `toml:"gain_shift" unit:"bits" range:"0..30" default:"16" doc:"bits behind the point of integer gains"`
	Windup   string   `toml:"anti_windup" one:"none clamp back-calculation" default:"clamp" doc:"what keeps the integral from winding up"`
	VoltsMax float64  `toml:"voltage_max_V" unit:"V" range:"0..60" default:"0" doc:"hard limit of the board; 0: the supply's voltage"`
	SpeedMax float64  `toml:"speed_max_rad_s" unit:"rad/s" range:"0..10000" default:"0" doc:"hard limit of the board; 0: 1.5 times the nameplate's"`
	AmpsMax  float64  `toml:"current_max_A" unit:"A" range:"0..200" default:"0" doc:"hard limit of the board; 0: none"`
	BeatMin  int      `toml:"timeout_min_ms" unit:"ms" range:"20..10000" default:"50" doc:"shortest heartbeat timeout that can be set"`
	BeatMax  int      `toml:"timeout_max_ms" unit:"ms" range:"20..10000" default:"1000" doc:"longest heartbeat timeout that can be set"`
	Capture  int      `toml:"capture_samples" unit:"samples" range:"0..100000" default:"2000" doc:"capture memory; 0: no capture"`
	Ramp     bool     `toml:"ramp" default:"true" doc:"has ramp and cut"`
	Exper    bool     `toml:"experiments" default:"false" doc:"runs relay, binary sequence and square wave in its own loop"`
	BootMS   int      `toml:"boot_ms" unit:"ms" range:"0..5000" default:"50" doc:"from power or reset to the first line"`
	Inputs   []string `toml:"inputs" default:"" doc:"names of the input bits from bit 0, such as estop and guard; all in their working position at the start"`
}

// GainSpec is a set of gains. Which of them the board has follows from law, form
// and anti-windup.
type GainSpec struct {
	Kp float64 `toml:"kp" unit:"V/(rad/s)" range:"-1000..1000" default:"0" doc:"form parallel"`
	Ki float64 `toml:"ki" unit:"V/rad" range:"-100000..100000" default:"0" doc:"form parallel"`
	Kd float64 `toml:"kd" unit:"V·s²/rad" range:"-1000..1000" default:"0" doc:"form parallel, law pid"`
	Kc float64 `toml:"kc" unit:"V/(rad/s)" range:"-1000..1000" default:"0" doc:"forms ideal and series"`
	Ti float64 `toml:"ti" unit:"s" range:"0..1000" default:"0" doc:"forms ideal and series; 0: no integral"`
	Td float64 `toml:"td" unit:"s" range:"0..1000" default:"0" doc:"forms ideal and series, law pid"`
	Tf float64 `toml:"tf" unit:"s" range:"0..100" default:"0" doc:"derivative filter, law pid"`
	B  float64 `toml:"b" unit:"1" range:"0..2" default:"1" doc:"setpoint weight"`
	Tt float64 `toml:"tt" unit:"s" range:"0..1000" default:"0.1" doc:"anti-windup back-calculation"`
	Kv float64 `toml:"kv" unit:"V/(rad/s)" range:"-1000..1000" default:"0" doc:"feed-forward of the setpoint"`
	Ks float64 `toml:"ks" unit:"V" range:"-60..60" default:"0" doc:"feed-forward of static friction, by the sign of the setpoint"`
}

// FaultSpec is one thing that is wrong, from an instant on.
type FaultSpec struct {
	Kind  string  `toml:"kind" doc:"which; the list is below"`
	AtS   float64 `toml:"at_s" unit:"s" range:"0..1e6" default:"0" doc:"from when on, since power came"`
	Value float64 `toml:"value" unit:"see the list" range:"-1e6..1e6" default:"0" doc:"how much; 0: the list's default"`
}
