package bench

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"time"

	"gainwright/link/simrig"
	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// moment is when a fault comes.
type moment string

// The moments of a trial.
const (
	atRest   moment = "disarmed, at rest"
	armed    moment = "armed"
	counting moment = "count-down"
	inVolts  moment = "running, volts" // staircase, at more than half of the speed that is asked later
	inLoop   moment = "running, closed loop"
)

// fault is one row of the table: what goes wrong, where, when.
type faultCase struct {
	name  string
	where string // board, rig, wire, console, laptop, operator
	when  moment
	do    func(t *trial, v *Virtual)
	// want is the number of the cause that has to be told first: the limiter's, or
	// 0 where nothing has to stop.
	want []safety.Code
	// goesOn says that nothing has to stop: the run is to come to its end.
	goesOn bool
	style  safety.StopStyle
}

// TrialRow is what became of one fault.
type TrialRow struct {
	Number    int      `json:"n"`
	Fault     string   `json:"fault"`
	Where     string   `json:"where"`
	When      string   `json:"when"`
	StoppedBy string   `json:"stopped_by"` // the layer
	Cause     string   `json:"cause"`      // the first that was told, with its number
	OffMS     *float64 `json:"off_ms"`     // from the fault to output off, as the rig knows it; null: it was off already
	RestMS    *float64 `json:"rest_ms"`    // from the fault to rest
	Inside    bool     `json:"inside"`     // the rig saw no limit of its nameplate passed by more than Slack
	Worst     string   `json:"worst"`      // the largest excursion, "" if none
	Screen    string   `json:"screen"`     // what the top lines say 0.1 s after the output is off, else 0.4 s after the fault
	Record    string   `json:"record"`     // what the record holds of the run
	Held      int      `json:"held_bytes"` // of lines not finished, when it was over: does not grow
	Bad       string   `json:"bad,omitempty"`
}

// trial is one fault at work on a virtual bench. A nil trial does nothing.
type trial struct {
	c        faultCase
	begun    time.Duration // when the fault came; 0: not yet
	off      time.Duration
	rest     time.Duration
	moved    bool             // the shaft turned when the fault came
	on       bool             // the output was on when the fault came
	before   *safety.RunEnded // the run that ended last before the fault
	screen   string
	cause    safety.Cause
	boardOff bool          // the output did not go off because a cut had come
	cutAt    time.Duration // when the newest cut reached the board
	uncut    bool          // the fault is that cuts do nothing
	now      time.Duration
	dead     bool // this program is gone
	frozen   bool // frames no longer reach the screen
	stuck    time.Duration
	rx, tx   func([]byte) []byte
	delayed  []delayed
}

type delayed struct {
	due  time.Duration
	data []byte
}

// after is how long a trial looks on once the fault has come: longer than an arm
// takes to lapse where that is what is looked at.
const after = 6 * time.Second

// cutWorks is how soon after a cut has come a board's output is off.
const cutWorks = 5 * time.Millisecond

// step is called at every quantum. It reports true where the console is gone and
// only the rig goes on.
func (t *trial) step(v *Virtual) (gone bool) {
	now := v.s.now
	t.now = now
	if t.begun == 0 {
		if t.due(v) {
			t.begun, t.before = now, v.s.lastEnd
			t.on, t.moved = v.rig.Powered(), math.Abs(v.rig.Speed()) > 1
			v.budget = now + after
			if t.c.when == armed && t.c.do == nil {
				v.budget += time.Minute
			}
			if t.c.do != nil {
				t.c.do(t, v)
			}
		}
	} else {
		t.watch(v)
	}
	if t.dead {
		v.rig.Advance(now)
		v.rig.Output()
	}
	return t.dead
}

// due says whether the moment has come.
func (t *trial) due(v *Virtual) bool {
	st := v.s.core.State()
	r := v.s.run
	inRun := func(step string, after time.Duration) bool {
		return st.Phase == safety.Running && r != nil && r.spec.View.Name == step && r.started && v.s.now-r.begun > after
	}
	switch t.c.when {
	case atRest:
		return st.Phase == safety.Disarmed && r != nil && r.spec.View.Name == "staircase" && !v.rig.Powered()
	case armed:
		return st.Phase == safety.Armed && r != nil && r.spec.View.Name == "staircase" && v.s.now-st.ArmedAt > 500*time.Millisecond
	case counting:
		return st.Phase == safety.CountDown && r != nil && r.spec.View.Name == "staircase" && v.s.now-st.CountedAt > time.Second
	case inVolts:
		return inRun("staircase", time.Second) && v.rig.Speed() > 60
	case inLoop:
		return inRun("verify", 700*time.Millisecond) && v.rig.Speed() > 60
	}
	return false
}

// watch follows the rig after the fault.
func (t *trial) watch(v *Virtual) {
	now := v.s.now
	if t.off == 0 && t.on && !v.rig.Powered() {
		t.off, t.boardOff = now, t.uncut || t.cutAt == 0 || now-t.cutAt > cutWorks
	}
	if t.rest == 0 && t.moved && math.Abs(v.rig.Speed()) < 0.5 {
		t.rest = now
	}
	if t.dead {
		return
	}
	if t.cause.Code == 0 {
		if st := v.s.core.State(); st.Phase == safety.Tripped {
			t.cause = st.Trip.Cause
		} else if e := v.s.lastEnd; e != nil && e != t.before {
			t.cause = e.Cause
		}
	}
	seen := now-t.begun >= 2*time.Second || !t.on && now-t.begun >= 400*time.Millisecond || t.off > 0 && now-t.off >= 100*time.Millisecond
	if t.screen == "" && seen {
		t.screen = screenWords(v.s.snapshot())
	}
}

// screenWords is what the top lines of the screen say.
func screenWords(v *job.View) string {
	motion := "shaft STILL"
	switch {
	case v.Drive.Unknown:
		motion = "motion NOT KNOWN"
	case v.Drive.Moving:
		motion = "shaft MOVES"
	}
	words := []string{v.Drive.Phase, motion, "link " + string(v.Link.State)}
	if v.Drive.Trip != "" {
		words = append(words, v.Drive.Trip)
	} else if v.Refusal != nil {
		words = append(words, fmt.Sprintf("%s: %s (%d)", v.Refusal.What, v.Refusal.Cause, v.Refusal.Number))
	} else if v.Live != nil && v.Live.Ended != "" {
		words = append(words, "ended: "+v.Live.Ended)
	}
	return strings.Join(words, " | ")
}

func (t *trial) toBoard(b []byte) []byte {
	if t == nil {
		return b
	}
	if t.begun > 0 && t.tx != nil {
		b = t.tx(b)
	}
	if t.begun > 0 && bytes.IndexByte(b, protocol.Cut) >= 0 {
		t.cutAt = t.now
	}
	return b
}

func (t *trial) fromBoard(b []byte) []byte {
	if t == nil || t.begun == 0 || t.rx == nil {
		return b
	}
	return t.rx(b)
}

// heldUp says that this program gets no time.
func (t *trial) heldUp(now time.Duration) bool { return t != nil && now < t.stuck }

// lease tells the limiter of a frame that reached the screen.
func (t *trial) lease(v *Virtual) {
	if t != nil && !t.frozen {
		v.s.core.Do(safety.Lease{At: v.s.now})
	}
}

// run carries out one trial on a rig of its own and returns its row.
func (c faultCase) run(cfg simrig.Config, dir string) (TrialRow, error) {
	row, _, err := c.layered(cfg, dir, BothLayers)
	return row, err
}

// layered is run with the limiters that layers names; it also returns what the
// rig saw.
func (c faultCase) layered(cfg simrig.Config, dir string, layers Layers) (TrialRow, simrig.Extremes, error) {
	row := TrialRow{Fault: c.name, Where: c.where, When: string(c.when), Inside: true}
	r, text, err := RigOf(cfg)
	if err != nil {
		return row, simrig.Extremes{}, err
	}
	v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 5, 8, 0, 0, 0, time.UTC))
	record, err := sheet.Create(dir, sheet.Header{Rig: r.Name, BoardID: cfg.Board.ID, Program: "trial", Start: v.start.Format(time.RFC3339), Simulated: true}, sheet.WithClock(v.Now))
	if err != nil {
		return row, simrig.Extremes{}, err
	}
	j := job.New(layers.hands(v.Hands(record), c.style), job.Options{Rig: r, RigText: text, Version: "trial", Seed: 7})
	until := job.StepStaircase
	if c.when == inLoop {
		until = job.StepVerify
	}
	for _, p := range job.Path {
		if p.Optional || p.ID == job.StepFound {
			continue
		}
		if p.ID == until {
			break
		}
		if err := j.Do(p.ID); err != nil {
			return row, simrig.Extremes{}, fmt.Errorf("the job does not come as far as the fault: %w", err)
		}
	}
	if !layers.Board {
		v.rig.Inject(simrig.FaultUnjudged, 0)
	}
	t := &trial{c: c}
	v.trial, v.op.attends = t, true
	v.op.leaves = c.when == armed && c.do == nil
	_ = j.Do(until)
	for t.begun > 0 && v.s.now < v.budget { // the job gave up; the rig goes on
		v.step()
	}
	if t.begun == 0 {
		return row, simrig.Extremes{}, fmt.Errorf("the moment %q never came", c.when)
	}
	v.trial = nil
	_ = record.Close("trial", c.name)
	t.fill(&row, v, dir)
	return row, v.rig.Extremes(), nil
}

// fill completes the row.
func (t *trial) fill(row *TrialRow, v *Virtual, dir string) {
	ms := func(at time.Duration) *float64 {
		if at == 0 {
			return nil
		}
		return sheet.Known(float64((at - t.begun).Microseconds()) / 1000)
	}
	row.OffMS, row.RestMS = ms(t.off), ms(t.rest)
	row.Cause = t.cause.String()
	row.Screen = t.screen
	if t.dead {
		row.Screen = "nothing: this program is gone"
	}
	switch {
	case !t.on:
		row.StoppedBy = "the output was off"
	case t.off == 0:
		row.StoppedBy = "nothing"
	case t.c.goesOn && t.cause.Code == 0:
		row.StoppedBy = "nothing had to stop: the run went on to its end"
	case t.boardOff:
		row.StoppedBy = "board"
	default:
		row.StoppedBy = "console"
	}
	row.Inside, row.Worst = inside(v.rig.Extremes(), Slack)
	row.Held = v.s.core.Pending()
	row.Record = recordWords(dir)
	row.Bad = t.verdict(row)
}

// Slack is the share by which a limit may be passed before the limiter that judges
// it has cut: it is judged on samples, and the winding and the shaft go on until
// the output is off.
const Slack = 0.1

func inside(e simrig.Extremes, slack float64) (ok bool, worst string) {
	ok = true
	most := 1.0
	for _, x := range e.Violations {
		ratio := x.Worst / x.Limit
		ok = ok && ratio <= 1+slack
		if ratio > most {
			most, worst = ratio, fmt.Sprintf("%s %.3g of %.3g", x.What, x.Worst, x.Limit)
		}
	}
	return ok, worst
}

// verdict says what is wrong with a row, "" if nothing.
func (t *trial) verdict(row *TrialRow) string {
	switch {
	case t.c.goesOn && t.cause.Code != 0:
		return "stopped and should have gone on"
	case !t.c.goesOn && t.on && t.off == 0:
		return "the output is still on"
	case !row.Inside:
		return "a limit of the rig was passed"
	case row.Held > 2*protocol.LineMax:
		return fmt.Sprintf("%d bytes are held", row.Held)
	case t.dead || len(t.c.want) == 0:
		return ""
	}
	for _, w := range t.c.want {
		if t.cause.Code == w {
			return ""
		}
	}
	return fmt.Sprintf("the cause told first is %d, right would be %v", t.cause.Code, t.c.want)
}

// recordWords is what a record says of its last run.
func recordWords(dir string) string {
	r, problems := sheet.Open(dir)
	for _, p := range problems {
		if p.Kind == sheet.Changed || p.Kind == sheet.Unreadable {
			return "damaged: " + p.Text
		}
	}
	var run sheet.RunRecord
	if err := r.LastJSON(sheet.KindRun, "", &run); err != nil {
		return "no run"
	}
	words := run.Name + ": " + run.Reason
	if run.TraceFile != "" {
		words += ", with its trace"
	}
	return words
}

// Trials runs every fault of the table, on all cores, with records under dir ("":
// in a temporary folder that is removed), and hands the rows on in order.
func Trials(cfg simrig.Config, dir string, each func(TrialRow)) ([]TrialRow, error) {
	if dir == "" {
		tmp, err := os.MkdirTemp("", "gainwright-faults-")
		if err != nil {
			return nil, err
		}
		defer os.RemoveAll(tmp)
		dir = tmp
	}
	cases := faultCases()
	return inOrder(len(cases), func(i int) (TrialRow, error) {
		row, err := cases[i].run(cfg, filepath.Join(dir, fmt.Sprintf("%02d", i+1)))
		row.Number = i + 1
		if err != nil {
			err = fmt.Errorf("row %d, %s: %w", i+1, cases[i].name, err)
		}
		return row, err
	}, each)
}
