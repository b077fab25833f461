package sheet

import (
	"fmt"
	"math"
)

// RunUpRecord is the way up to the highest speed in levels. Kind event, NameRunUp.
type RunUpRecord struct {
	Levels []RunUpLevel `json:"levels"`
}

// RunUpLevel is one level, as measured in its steady part, and what was noted at it.
type RunUpLevel struct {
	Share      float64  `json:"share"` // of the highest level
	VoltsV     *float64 `json:"voltage_V"`
	SpeedRadS  *float64 `json:"speed_rad_s"`
	RippleRadS *float64 `json:"ripple_rad_s"` // standard deviation of the speed
	CurrentA   *float64 `json:"current_A"`    // nil where it is not measured
	TraceFile  string   `json:"trace_file"`
	Note       string   `json:"note"`
	Time       string   `json:"time"`
}

// AcceptanceRecord is the acceptance list of the rig file. Kind event, NameAcceptance.
type AcceptanceRecord struct {
	Passed  bool     `json:"passed"` // every line
	Witness string   `json:"witness"`
	Lines   []Answer `json:"lines"` // answers are passed or failed
}

// commissioning fills the card's lines on run-up and acceptance.
func (d *CardData) commissioning(r *Reader) {
	var up RunUpRecord
	if r.LastJSON(KindEvent, NameRunUp, &up) == nil && len(up.Levels) > 0 {
		notes, top := 0, 0.0
		for _, l := range up.Levels {
			if l.Note != "" {
				notes++
			}
			if l.SpeedRadS != nil {
				top = math.Max(top, *l.SpeedRadS)
			}
		}
		d.RunUp = fmt.Sprintf("run-up in %d levels to %s rpm, %d notes in the record", len(up.Levels), whole(rpm(&top)), notes)
	}
	var a AcceptanceRecord
	if r.LastJSON(KindEvent, NameAcceptance, &a) == nil && len(a.Lines) > 0 {
		passed := 0
		for _, l := range a.Lines {
			if l.Answer == "passed" {
				passed++
			}
		}
		d.Acceptance = fmt.Sprintf("acceptance list: %d of %d passed, witnessed by %s", passed, len(a.Lines), orNone(a.Witness))
	}
}

// commissioning writes run-up and acceptance list.
func (p *reportPage) commissioning() {
	var up RunUpRecord
	if p.r.LastJSON(KindEvent, NameRunUp, &up) == nil {
		p.section("Run-up")
		var rows [][]string
		for _, l := range up.Levels {
			rows = append(rows, []string{fmt.Sprintf("%.0f %%", 100*l.Share), with(l.VoltsV, "V"), with(rpm(l.SpeedRadS), "rpm"), with(rpm(l.RippleRadS), "rpm"), with(l.CurrentA, "A"), orNone(l.Note), l.Time, l.TraceFile})
		}
		p.table([]string{"level", "drive", "speed", "ripple", "current", "noted", "time", "trace"}, rows)
	}
	var a AcceptanceRecord
	if p.r.LastJSON(KindEvent, NameAcceptance, &a) == nil {
		p.section("Acceptance list of the rig file: " + passed(&a.Passed))
		var rows [][]string
		for _, l := range a.Lines {
			rows = append(rows, []string{l.Question, l.Answer, l.Initials, l.Time})
		}
		p.table([]string{"line", "", "witnessed by", "time"}, rows)
	}
}
