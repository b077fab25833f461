package sheet

import (
	"fmt"
	"strings"
)

// DrillRecord is a failure that was brought about on a simulated rig without a word,
// and what was done about it. Times are in s from the moment it began; nil: never.
// Kind event, NameDrill.
type DrillRecord struct {
	Scene     string   `json:"scene"` // F1 to F13
	Title     string   `json:"title"`
	Began     string   `json:"began"`      // in which run or step, in words; "" if it never did
	RunS      *float64 `json:"run_s"`      // into that run
	StoppedBy string   `json:"stopped_by"` // who stopped first: a key, or the limiter with its cause
	StoppedS  *float64 `json:"stopped_s"`
	KeyS      *float64 `json:"key_s"`        // first stop by a key
	OffS      *float64 `json:"output_off_s"` // first word that the output is off
	AckS      *float64 `json:"acknowledged_s"`
	ResetS    *float64 `json:"reset_s"`
	ArmedS    *float64 `json:"armed_again_s"`
	Expected  string   `json:"expected"` // what the book asks of a person
}

// Words say what happened and what was done, one thing a line.
func (d DrillRecord) Words() []string {
	out := []string{fmt.Sprintf("DRILL %s: %s (simulated rig: nothing real moved)", d.Scene, d.Title)}
	if d.Began == "" {
		return append(out, "it did not come about: the job did not get that far", "what is asked of you: "+d.Expected)
	}
	if d.RunS == nil { // no moment to count from
		out = append(out, "it was there in "+d.Began)
		if d.StoppedBy != "" {
			out = append(out, "stopped by "+d.StoppedBy)
		}
		return append(out, "what is asked of you: "+d.Expected)
	}
	out = append(out, fmt.Sprintf("it began in %s, %.2f s into the run", d.Began, *d.RunS))
	line := func(what string, s *float64, never string) {
		if s != nil {
			out = append(out, fmt.Sprintf("%-22s after %.2f s", what, *s))
		} else if never != "" {
			out = append(out, fmt.Sprintf("%-22s %s", what, never))
		}
	}
	if d.StoppedBy != "" {
		line("stopped", d.StoppedS, "")
		out = append(out, "  by "+d.StoppedBy)
	}
	line("your key", d.KeyS, "none pressed")
	line("output off", d.OffS, "never said by the board")
	line("acknowledged", d.AckS, "not")
	line("reset", d.ResetS, "not")
	line("armed again", d.ArmedS, "not")
	return append(out, "what is asked of you: "+d.Expected)
}

// drills shows them in the report.
func (p *reportPage) drills() {
	for _, l := range p.r.Find(KindEvent, NameDrill) {
		var d DrillRecord
		if p.r.JSON(l, &d) == nil {
			p.section("Drill")
			p.para(strings.Join(d.Words(), "; "))
		}
	}
}
