package sheet

import "encoding/json"

// The records below are what the entries of a job hold. They are plain: every
// key says its unit, a value that is not known is null, and what another package
// has a fixed JSON form for (models, gains, margins, plans) is kept in that form
// untouched, so that it can be computed with again. Empty lists may be null.

// Names of the entries that are looked for by name, beside their kinds.
const (
	NameNameplate = "nameplate"    // KindRig, NameplateRecord
	NameStaircase = "staircase"    // KindFit, StaircaseRecord
	NameBreakaway = "breakaway"    // KindFit, BreakawayRecord
	NameMotor     = "motor-values" // KindFit, MotorRecord

	NameLimitsHeld   = "limits-held"   // KindEvent, with Limits
	NameNoAdjustment = "no-adjustment" // KindEvent: the gains as found were good enough
	NameAsFoundStep  = "as-found-step" // KindEvent, AsFoundStepRecord
	NameMethods      = "methods"       // KindExperiment: what different tests say of the same numbers
	NameRunUp        = "run-up"        // KindEvent, RunUpRecord
	NameAcceptance   = "acceptance"    // KindEvent, AcceptanceRecord
	NameDrill        = "drill"         // KindEvent, DrillRecord
	NameSinceLast    = "since-last"    // KindEvent, EventRecord: as found against an earlier as-left
	NameConditions   = "conditions"    // KindEvent, EventRecord: ambient and load state as the operator says
)

// Quantity is one number with what a reader may ask of it.
type Quantity struct {
	Name      string   `json:"name"`
	Value     *float64 `json:"value"`
	Unit      string   `json:"unit"`
	PlusMinus *float64 `json:"plus_minus,omitempty"` // half of the 95 % interval, in Unit
	Why       string   `json:"why,omitempty"`        // formula, inputs, file and sample range
}

// NameplateRecord is what the rig file and the labels say of the motor, as far
// as the card shows it. Kind rig, NameNameplate.
type NameplateRecord struct {
	RigFile       string   `json:"rig_file"`
	MotorType     string   `json:"motor_type"`
	MotorSerial   string   `json:"motor_serial"`
	NominalV      *float64 `json:"nominal_V"`
	EncoderLines  *float64 `json:"encoder_lines"`
	CountsPerTurn *float64 `json:"counts_per_turn"` // of the motor shaft
	Gear          string   `json:"gear"`
	NextCheck     string   `json:"next_check"`
	Absent        []string `json:"absent"` // hardware measures the rig does not have
}

// Snapshot is the board as it was found or left. Kinds as-found and as-left.
type Snapshot struct {
	BoardID      string            `json:"board_id"`
	Firmware     string            `json:"firmware"`
	Protocol     string            `json:"protocol"`
	Identity     map[string]string `json:"identity,omitempty"` // as the board answered
	Running      json.RawMessage   `json:"running"`            // gains in use
	Stored       json.RawMessage   `json:"stored"`             // gains in memory that lasts
	Limits       []Quantity        `json:"limits"`             // held by the board
	Flags        []string          `json:"flags"`
	BootCount    *int              `json:"boot_count"`
	BusV         *float64          `json:"bus_V"`
	AmbientDegC  *float64          `json:"ambient_degC"`
	LoadState    string            `json:"load_state"`
	TraceFiles   []string          `json:"trace_files"`
	StepResponse *StepResult       `json:"step_response"`
}

// StepResult is a step of the closed loop, measured or forecast.
type StepResult struct {
	StepRadS         *float64 `json:"step_rad_s"`
	OvershootPercent *float64 `json:"overshoot_percent"`
	SettlingTimeS    *float64 `json:"settling_time_s"`
	SettlingBandRadS *float64 `json:"settling_band_rad_s"`
	RippleRadS       *float64 `json:"ripple_rad_s"` // half of peak to peak, at steady speed

	// The ends of a forecast's band; nil where it has none.
	OvershootLow  *float64 `json:"overshoot_low_percent,omitempty"`
	OvershootHigh *float64 `json:"overshoot_high_percent,omitempty"`
	SettlingLow   *float64 `json:"settling_low_s,omitempty"`
	SettlingHigh  *float64 `json:"settling_high_s,omitempty"`
}

// HuntingRecord is a sustained oscillation of the closed loop at a setpoint that
// stands.
type HuntingRecord struct {
	FrequencyHz   *float64 `json:"frequency_hz"`
	AmplitudeRadS *float64 `json:"amplitude_rad_s"`
	Cause         string   `json:"likely_cause"`
	Remedy        string   `json:"remedy"`
}

// AsFoundStepRecord is a step of the closed loop as it was found, or why none was
// taken. Kind event, NameAsFoundStep.
type AsFoundStepRecord struct {
	Step      *StepResult  `json:"step"`
	Forecast  *StepResult  `json:"forecast"` // of the same gains on the fitted model
	TraceFile string       `json:"trace_file"`
	LoadState string       `json:"load_state"`
	Curve     *VerifyCurve `json:"curve,omitempty"`
	NotTaken  string       `json:"not_taken,omitempty"`

	Hunting *HuntingRecord `json:"hunting,omitempty"`
}

// CheckRecord is one check of the session. Kind check.
type CheckRecord struct {
	Check     string     `json:"check"` // count, sign, stop, silence, limit, interlock …
	Layer     string     `json:"layer"` // hardware, board or laptop
	Passed    *bool      `json:"passed"`
	Measured  []Quantity `json:"measured"`
	Finding   string     `json:"finding"`
	Witness   string     `json:"witness,omitempty"`
	TraceFile string     `json:"trace_file,omitempty"`
}

// Mark is a moment the operator marked during a run.
type Mark struct {
	TimeS float64 `json:"time_s"`
	Text  string  `json:"text"`
}

// RunRecord is one run, whatever became of it. Kind run.
type RunRecord struct {
	Name        string            `json:"name"`
	Purpose     string            `json:"purpose"`
	Step        string            `json:"step"` // of the job path
	Plan        json.RawMessage   `json:"plan"`
	Forecast    []Quantity        `json:"forecast"`
	Limits      []Quantity        `json:"limits"`       // the envelope of this run
	BoardLimits []Quantity        `json:"board_limits"` // as read back before the arm
	TraceFile   string            `json:"trace_file"`
	Marks       []Mark            `json:"marks"`
	Seed        uint64            `json:"seed,string"`
	Versions    map[string]string `json:"versions"`
	Operator    string            `json:"operator"`
	AmbientDegC *float64          `json:"ambient_degC"`
	LoadState   string            `json:"load_state"`
	Reason      string            `json:"reason"` // of the stop
	Complete    bool              `json:"complete"`
	Extremes    []Quantity        `json:"extremes"`
}

// FitRecord is one fit. Kind fit.
type FitRecord struct {
	Kind         string          `json:"kind"` // first-order, second-order …
	Model        json.RawMessage `json:"model"`
	Settings     json.RawMessage `json:"settings"` // what the fit was told, enough to repeat it
	Params       []Quantity      `json:"params"`
	InputFiles   []string        `json:"input_files"`
	HoldoutFiles []string        `json:"holdout_files"`
	Used         int             `json:"used_samples"`
	Masked       map[string]int  `json:"masked"`
	NRMSE        *float64        `json:"nrmse"`
	HoldoutNRMSE *float64        `json:"holdout_nrmse"`
	VAF          *float64        `json:"vaf_percent"`
	WhitenessP   *float64        `json:"whiteness_p"`
	Verdict      string          `json:"verdict"` // believed, care or refused
	Reasons      []string        `json:"reasons"`
	Helps        string          `json:"helps"`
	Curve        *FitCurve       `json:"curve,omitempty"`
}

// FitCurve is the measured and the simulated output over the data of a fit.
type FitCurve struct {
	TimeS        []float64 `json:"time_s"`
	MeasuredRadS []float64 `json:"measured_rad_s"`
	FittedRadS   []float64 `json:"fitted_rad_s"`
}

// Level is one level of a staircase.
type Level struct {
	VoltageV  float64 `json:"voltage_V"`
	SpeedRadS float64 `json:"speed_rad_s"`
	Rising    bool    `json:"rising"` // reached from below

	// Enough to fit the staircase again.
	SpeedSDRadS *float64 `json:"speed_sd_rad_s,omitempty"` // of the single samples
	Samples     int      `json:"samples,omitempty"`
	Settled     bool     `json:"settled,omitempty"`
	FromS       *float64 `json:"from_s,omitempty"` // of the averaged part, after the first drive value
	ToS         *float64 `json:"to_s,omitempty"`
	CurrentA    *float64 `json:"current_A,omitempty"` // nil: not measured
}

// StaircaseRecord is what a staircase showed. Kind fit, NameStaircase.
type StaircaseRecord struct {
	Levels    []Level    `json:"levels"`
	Params    []Quantity `json:"params"`
	TraceFile string     `json:"trace_file"`
}

// BreakawayRecord is what the breakaway ramps showed, in the order they were
// made; both directions positive. Kind fit, NameBreakaway.
type BreakawayRecord struct {
	ForwardV []float64  `json:"forward_V"`
	ReverseV []float64  `json:"reverse_V"`
	Params   []Quantity `json:"params"`
}

// MotorRecord is what is known of the motor at the end of the job: the row of
// values that a later job is compared with. Kind fit, NameMotor.
type MotorRecord struct {
	ROhm              *float64 `json:"R_ohm"`
	RDegC             *float64 `json:"R_degC"` // winding temperature at which R was taken
	KeVsPerRad        *float64 `json:"Ke_V_s_per_rad"`
	JKgM2             *float64 `json:"J_kg_m2"`
	CoulombNm         *float64 `json:"coulomb_N_m"`
	NoLoadCurrentA    *float64 `json:"no_load_current_A"`
	BreakawayForwardV *float64 `json:"breakaway_forward_V"`
	BreakawayReverseV *float64 `json:"breakaway_reverse_V"`
	CountsPerTurn     *float64 `json:"counts_per_turn"`
	Sign              *float64 `json:"sign"` // +1 or -1: counts for positive volts
	GearRatio         *float64 `json:"gear_ratio"`
	GainRadSPerV      *float64 `json:"gain_rad_s_per_V"`
	TauS              *float64 `json:"tau_s"`
	DeadTimeS         *float64 `json:"dead_time_s"`
	PhaseMarginDeg    *float64 `json:"phase_margin_deg"` // of the pushed gains on this model
	OvershootPercent  *float64 `json:"overshoot_percent"`
	OvershootTarget   *float64 `json:"overshoot_target_percent"`
	LoadState         string   `json:"load_state"`
}

// Series is a column of numbers of an experiment.
type Series struct {
	Name   string     `json:"name"`
	Unit   string     `json:"unit"`
	Values []*float64 `json:"values"`
}

// ExperimentRecord is what an optional experiment showed. Kind experiment, named
// by its step.
type ExperimentRecord struct {
	Experiment string          `json:"experiment"` // step of the job path
	Settings   json.RawMessage `json:"settings"`   // what the analysis was told, enough to repeat it
	InputFiles []string        `json:"input_files"`
	Params     []Quantity      `json:"params"`
	Columns    []Series        `json:"columns"`
	Verdict    string          `json:"verdict"` // believed, care or refused
	Reasons    []string        `json:"reasons"`
	Finding    string          `json:"finding"` // in one line
}

// Bode is the open loop, sampled in frequency, with its margins.
type Bode struct {
	FrequencyRadS    []float64 `json:"frequency_rad_s"`
	MagnitudeDB      []float64 `json:"magnitude_dB"`
	PhaseDeg         []float64 `json:"phase_deg"`
	WorstMagnitudeDB []float64 `json:"worst_magnitude_dB,omitempty"` // of the worst case, if one was computed
	WorstPhaseDeg    []float64 `json:"worst_phase_deg,omitempty"`
	CrossoverRadS    *float64  `json:"crossover_rad_s"`
	PhaseMarginDeg   *float64  `json:"phase_margin_deg"`
	PhaseCrossRadS   *float64  `json:"phase_crossover_rad_s"`
	GainMarginDB     *float64  `json:"gain_margin_db"`
}

// ProposalRecord is one proposal, chosen or not. Kind proposal.
type ProposalRecord struct {
	Rule       string          `json:"rule"`
	Chosen     bool            `json:"chosen"`
	Gains      json.RawMessage `json:"gains"`
	Margins    json.RawMessage `json:"margins"`
	Worst      json.RawMessage `json:"worst"`
	Settings   json.RawMessage `json:"settings"` // what the rule was told, enough to repeat it
	InputFiles []string        `json:"input_files"`
	Figures    []Quantity      `json:"figures"` // the same and more, for people, each with its why
	Notes      []string        `json:"notes"`
	Refused    string          `json:"refused,omitempty"`
	Bode       *Bode           `json:"bode,omitempty"`
}

// PushRecord is one push to the board's RAM with its read-back. Kind push.
type PushRecord struct {
	Old       json.RawMessage   `json:"old"`
	New       json.RawMessage   `json:"new"`
	ReadBack  json.RawMessage   `json:"read_back"`
	Words     map[string]string `json:"words"` // as sent to the board
	Identical *bool             `json:"identical"`
	Confirmed string            `json:"confirmed"` // what the operator typed
	Finding   string            `json:"finding"`
}

// Target is one line of a verify's acceptance.
type Target struct {
	Name     string   `json:"name"`
	Unit     string   `json:"unit"`
	Limit    string   `json:"limit"` // such as "<= 10"
	Measured *float64 `json:"measured"`
	Forecast *float64 `json:"forecast"`
	Passed   *bool    `json:"passed"`
	Why      string   `json:"why,omitempty"`
}

// VerifyCurve is a verify over its forecast.
type VerifyCurve struct {
	TimeS        []float64 `json:"time_s"`
	SetpointRadS []float64 `json:"setpoint_rad_s"`
	MeasuredRadS []float64 `json:"measured_rad_s"`
	ForecastRadS []float64 `json:"forecast_rad_s"`
	LowRadS      []float64 `json:"low_rad_s,omitempty"` // the band of the forecast
	HighRadS     []float64 `json:"high_rad_s,omitempty"`
	EarlierRadS  []float64 `json:"earlier_rad_s,omitempty"` // last time's, on the same times
}

// VerifyRecord is the closed loop against its forecast. Kind verify.
type VerifyRecord struct {
	Passed     *bool        `json:"passed"`
	Targets    []Target     `json:"targets"`
	Step       *StepResult  `json:"step"`
	Forecast   *StepResult  `json:"forecast"`
	TraceFiles []string     `json:"trace_files"`
	LoadState  string       `json:"load_state"`
	Finding    string       `json:"finding"`
	Curve      *VerifyCurve `json:"curve,omitempty"`

	Hunting *HuntingRecord `json:"hunting,omitempty"`
}

// StoreRecord is the storing of the gains and what a power-cycle left of them.
// Kind store.
type StoreRecord struct {
	Stored      *bool           `json:"stored"`
	PowerCycled *bool           `json:"power_cycled"`
	ReRead      json.RawMessage `json:"re_read"`
	Identical   *bool           `json:"identical"`
	Finding     string          `json:"finding"`
}

// PartRecord is a part that was swapped, with the walk's questions and who
// answered them. Kind part.
type PartRecord struct {
	Old       map[string]string `json:"old"`
	New       map[string]string `json:"new"`
	Predicted []Quantity        `json:"predicted"` // what the difference does if nothing is changed
	Answers   []Answer          `json:"answers"`
}

// Answer is one line of a checklist.
type Answer struct {
	Question string `json:"question"`
	Answer   string `json:"answer"`
	Initials string `json:"initials"`
	Time     string `json:"time"`
}

// EventRecord is anything else worth a line: a trip, a restart of the board, an
// override with its reason. Kind event.
type EventRecord struct {
	What   string     `json:"what"`
	Detail string     `json:"detail"`
	Limits []Quantity `json:"limits,omitempty"` // NameLimitsHeld: read back from the board
}
