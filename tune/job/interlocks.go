package job

import (
	"fmt"
	"math"
	"strings"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/sheet"
)

// lever is one input of the rig file with the states that it is put into: bits to
// set, and what that is called.
type lever struct {
	name, kind string
	bit        uint8
	rest       pose   // its working position
	open       []pose // each of the others
}

type pose struct {
	words string
	set   []InputBit
}

// levers lists the inputs of the rig file, the enabling switch last.
func (j *Job) levers() (all []lever) {
	for _, in := range j.Env.Inputs {
		all = append(all, lever{name: in.Name, kind: "interlock", bit: in.Bit,
			rest: pose{"in its working position", []InputBit{{in.Bit, true}}}, open: []pose{{"open", []InputBit{{in.Bit, false}}}}})
	}
	if e := j.Env.Enabling; e.Listed {
		l := lever{name: e.Name, kind: "enabling", bit: e.Bit, rest: pose{"held in the middle", []InputBit{{e.Bit, true}}}}
		if !e.Two {
			l.open = []pose{{"let go", []InputBit{{e.Bit, false}}}}
		} else {
			l.rest.set = append(l.rest.set, InputBit{e.ThroughBit, true})
			l.open = []pose{{"released", []InputBit{{e.Bit, false}, {e.ThroughBit, true}}}, {"pressed through", []InputBit{{e.Bit, false}, {e.ThroughBit, false}}}}
		}
		all = append(all, l)
	}
	return all
}

// inputsNamed leaves the step out where the rig file names no input.
func (j *Job) inputsNamed() {
	s := j.steps[StepInterlocks]
	const none = "the rig file names no input"
	named := len(j.Rig.Interlocks) > 0
	switch {
	case !named && s.Status == ToDo:
		s.Status, s.Reason = Skipped, none
	case named && s.Status == Skipped && s.Reason == none:
		s.Status, s.Reason = ToDo, ""
	}
}

// doInterlocks has every input seen in both states at rest, then has the shaft
// stopped by each at creep speed, and measures what came of it.
func (j *Job) doInterlocks() (result, error) {
	all := j.levers()
	if len(all) == 0 {
		return "the rig file names no input: nothing to see", nil
	}
	if most := len(j.ID.Inputs); most > 0 {
		for _, l := range all {
			if int(l.bit) >= most {
				return "", refuse(781, "interlock check", fmt.Sprintf("the rig file names bit %d as %q, the board has %d inputs: %s", l.bit, l.name, most, strings.Join(j.ID.Inputs, ", ")), "correct the bit in the rig file")
			}
		}
	}
	records := make([]sheet.InterlockRecord, len(all))
	for i, l := range all {
		records[i] = sheet.InterlockRecord{Input: l.name, Kind: l.kind, Bit: int(l.bit)}
	}
	j.showInterlocks(records)
	if err := j.seenAtRest(all, records); err != nil {
		return "", err
	}
	for i, l := range all {
		for _, p := range l.open {
			stop, err := j.stoppedBy(l, p)
			if err != nil {
				return "", j.keepInterlocks(records, err)
			}
			records[i].Creep = append(records[i].Creep, stop)
			j.showInterlocks(records)
		}
	}
	who, err := j.initials("Initials of who saw the shaft stop by each input")
	if err != nil {
		return "", j.keepInterlocks(records, err)
	}
	longest, turns := 0.0, 0.0
	for i := range records {
		for k := range records[i].Creep {
			s := &records[i].Creep[k]
			s.Witness = who
			longest, turns = math.Max(longest, *s.StopS), math.Max(turns, math.Abs(*s.StopTurns))
		}
		records[i].Passed = ptr(true)
	}
	if err := j.keepInterlocks(records, nil); err != nil {
		return "", err
	}
	finding := fmt.Sprintf("%d inputs seen in every state, the board stopped by each; at most %.2f s and %.2f turns from creep to rest", len(all), longest, turns)
	j.check("interlock", "board", true, finding)
	j.h.Check(safety.CheckInterlock, true)
	return result(finding), nil
}

// seenAtRest asks for every state of every input and waits for the board to report
// it.
func (j *Job) seenAtRest(all []lever, records []sheet.InterlockRecord) error {
	note := func(i int, p pose, at time.Duration) {
		records[i].Rest = append(records[i].Rest, sheet.InputSeen{State: p.words, Time: j.h.Wall().Format(time.RFC3339), SessionS: at.Seconds()})
		j.showInterlocks(records)
	}
	for i, l := range all {
		for _, p := range append(append([]pose(nil), l.open...), l.rest) {
			at, err := j.h.Input(Question{Kind: AskInput, Text: fmt.Sprintf("Put %s: %s", l.name, p.words), Set: p.set,
				Detail: []string{"The drive is off and disarmed. The step goes on by itself once the board reports it."}})
			if err != nil {
				return err
			}
			note(i, p, at)
		}
	}
	who, err := j.initials("Initials of who worked the inputs and saw this table")
	if err != nil {
		return err
	}
	for i := range records {
		for k := range records[i].Rest {
			records[i].Rest[k].Witness = who
		}
	}
	return nil
}

// initials asks, at standstill, who was there.
func (j *Job) initials(text string) (string, error) {
	for {
		a, err := j.h.Ask(Question{Kind: AskText, Text: text, Default: j.opt.Operator})
		if err != nil {
			return "", err
		}
		if s := strings.TrimSpace(a.Text); s != "" && len(s) <= 40 {
			return s, nil
		}
	}
}

// stoppedBy runs at creep until somebody works the input, and says what stopped
// the shaft, in what time and angle.
func (j *Job) stoppedBy(l lever, p pose) (sheet.InterlockStop, error) {
	plan := excite.Creep(j.sizing(), safety.CheckInterlock, 20*time.Second)
	plan.Name = "interlock check: " + l.name + " " + p.words
	plan.Purpose = fmt.Sprintf("while the shaft creeps somebody puts %s: %s; the board has to stop it", l.name, p.words)
	r, err := j.runWith(StepInterlocks, plan, nil, p.set)
	if err != nil {
		return sheet.InterlockStop{}, err
	}
	tail, rested := j.rest()
	stop := sheet.InterlockStop{State: p.words, StoppedBy: "nobody", Cause: r.Cause.Words, TraceFile: r.File}
	if r.Reason == safety.EndTripped || r.Reason == safety.EndStopped && r.Cause.Code == safety.CodeEnabling {
		stop.StoppedBy = "laptop"
	}
	b := r.BoardStop
	byInput := b != nil && (b.Cause == protocol.CauseInterlock || b.Cause == protocol.CauseEStop)
	if byInput {
		stop.StoppedBy, stop.Cause = "board", b.Cause.String()
		j.measureStop(&stop, r, tail)
	}
	if err := j.backAgain(l, r); err != nil {
		return stop, err
	}
	finding := ""
	number := 783
	switch {
	case r.Reason == safety.EndDone:
		number, finding = 782, "the run ended by itself, the input was not worked"
	case r.Reason == safety.EndStopped && r.Cause.Code != safety.CodeEnabling:
		return stop, j.notDone(r) // the person stopped it
	case r.Reason != safety.EndTripped && r.Reason != safety.EndStopped:
		return stop, j.notDone(r)
	case !byInput && stop.StoppedBy == "laptop" && (r.Cause.Code == safety.CodeInterlock || r.Cause.Code == safety.CodeEnabling):
		finding = "the laptop saw the input and stopped the shaft, the board did not"
	case !byInput:
		finding = "it was stopped by something else: " + r.Cause.Words
	case !rested || stop.StopS == nil:
		finding = "the shaft did not come to rest, or too few samples say when"
	default:
		return stop, nil
	}
	j.check("interlock", "board", false, l.name+" "+p.words+": "+finding)
	j.h.Check(safety.CheckInterlock, false)
	remedy := "a board that does not judge its inputs is not to be relied on for them: mend its firmware or the wiring, then do it again"
	if number == 782 {
		remedy = "do it again, and work the input while the shaft creeps"
	}
	return stop, refuse(number, "interlock check: "+l.name, finding, remedy)
}

// Times of the wait for rest: a flywheel coasts for long.
const (
	restLook = 200 * time.Millisecond
	restMost = 4 * time.Minute
)

// rest collects samples until the counts have stood still for a while.
func (j *Job) rest() (all []protocol.Sample, ok bool) {
	for waited := time.Duration(0); waited < restMost; waited += restLook {
		s, err := j.h.Watch(restLook)
		if err != nil {
			return all, false
		}
		all = append(all, s...)
		if n := len(s); n > 0 && n < len(all) && s[n-1].Counts == all[len(all)-n-1].Counts && s[0].Counts == s[n-1].Counts {
			return all, true
		}
	}
	return all, false
}

// measureStop takes time and angle from the instant at which the board saw the
// cause to the last change of the counts, both on the board's own clock. The
// resolution is that of telemetry.
func (j *Job) measureStop(stop *sheet.InterlockStop, r Result, tail []protocol.Sample) {
	b := r.BoardStop
	stop.SpeedRadS = ptr(math.Abs(b.SpeedRadS))
	stop.OffS = ptr(float64(b.OffUS-b.SeenUS) * 1e-6)
	samples := make([]protocol.Sample, 0, len(r.Samples)+len(tail))
	for _, s := range r.Samples {
		samples = append(samples, s.Sample)
	}
	samples = append(samples, tail...)
	first := -1
	for i := len(samples) - 1; i >= 0; i-- {
		if int32(uint32(samples[i].BoardUS)-b.SeenUS) <= 0 {
			first = i
			break
		}
	}
	if first < 0 || first+1 >= len(samples) {
		return
	}
	from, last, at := samples[first], samples[first], uint32(0)
	for _, s := range samples[first+1:] {
		if s.Counts != last.Counts {
			at = uint32(s.BoardUS) - b.SeenUS
		}
		last = s
	}
	stop.StopS = ptr(float64(at) * 1e-6)
	stop.StopTurns = ptr(float64(last.Counts-from.Counts) * j.ID.RadPerCount() / (2 * math.Pi))
}

// backAgain has the input put back and the trip cleared.
func (j *Job) backAgain(l lever, r Result) error {
	if _, err := j.h.Input(Question{Kind: AskInput, Text: fmt.Sprintf("Put %s back: %s", l.name, l.rest.words), Set: l.rest.set,
		Detail: []string{"Nothing starts by it."}}); err != nil {
		return err
	}
	if r.Reason != safety.EndTripped {
		return nil
	}
	return j.h.ClearTrip(Question{Kind: AskEnter, Text: "Stopped by " + l.name + ", as asked. Acknowledge the trip, then reset it",
		Detail: []string{"Acknowledging says that it was seen and changes nothing. The reset clears it. Neither starts anything."}})
}

// keepInterlocks writes the table, one entry an input, also where it is not whole.
func (j *Job) keepInterlocks(records []sheet.InterlockRecord, cause error) error {
	for _, r := range records {
		if cause != nil {
			r.Passed = ptr(false)
		}
		if err := j.h.Keep("interlock", r.Input, r); err != nil && cause == nil {
			cause = err
		}
	}
	j.showInterlocks(records)
	return cause
}

func (j *Job) showInterlocks(records []sheet.InterlockRecord) {
	rows := make([]InterlockView, len(records))
	for i, r := range records {
		v := InterlockView{Name: r.Input, Bit: r.Bit}
		var seen []string
		for _, s := range r.Rest {
			seen = append(seen, s.State)
		}
		v.Seen = strings.Join(seen, ", ")
		var stops []string
		for _, s := range r.Creep {
			if s.StopS != nil {
				stops = append(stops, fmt.Sprintf("%s by the %s, %.2f s, %.2f turns", s.State, s.StoppedBy, *s.StopS, *s.StopTurns))
			}
		}
		v.Stop = strings.Join(stops, "; ")
		if r.Passed != nil {
			v.Passed = map[bool]string{true: "passed", false: "failed"}[*r.Passed]
		}
		rows[i] = v
	}
	j.h.Show(func(v *View) { v.Interlocks = rows })
}
