package bench

import (
	"errors"
	"math"
	"os"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// interlocked is a job on the rig with an E-stop, a guard and an enabling switch,
// done up to before a step.
func interlocked(t *testing.T, before job.StepID, bend func(*simrig.Config)) (*Virtual, *job.Job, *sheet.Reader) {
	t.Helper()
	cfg, err := simrig.Load("../../testdata/rigs/interlocked.toml")
	if err != nil {
		t.Fatal(err)
	}
	if bend != nil {
		bend(&cfg)
	}
	text, err := os.ReadFile("../../testdata/rigs/interlocked.rig.toml")
	if err != nil {
		t.Fatal(err)
	}
	r, err := rig.Parse("interlocked.rig.toml", text)
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir() + "/sheet"
	v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
	rec, err := sheet.Create(dir, sheet.Header{Rig: r.Name, BoardID: cfg.Board.ID, Program: "test", Start: "2026-01-02T08:00:00Z", Simulated: true}, sheet.WithClock(v.Now))
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { rec.Close("ended", "test") })
	j := job.New(v.Hands(rec), job.Options{Rig: r, RigText: text, Version: "test", Operator: "AB"})
	for _, s := range job.Path {
		if s.ID == before {
			break
		}
		if s.Optional {
			continue
		}
		if err := j.Do(s.ID); err != nil {
			t.Fatalf("%s: %v", s.ID, err)
		}
	}
	reader, _ := sheet.Open(dir)
	return v, j, reader
}

func reopen(t *testing.T, r *sheet.Reader) *sheet.Reader {
	t.Helper()
	again, _ := sheet.Open(r.Dir())
	return again
}

// Every input is seen in all its states at rest, witnessed, and stops the shaft at
// creep; time and angle are held against the simulated shaft itself.
func TestInterlocksAreSeenAtRestAndInMotion(t *testing.T) {
	v, j, r := interlocked(t, job.StepInterlocks, nil)
	from, opened, angle := time.Duration(0), false, 0.0
	var times, turns []float64
	was := 0.0
	v.each = func() {
		open := v.s.run != nil && v.s.run.provoked
		th := v.rig.Angle()
		if open && !opened {
			from, angle = v.Now()-tickEach, was // it was opened at the end of the tick before
		}
		if opened = open || opened && th != was; !opened && from > 0 {
			times, turns = append(times, (v.Now()-from).Seconds()), append(turns, (th-angle)/(2*math.Pi))
			from = 0
		}
		was = th
	}
	if err := j.Do(job.StepInterlocks); err != nil {
		t.Fatal(err)
	}
	r = reopen(t, r)
	want := map[string][]string{"E-stop": {"open", "in its working position"}, "guard": {"open", "in its working position"}, "enabling switch": {"released", "pressed through", "held in the middle"}}
	n := 0
	for _, l := range r.Find(sheet.KindInterlock, "") {
		var rec sheet.InterlockRecord
		if err := r.JSON(l, &rec); err != nil {
			t.Fatal(err)
		}
		var states []string
		for _, s := range rec.Rest {
			states = append(states, s.State)
			if s.Witness != "AB" || s.Time == "" {
				t.Errorf("%s: %+v is not witnessed", rec.Input, s)
			}
		}
		if strings.Join(states, "|") != strings.Join(want[rec.Input], "|") || rec.Passed == nil || !*rec.Passed {
			t.Errorf("%s: states %v, passed %v", rec.Input, states, rec.Passed)
		}
		for _, s := range rec.Creep {
			if s.StoppedBy != "board" || s.Witness != "AB" || s.StopS == nil || s.TraceFile == "" {
				t.Fatalf("%s: %+v", rec.Input, s)
			}
			// The simulated shaft is looked at every 10 ms, the encoder steps by 1/2000 turn.
			if n < len(times) && (math.Abs(*s.StopS-times[n]) > 0.03 || math.Abs(*s.StopTurns-turns[n]) > 0.08) {
				t.Errorf("%s %s: %.3f s and %.3f turns, the shaft itself took %.3f s and %.3f turns", rec.Input, s.State, *s.StopS, *s.StopTurns, times[n], turns[n])
			}
			n++
		}
	}
	if n != 4 || len(times) != 4 {
		t.Errorf("%d stops in the record, %d seen at the shaft, want 4: guard, E-stop and two of the enabling switch", n, len(times))
	}
	if !v.s.core.State().Checks.Has(safety.CheckInterlock) {
		t.Error("the limiter was not told")
	}
}

// A board that reports its inputs and does not judge them is found out, and nothing
// but checks can be armed on it.
func TestABoardThatIgnoresItsInputsIsRefused(t *testing.T) {
	v, j, r := interlocked(t, job.StepInterlocks, func(c *simrig.Config) {
		c.Faults = append(c.Faults, simrig.FaultSpec{Kind: simrig.FaultIgnoresInputs})
	})
	err := j.Do(job.StepInterlocks)
	no, ok := errors.AsType[*job.RefusedError](err)
	if !ok || no.Number != 783 || !strings.Contains(no.Cause, "laptop") {
		t.Fatalf("error %v, want refusal 783: the laptop stopped it", err)
	}
	if causeOf(err) != simrig.FaultIgnoresInputs {
		t.Errorf("cause %q", causeOf(err))
	}
	for _, s := range v.s.core.Envelope().Missing(v.s.core.State(), safety.Plan{}) {
		if s == safety.CheckInterlock {
			return
		}
	}
	_ = r
	t.Error("a run that is no check could be armed")
}

// Letting the enabling switch go in a run stops it and ends disarmed, with nothing
// to acknowledge; the board is asked to clear what it latched.
func TestLettingTheEnablingSwitchGoStops(t *testing.T) {
	for _, set := range [][]job.InputBit{{{Bit: 2}}, {{Bit: 2}, {Bit: 3}}} {
		v, j, _ := interlocked(t, job.StepBreakaway, nil)
		let := time.Duration(0)
		v.each = func() {
			st := v.s.core.State()
			if let == 0 && st.Phase == safety.Running && v.Now()-st.RunAt > time.Second {
				WorkInputs(v.rig, set)
				let = v.Now()
			}
			if let > 0 && v.Now()-let > 2*time.Second {
				WorkInputs(v.rig, []job.InputBit{{Bit: 2, Working: true}, {Bit: 3, Working: true}})
			}
		}
		err := j.Do(job.StepBreakaway)
		no, ok := errors.AsType[*job.RefusedError](err)
		if !ok || no.Number != int(safety.CodeEnabling) {
			t.Fatalf("%v: %v", set, err)
		}
		if st := v.s.core.State(); st.Phase != safety.Disarmed {
			t.Errorf("%v: ends %v", set, st.Phase)
		}
		v.run(4 * time.Second)
		v.each = nil
		if err := j.Do(job.StepBreakaway); err != nil {
			t.Errorf("%v: with the switch held again: %v", set, err)
		}
	}
}

// A line of the checklist that is not ticked keeps everything from moving.
func TestAnUntickedChecklistKeepsAllFromMoving(t *testing.T) {
	v, j, r := interlocked(t, job.StepSign, nil)
	v.op.says = func(q *job.Question) *job.Answer {
		if q.Text == "glasses on" {
			return &job.Answer{}
		}
		return nil
	}
	err := j.Do(job.StepSign)
	if no, ok := errors.AsType[*job.RefusedError](err); !ok || no.Number != 784 {
		t.Fatalf("error %v, want refusal 784", err)
	}
	if on := v.rig.Extremes().PoweredS; on != 0 {
		t.Errorf("the drive was on for %v s", on)
	}
	var rec sheet.ChecklistRecord
	if err := reopen(t, r).LastJSON(sheet.KindEvent, sheet.NameChecklist, &rec); err != nil || rec.Ticked || len(rec.Lines) != 2 || rec.Lines[1].Answer != "no" {
		t.Errorf("record %+v, %v", rec, err)
	}
	v.op.says = nil
	if err := j.Do(job.StepSign); err != nil {
		t.Errorf("with every line ticked: %v", err)
	}
}

// A run stopped by key is asked about, and the answer is kept.
func TestTheReasonOfAStopIsKept(t *testing.T) {
	v, j, r := interlocked(t, job.StepBreakaway, nil)
	v.op.says = func(q *job.Question) *job.Answer {
		if q.Kind == job.AskChoice {
			return &job.Answer{Text: q.Options[1]}
		}
		return nil
	}
	v.each = func() {
		if st := v.s.core.State(); st.Phase == safety.Running && v.Now()-st.RunAt > time.Second {
			v.s.core.Stop(v.Now(), safety.ByStopKey)
		}
	}
	if err := j.Do(job.StepBreakaway); err == nil {
		t.Fatal("a run that was stopped counts as done")
	}
	var rec sheet.WhyStoppedRecord
	if err := reopen(t, r).LastJSON(sheet.KindEvent, sheet.NameWhyStopped, &rec); err != nil || rec.Reason != "a noise" || rec.Run == "" || rec.Time == "" {
		t.Errorf("record %+v, %v", rec, err)
	}
}

// A press moves the shaft by one inch of the rig file and no farther than twice
// that, three times; the shaft itself is asked.
func TestInchesAreBoundedAtTheShaft(t *testing.T) {
	for _, way := range []string{"positive", "negative"} {
		v, j, _ := interlocked(t, job.StepBreakaway, nil)
		v.op.says = func(q *job.Question) *job.Answer {
			if q.Kind == job.AskChoice {
				return &job.Answer{Text: way}
			}
			return nil
		}
		var starts []float64
		n := 0
		v.each = func() {
			if st := v.s.core.State(); st.Inches > n {
				n = st.Inches
				starts = append(starts, v.rig.Angle())
			}
		}
		if err := j.Do(job.StepInch); err != nil {
			t.Fatal(err)
		}
		starts = append(starts, v.rig.Angle())
		if n != inchesMade {
			t.Fatalf("%d inches, want %d", n, inchesMade)
		}
		for i := range n {
			moved := (starts[i+1] - starts[i]) / (2 * math.Pi)
			if way == "negative" {
				moved = -moved
			}
			if moved < 0.02 || moved > 2*v.s.core.Envelope().InchTurns {
				t.Errorf("%s inch %d moved %.3f turns, the rig file allows %.3f and as much again", way, i+1, moved, v.s.core.Envelope().InchTurns)
			}
		}
		if st := v.s.core.State(); st.Phase != safety.Disarmed {
			t.Errorf("ends %v", st.Phase)
		}
	}
}

// A board whose output off is not what the rig was laid out for is refused.
func TestOutputOffHasToBeTheRigs(t *testing.T) {
	cfg, err := simrig.Load("../../testdata/rigs/interlocked.toml")
	if err != nil {
		t.Fatal(err)
	}
	cfg.Driver.Off = "short"
	text, err := os.ReadFile("../../testdata/rigs/interlocked.rig.toml")
	if err != nil {
		t.Fatal(err)
	}
	r, err := rig.Parse("interlocked.rig.toml", text)
	if err != nil {
		t.Fatal(err)
	}
	v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
	j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text})
	if err := j.Do(job.StepPort); err != nil {
		t.Fatal(err)
	}
	if no, ok := errors.AsType[*job.RefusedError](j.Do(job.StepIdentity)); !ok || no.Number != 785 {
		t.Errorf("error %v, want refusal 785", no)
	}
}

// A battery under 15 % that does not charge is said before the first arm and asked
// about once; the plan says what holds for sleep.
func TestALowBatteryIsSaidBeforeArming(t *testing.T) {
	v, j, r := interlocked(t, job.StepBreakaway, nil)
	share, asked, goOn := 0.09, 0, false
	v.s.laptop = func() job.Laptop { return job.Laptop{System: "linux", Battery: &share, Told: true} }
	v.op.says = func(q *job.Question) *job.Answer {
		if strings.Contains(strings.Join(q.Detail, " "), "9 % and not charging") {
			asked++
			return &job.Answer{Yes: goOn}
		}
		return nil
	}
	if err := j.Do(job.StepBreakaway); !errors.Is(err, job.ErrDeclined) || asked != 1 {
		t.Fatalf("asked %d times, error %v", asked, err)
	}
	goOn = true
	notes := ""
	v.each = func() {
		if v.s.run != nil {
			notes = strings.Join(v.s.run.spec.View.Notes, "; ")
		}
	}
	if err := j.Do(job.StepBreakaway); err != nil || asked != 2 {
		t.Fatalf("asked %d times, error %v", asked, err)
	}
	if !strings.Contains(notes, "9 %") || !strings.Contains(notes, "sleep cannot be held off here") {
		t.Errorf("beside the plan: %q", notes)
	}
	if err := j.Do(job.StepStaircase); err != nil || asked != 2 {
		t.Errorf("asked %d times, error %v", asked, err)
	}
	if n := len(reopen(t, r).Find(sheet.KindEvent, "laptop")); n != 2 {
		t.Errorf("%d answers are kept, want 2", n)
	}
	if !active(v.s.view.Alarms, "battery") {
		t.Error("no alarm stands for it")
	}
	share = 0.8
	if err := j.Do(job.StepStep); err != nil {
		t.Fatal(err)
	}
	if active(v.s.view.Alarms, "battery") {
		t.Error("the alarm stays with a battery at 80 %")
	}
}

// An alarm goes through the states of ISA-18.2 and IEC 62682: unacknowledged,
// acknowledged, or returned while nobody has seen it; a trip is never shelved.
func TestAlarmsHaveTheStandardStates(t *testing.T) {
	v, _, _ := interlocked(t, job.StepSign, nil)
	s := v.s
	state := func(id string) job.AlarmView {
		for i := len(s.view.Alarms) - 1; i >= 0; i-- {
			if s.view.Alarms[i].ID == id {
				return s.view.Alarms[i]
			}
		}
		return job.AlarmView{}
	}
	fail := func() { s.core.Do(safety.TapeFailed{At: s.now, Why: "disk full"}) }
	back := func() { s.core.Do(safety.TapeBack{At: s.now}) }
	for _, c := range []struct {
		do      func()
		want    job.AlarmState
		flashes bool
	}{
		{fail, job.Unacknowledged, true},
		{back, job.ReturnedUnacknowledged, true},
		{s.acknowledged, job.NormalAgain, false},
		{fail, job.Unacknowledged, true},
		{func() { s.intent(job.Acknowledge{}) }, job.Acknowledged, false},
		{back, job.NormalAgain, false},
	} {
		c.do()
		v.run(30 * time.Millisecond)
		if a := state("record"); a.State != string(c.want) || a.Flashes() != c.flashes {
			t.Errorf("%q, flashes %v; want %q, %v", a.State, a.Flashes(), c.want, c.flashes)
		}
	}
	fail()
	v.run(30 * time.Millisecond)
	s.intent(job.Shelve{ID: "record"})
	if a := state("record"); a.Shelved != job.NotShelved {
		t.Error("shelved without a reason")
	}
	s.intent(job.Shelve{ID: "record", Reason: "another stick comes"})
	if a := state("record"); a.Shelved != job.ShelvedForATime || a.Flashes() || a.Why == "" {
		t.Errorf("%+v", a)
	}
	v.run(shelfTime + time.Second)
	if a := state("record"); a.Shelved != job.NotShelved || !a.Flashes() {
		t.Errorf("after its time on the shelf: %+v", a)
	}
	s.intent(job.Shelve{ID: "record", Reason: "no disk today", OutOfService: true})
	v.run(shelfTime + time.Second)
	if a := state("record"); a.Shelved != job.OutOfService {
		t.Errorf("back by itself from out of service: %+v", a)
	}
	back()
	s.core.Do(safety.Panicked{At: s.now, Why: "test"})
	v.run(30 * time.Millisecond)
	s.intent(job.Shelve{ID: "trip", Reason: "not now"})
	if a := state("trip"); !a.Active || a.Shelved != job.NotShelved || a.MayShelve {
		t.Errorf("a trip: %+v", a)
	}
	v.run(time.Second)
	s.intent(job.Acknowledge{})
	v.run(30 * time.Millisecond)
	if a := state("trip"); a.State != string(job.Acknowledged) || s.core.State().Phase != safety.Tripped {
		t.Errorf("an acknowledgement: %q, %v", a.State, s.core.State().Phase)
	}
	s.intent(job.ResetTrip{})
	v.run(30 * time.Millisecond)
	if a := state("trip"); a.State != string(job.NormalAgain) {
		t.Errorf("a reset leaves %q", a.State)
	}
}
