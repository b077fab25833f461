package sheet

import (
	"fmt"
	"strings"
)

// InterlockRecord is one input of the interlock table: seen in every state at
// rest, then opened in motion. Kind interlock, one entry an input.
type InterlockRecord struct {
	Input  string          `json:"input"`
	Kind   string          `json:"kind"` // interlock or enabling
	Bit    int             `json:"bit"`
	Rest   []InputSeen     `json:"rest"`
	Creep  []InterlockStop `json:"creep"`
	Passed *bool           `json:"passed"`
}

// InputSeen is a state that the board reported, and who saw the input worked.
type InputSeen struct {
	State    string  `json:"state"`
	Time     string  `json:"time"`
	SessionS float64 `json:"session_s"` // console time since the session began
	Witness  string  `json:"witness"`
}

// InterlockStop is the stop that an input brought about at creep speed. Times and
// angle are from the board's own clock and counts, beginning with the instant at
// which the board saw the input.
type InterlockStop struct {
	State     string   `json:"state"`
	StoppedBy string   `json:"stopped_by"` // board, laptop or nobody
	Cause     string   `json:"cause"`
	SpeedRadS *float64 `json:"speed_rad_s"` // of the motor shaft, then
	OffS      *float64 `json:"off_s"`       // to output off
	StopS     *float64 `json:"stop_s"`      // to rest
	StopTurns *float64 `json:"stop_turns"`  // of the motor shaft, to rest
	Witness   string   `json:"witness"`
	TraceFile string   `json:"trace_file"`
}

// ChecklistRecord is the checklist of the rig file, ticked line by line before the
// first arm. Kind event, NameChecklist.
type ChecklistRecord struct {
	Ticked bool     `json:"ticked"` // every line
	Lines  []Answer `json:"lines"`
}

// WhyStoppedRecord is what the operator said when asked why a run was stopped. Kind
// event, NameWhyStopped.
type WhyStoppedRecord struct {
	Run    string `json:"run"`
	Key    string `json:"key"` // stop key or another
	Reason string `json:"reason"`
	Time   string `json:"time"`
}

// Names of entries of kind event.
const (
	NameChecklist  = "checklist"
	NameWhyStopped = "why-stopped"
)

// line is the input on one line of the card.
func (r InterlockRecord) line() CardCheck {
	out := CardCheck{Name: r.Input, Seen: r.Passed}
	var notes []string
	for _, s := range r.Creep {
		if s.StopS == nil || s.StopTurns == nil {
			continue
		}
		notes = append(notes, fmt.Sprintf("%s %.2f s %.2f", s.StoppedBy, *s.StopS, *s.StopTurns))
	}
	out.Note = strings.Join(notes, "; ")
	return out
}

// interlocks is the commissioning part of the report: what was seen of the inputs,
// the checklist, and why runs were stopped.
func (p *reportPage) interlocks() {
	if len(p.r.Find(KindInterlock, "")) > 0 {
		p.section("Interlocks: seen in every state, opened at creep")
	}
	each(p, KindInterlock, func(_ Line, r InterlockRecord) {
		p.sub(fmt.Sprintf("%s (%s, bit %d): %s", r.Input, r.Kind, r.Bit, passed(r.Passed)))
		var rows [][]string
		for _, s := range r.Rest {
			rows = append(rows, []string{s.State, s.Time, fmt.Sprintf("%.2f s", s.SessionS), orNone(s.Witness)})
		}
		p.table([]string{"seen at rest", "time", "session", "witnessed by"}, rows)
		rows = nil
		for _, s := range r.Creep {
			rows = append(rows, []string{s.State, s.StoppedBy, s.Cause, with(s.SpeedRadS, "rad/s"), with(s.OffS, "s"), with(s.StopS, "s"), with(s.StopTurns, "turns"), orNone(s.Witness)})
		}
		p.table([]string{"in motion", "stopped by", "cause", "speed then", "to output off", "to rest", "angle to rest", "witnessed by"}, rows)
	})
	if lines := p.r.Find(KindEvent, NameChecklist); len(lines) > 0 {
		p.section("Checklist of the rig file")
		for _, l := range lines {
			var c ChecklistRecord
			if err := p.r.JSON(l, &c); err != nil {
				p.loud("cannot be shown: " + err.Error())
				continue
			}
			var rows [][]string
			for _, a := range c.Lines {
				rows = append(rows, []string{a.Question, a.Answer, a.Time})
			}
			p.table([]string{"line", "ticked", "time"}, rows)
		}
	}
	if lines := p.r.Find(KindEvent, NameWhyStopped); len(lines) > 0 {
		p.section("Runs that the operator stopped")
		var rows [][]string
		for _, l := range lines {
			var w WhyStoppedRecord
			if p.r.JSON(l, &w) == nil {
				rows = append(rows, []string{w.Time, w.Run, w.Key, w.Reason})
			}
		}
		p.table([]string{"time", "run", "by", "why"}, rows)
	}
}
