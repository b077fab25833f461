package identify

import (
	"encoding/json"
	"math"

	"gainwright/tune/model"
)

// Verdict says whether a model may be used.
type Verdict string

const (
	Believed Verdict = "believed"
	Care     Verdict = "care" // usable with care
	Refused  Verdict = "refused"
)

// Param is one fitted number with its standard deviation, NaN (null in JSON)
// where the data do not show it.
type Param struct {
	Name  string
	Unit  string
	Value float64
	SD    float64
}

type paramJSON struct {
	Name  string   `json:"name"`
	Unit  string   `json:"unit"`
	Value *float64 `json:"value"`
	SD    *float64 `json:"sd"`
}

// MarshalJSON writes name, unit, value and sd.
func (p Param) MarshalJSON() ([]byte, error) {
	return json.Marshal(paramJSON{p.Name, p.Unit, known(p.Value), known(p.SD)})
}

// UnmarshalJSON reads what MarshalJSON wrote.
func (p *Param) UnmarshalJSON(b []byte) error {
	var w paramJSON
	if err := json.Unmarshal(b, &w); err != nil {
		return err
	}
	*p = Param{w.Name, w.Unit, orNaN(w.Value), orNaN(w.SD)}
	return nil
}

// Fit is one model with how well it is known and whether it is believed.
// Numbers that are not known are NaN and become null in JSON.
type Fit struct {
	Model  model.Linear
	Params []Param     // in SI units
	Cov    [][]float64 // of Params, in their order, corrected for coloured residuals

	RMSE          float64 // rad/s, over the used samples of the fit
	NRMSE         float64 // ‖y − ŷ‖ / ‖y − mean y‖, simulated
	HoldoutNRMSE  float64 // the same on data not used in the fit
	HoldoutRMSE   float64 // rad/s
	VAF           float64 // 1 − var(y − ŷ)/var(y), of the fit
	AICc          float64
	WhitenessP    float64 // Ljung–Box: probability of such residuals if they were white
	InputP        float64 // probability of such residuals if they did not depend on the input
	Noise         float64 // rad/s, the part of the residual that its own past does not foretell
	Inflation     float64 // largest widening of an interval because residuals are coloured
	Drift         float64 // rad/s², 0 unless asked for
	Offset        float64 // rad/s at zero voltage (integrating: rad/s²); NaN where each record has its own
	Verdict       Verdict
	Reasons       []string
	Helps         string // the test that would help, empty when believed
	Used          int    // samples
	Masked        map[string]int
	Findings      []Finding // what the tests of the residuals found, strongest first
	FittedCounts  bool      // the counts were fitted, not the speeds made of them
	DeadTimeBound bool      // the dead time lies at the end of its range
}

// fitJSON is the wire form: the model's keys with those of the judgement beside
// them.
type fitJSON struct {
	Kind      string                `json:"kind"`
	Num       []float64             `json:"num"`
	Den       []float64             `json:"den"`
	DeadTime  float64               `json:"dead_time"`
	InputUnit string                `json:"input_unit"`
	CI95      map[string][2]float64 `json:"ci95,omitempty"`
	SpeedMin  float64               `json:"speed_min,omitempty"`
	SpeedMax  float64               `json:"speed_max,omitempty"`

	RMSE         *float64       `json:"rmse"`
	NRMSE        *float64       `json:"nrmse"`
	HoldoutNRMSE *float64       `json:"holdout_nrmse"`
	HoldoutRMSE  *float64       `json:"holdout_rmse"`
	VAF          *float64       `json:"vaf"`
	AICc         *float64       `json:"aicc"`
	WhitenessP   *float64       `json:"whiteness_p"`
	InputP       *float64       `json:"input_p"`
	Noise        *float64       `json:"noise"`
	Inflation    *float64       `json:"inflation"`
	Offset       *float64       `json:"offset"`
	Drift        float64        `json:"drift,omitempty"`
	Verdict      Verdict        `json:"verdict"`
	Reasons      []string       `json:"reasons"`
	Helps        string         `json:"helps,omitempty"`
	Params       []Param        `json:"params"`
	Cov          [][]float64    `json:"cov"`
	Used         int            `json:"used_samples"`
	Masked       map[string]int `json:"masked"`
	Findings     []Finding      `json:"findings,omitempty"`
	FittedCounts bool           `json:"fitted_counts,omitempty"`
	AtBound      bool           `json:"dead_time_at_bound,omitempty"`
}

func known(v float64) *float64 {
	if !finite(v) {
		return nil
	}
	return &v
}

func orNaN(p *float64) float64 {
	if p == nil {
		return math.NaN()
	}
	return *p
}

// knownMatrix returns m, nil where an entry is not known.
func knownMatrix(m [][]float64) [][]float64 {
	for _, row := range m {
		for _, v := range row {
			if !finite(v) {
				return nil
			}
		}
	}
	return m
}

// MarshalJSON writes the keys of the model and of the judgement in one object.
func (f Fit) MarshalJSON() ([]byte, error) {
	m := f.Model
	reasons := f.Reasons
	if reasons == nil {
		reasons = []string{}
	}
	masked := f.Masked
	if masked == nil {
		masked = map[string]int{}
	}
	return json.Marshal(fitJSON{
		Kind: m.Kind, Num: m.Num, Den: m.Den, DeadTime: m.DeadTime, InputUnit: m.InputUnit, CI95: m.CI95,
		SpeedMin: m.SpeedMin, SpeedMax: m.SpeedMax,
		RMSE: known(f.RMSE), NRMSE: known(f.NRMSE), HoldoutNRMSE: known(f.HoldoutNRMSE), HoldoutRMSE: known(f.HoldoutRMSE),
		VAF: known(f.VAF), AICc: known(f.AICc), WhitenessP: known(f.WhitenessP), InputP: known(f.InputP),
		Noise: known(f.Noise), Inflation: known(f.Inflation), Offset: known(f.Offset), Drift: f.Drift,
		Verdict: f.Verdict, Reasons: reasons, Helps: f.Helps, Params: f.Params, Cov: knownMatrix(f.Cov),
		Used: f.Used, Masked: masked, Findings: f.Findings, FittedCounts: f.FittedCounts, AtBound: f.DeadTimeBound,
	})
}

// UnmarshalJSON reads what MarshalJSON wrote.
func (f *Fit) UnmarshalJSON(b []byte) error {
	var w fitJSON
	if err := json.Unmarshal(b, &w); err != nil {
		return err
	}
	m := model.Linear{
		Kind: w.Kind, Num: w.Num, Den: w.Den, DeadTime: w.DeadTime, InputUnit: w.InputUnit, CI95: w.CI95,
		SpeedMin: w.SpeedMin, SpeedMax: w.SpeedMax,
	}
	if err := m.Validate(); err != nil {
		return err
	}
	*f = Fit{
		Model: m, Params: w.Params, Cov: w.Cov, RMSE: orNaN(w.RMSE), NRMSE: orNaN(w.NRMSE),
		HoldoutNRMSE: orNaN(w.HoldoutNRMSE), HoldoutRMSE: orNaN(w.HoldoutRMSE), VAF: orNaN(w.VAF), AICc: orNaN(w.AICc),
		WhitenessP: orNaN(w.WhitenessP), InputP: orNaN(w.InputP), Noise: orNaN(w.Noise), Inflation: orNaN(w.Inflation), Offset: orNaN(w.Offset),
		Drift: w.Drift, Verdict: w.Verdict, Reasons: w.Reasons, Helps: w.Helps, Used: w.Used, Masked: w.Masked,
		Findings: w.Findings, FittedCounts: w.FittedCounts, DeadTimeBound: w.AtBound,
	}
	return nil
}

// Value returns the fitted number of that name and its standard deviation.
func (f Fit) Value(name string) (value, sd float64, ok bool) {
	for _, p := range f.Params {
		if p.Name == name {
			return p.Value, p.SD, true
		}
	}
	return 0, 0, false
}

// Result is the outcome of one identification.
type Result struct {
	Models []Fit          `json:"models"`
	Chosen *int           `json:"chosen"` // index in Models; nil when every model is refused
	Used   int            `json:"used_samples"`
	Masked map[string]int `json:"masked"`
}

// Best returns the chosen fit, nil when every model is refused.
func (r Result) Best() *Fit {
	if r.Chosen == nil {
		return nil
	}
	return &r.Models[*r.Chosen]
}
