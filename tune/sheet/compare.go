package sheet

import (
	"errors"
	"fmt"
	"math"
)

// Row is one quantity of two jobs side by side. Values are in Unit; Change is
// the new value over the old less one, or null where that says nothing.
type Row struct {
	Quantity string   `json:"quantity"`
	Unit     string   `json:"unit"`
	Old      *float64 `json:"old"`
	New      *float64 `json:"new"`
	Change   *float64 `json:"change"`
	Allowed  string   `json:"allowed"`
	Origin   string   `json:"origin"` // where the tolerance comes from
	Verdict  Verdict  `json:"verdict"`
	Note     string   `json:"note,omitempty"`
}

// Verdict is what a row says.
type Verdict string

// The verdicts of a row.
const (
	Within   Verdict = "within"
	Outside  Verdict = "outside"
	Mismatch Verdict = "mismatch" // must be equal and is not
	Unknown  Verdict = "unknown"  // one of the two is not known
	Told     Verdict = "told"     // shown, not judged
)

// Origins of the tolerances. None is published for R or Ke by IEC 60034-1; what
// stands here is what is quoted or what is done.
const (
	originR        = "quoted as a NEMA figure"
	originJ        = "IEC 60034-1, as quoted in a gearmotor data book"
	originPractice = "common practice, no source"
	originExact    = "a count or a sign is right or wrong"
	originRetune   = "our choice: the retune trigger"
	originTold     = "no tolerance"
)

// quantity says how one quantity of a motor is compared. low and high bound the
// change; both 0 with exact false shows without judging.
type quantity struct {
	name, unit string
	of         func(MotorRecord) *float64
	low, high  float64
	exact      bool
	load       bool // depends on what the motor turns
	origin     string
}

var quantities = []quantity{
	{"counts per turn", "1", func(m MotorRecord) *float64 { return m.CountsPerTurn }, 0, 0, true, false, originExact},
	{"sign", "1", func(m MotorRecord) *float64 { return m.Sign }, 0, 0, true, false, originExact},
	{"gear ratio", "1", func(m MotorRecord) *float64 { return m.GearRatio }, 0, 0, true, false, originExact},
	{"R at 25 °C", "ohm", r25, -0.10, 0.10, false, false, originR},
	{"Ke", "V s/rad", func(m MotorRecord) *float64 { return m.KeVsPerRad }, -0.10, 0.10, false, false, originPractice + " (good makers ±5 %)"},
	{"J", "kg m2", func(m MotorRecord) *float64 { return m.JKgM2 }, -0.10, 0.10, false, true, originJ},
	{"Coulomb friction", "N m", func(m MotorRecord) *float64 { return m.CoulombNm }, -0.50, 1.00, false, true, originPractice},
	{"no-load current", "A", func(m MotorRecord) *float64 { return m.NoLoadCurrentA }, -0.50, 1.00, false, true, originPractice},
	{"breakaway forward", "V", func(m MotorRecord) *float64 { return m.BreakawayForwardV }, -0.50, 1.00, false, true, originPractice},
	{"breakaway reverse", "V", func(m MotorRecord) *float64 { return m.BreakawayReverseV }, -0.50, 1.00, false, true, originPractice},
	{"gain K", "rad/s per V", func(m MotorRecord) *float64 { return m.GainRadSPerV }, -0.15, 0.15, false, false, originRetune},
	{"time constant", "s", func(m MotorRecord) *float64 { return m.TauS }, -0.15, 0.15, false, true, originRetune},
	{"dead time", "s", func(m MotorRecord) *float64 { return m.DeadTimeS }, 0, 0, false, false, originTold},
	{"phase margin", "deg", func(m MotorRecord) *float64 { return m.PhaseMarginDeg }, 0, 0, false, true, originTold},
	{"overshoot", "%", func(m MotorRecord) *float64 { return m.OvershootPercent }, 0, 0, false, true, originTold},
}

// ResistanceAt25 brings the resistance of a copper winding from degC to 25 °C:
// R·(1 + α·(25 − 20)) / (1 + α·(T − 20)) with α = 0.00393 per kelvin, the
// coefficient of standard annealed copper at 20 °C (IEC 60028). It returns NaN
// below -200 °C, where the law has long ceased to hold.
func ResistanceAt25(ohm, degC float64) float64 {
	const alpha20 = 0.00393
	if !(degC > -200) {
		return math.NaN()
	}
	return ohm * (1 + alpha20*5) / (1 + alpha20*(degC-20))
}

func r25(m MotorRecord) *float64 {
	if m.ROhm == nil || m.RDegC == nil {
		return nil // a resistance without its temperature cannot be compared
	}
	return Known(ResistanceAt25(*m.ROhm, *m.RDegC))
}

// Compare returns the table of an earlier job's motor against a later one's.
func Compare(old, new MotorRecord) []Row {
	rows := make([]Row, 0, len(quantities))
	for _, q := range quantities {
		rows = append(rows, q.row(q.of(old), q.of(new)))
	}
	if old.ROhm != nil && old.RDegC == nil || new.ROhm != nil && new.RDegC == nil {
		for i := range rows {
			if rows[i].Quantity == "R at 25 °C" {
				rows[i].Note = "R was taken without the winding's temperature; 10 K are 4 %"
			}
		}
	}
	if old.LoadState != new.LoadState {
		for i := range rows {
			if quantities[i].load {
				rows[i].Note = fmt.Sprintf("other load: %s, now %s", text(old.LoadState, 30), text(new.LoadState, 30))
			}
		}
	}
	return rows
}

func (q quantity) row(old, new *float64) Row {
	r := Row{Quantity: q.name, Unit: q.unit, Old: old, New: new, Allowed: q.allowed(), Origin: q.origin, Verdict: Unknown}
	if old == nil || new == nil {
		return r
	}
	if *old != 0 {
		r.Change = Known(*new / *old - 1)
	}
	switch {
	case q.exact:
		r.Verdict = Within
		if *old != *new {
			r.Verdict = Mismatch
		}
	case q.low == 0 && q.high == 0:
		r.Verdict = Told
	case r.Change == nil:
		r.Verdict = Unknown
		r.Note = "the old value is 0: no ratio"
	// A hair's breadth for the rounding of the ratio itself, not for the motor.
	case *r.Change < q.low-1e-12 || *r.Change > q.high+1e-12:
		r.Verdict = Outside
	default:
		r.Verdict = Within
	}
	return r
}

func (q quantity) allowed() string {
	switch {
	case q.exact:
		return "equal"
	case q.low == 0 && q.high == 0:
		return "-"
	case q.low == -q.high:
		return fmt.Sprintf("±%.0f %%", q.high*100)
	default:
		return fmt.Sprintf("%.0f…+%.0f %%", q.low*100, q.high*100)
	}
}

// Retune returns why a retune is due after a comparison: K or the time constant
// moved by more than 15 %, the forecast phase margin fell below 45°, or the
// verify's overshoot passed its target by more than 5 points (our choice).
// An empty list says that none of these is known to hold.
func Retune(rows []Row, new MotorRecord) []string {
	var why []string
	for _, r := range rows {
		if (r.Quantity == "gain K" || r.Quantity == "time constant") && r.Verdict == Outside {
			why = append(why, fmt.Sprintf("%s moved by %+.0f %%, more than 15 %%", r.Quantity, *r.Change*100))
		}
	}
	if pm := new.PhaseMarginDeg; pm != nil && *pm < 45 {
		why = append(why, fmt.Sprintf("the phase margin is forecast at %.0f deg, below 45", *pm))
	}
	if o, t := new.OvershootPercent, new.OvershootTarget; o != nil && t != nil && *o > *t+5 {
		why = append(why, fmt.Sprintf("overshoot %.0f %% is more than 5 points over its target of %.0f %%", *o, *t))
	}
	return why
}

// Motor returns what a sheet knows of its motor, from its newest record of it.
func (r *Reader) Motor() (MotorRecord, error) {
	var m MotorRecord
	err := r.LastJSON(KindFit, NameMotor, &m)
	if errors.Is(err, ErrNoEntry) {
		return m, fmt.Errorf("%w: this job did not come as far as a fit of its motor, so there is nothing to compare; take a sheet of a finished job", err)
	}
	return m, err
}

// CompareDirs compares the sheets in two folders.
func CompareDirs(old, new string) ([]Row, error) {
	var motors [2]MotorRecord
	for i, dir := range []string{old, new} {
		r, _ := Open(dir)
		m, err := r.Motor()
		if err != nil {
			return nil, fmt.Errorf("%s: %w", dir, err)
		}
		motors[i] = m
	}
	return Compare(motors[0], motors[1]), nil
}
