package bench

import (
	"errors"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

func benchtop(t *testing.T) simrig.Config {
	t.Helper()
	cfg, err := simrig.Load(rigs + "/benchtop.toml")
	if err != nil {
		t.Fatal(err)
	}
	return cfg
}

// A job file is followed in its own order, sizes, targets and checklist, and what came
// of each of its steps stands in the record.
func TestAJobFileIsFollowed(t *testing.T) {
	least := 2.0
	o := &job.Order{Name: "short", Text: []byte("name = \"short\"\n"), Checklist: []string{"guard closed"}, Signs: []string{"done by", "witnessed"}, Overshoot: &least, MsMax: 1.3}
	for _, id := range []job.StepID{job.StepIdentity, job.StepCount, job.StepSign, job.StepStop, job.StepSilence, job.StepLimits, job.StepBreakaway, job.StepReversal,
		job.StepStaircase, job.StepStep, job.StepSecond, job.StepFit, job.StepDesign, job.StepAsLeft, job.StepCard} {
		o.Steps = append(o.Steps, job.Ordered{Step: id, Size: 1})
	}
	o.Steps[7].GoOn = true // before the staircase that it needs: refused, and the job goes on
	o.Steps[9].Size = 0.5
	d := DryRun{Config: benchtop(t), Seed: 1, Dir: filepath.Join(t.TempDir(), "sheet"), Program: "test", Start: time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC), Order: o}
	rep, err := d.Do()
	if err != nil || rep.Outcome != Accepted || rep.JobFile == nil {
		t.Fatalf("%v, %s: %s", err, rep.Outcome, rep.Reason)
	}
	if ms := float64(rep.Margins.Ms); ms > 1.301 {
		t.Errorf("Ms %g, the job file allows 1.3", ms)
	}
	r, problems := sheet.Open(d.Dir)
	if len(problems) > 0 {
		t.Fatal(problems)
	}
	var rec sheet.OrderRecord
	if err := r.LastJSON(sheet.KindJob, sheet.NameOutcome, &rec); err != nil {
		t.Fatal(err)
	}
	for i, s := range rec.Steps {
		want := "done"
		if job.StepID(s.Do) == job.StepReversal {
			want = "refused"
		}
		if s.Status != want || s.Do != string(o.Steps[i].Step) || s.Words == "" {
			t.Errorf("%+v, want %s", s, want)
		}
	}
	if !rec.Complete || !slices.Equal(rec.Signs, o.Signs) {
		t.Errorf("%+v", rec)
	}
	var list sheet.ChecklistRecord
	if err := r.LastJSON(sheet.KindEvent, sheet.NameChecklist, &list); err != nil || !list.Ticked || len(list.Lines) != 1 {
		t.Errorf("checklist: %v, %+v", err, list)
	}
	whole := func(size float64) (top float64) { // volts of the step test
		o.Steps[9].Size = size
		d.Dir = filepath.Join(t.TempDir(), "sheet")
		if _, err := d.Do(); err != nil {
			t.Fatal(err)
		}
		r, _ := sheet.Open(d.Dir)
		var run sheet.RunRecord
		if err := r.LastJSON(sheet.KindRun, "step-test", &run); err != nil {
			t.Fatal(err)
		}
		for _, q := range run.Extremes {
			if q.Name == "voltage" && q.Value != nil {
				top = *q.Value
			}
		}
		return top
	}
	if half, full := whole(0.5), whole(1); !(half < full-0.4) {
		t.Errorf("the step test goes to %g V at half its size and to %g V at the whole", half, full)
	}
	d.Order = &job.Order{Name: "other", Rig: "another", Steps: []job.Ordered{{Step: job.StepIdentity}}}
	d.Dir = filepath.Join(t.TempDir(), "sheet")
	if rep, err := d.Do(); err != nil || rep.Outcome != Refused {
		t.Errorf("a job file for another rig: %v, %s", err, rep.Outcome)
	}
}

// A look-only job reads and keeps, and neither arms nor writes, whatever is asked for.
func TestALookOnlyJobWritesNothing(t *testing.T) {
	o := &job.Order{Name: "look", LookOnly: true, Steps: []job.Ordered{{Step: job.StepIdentity}, {Step: job.StepAsLeft}, {Step: job.StepCard}}}
	d := DryRun{Config: benchtop(t), Seed: 1, Dir: filepath.Join(t.TempDir(), "sheet"), Program: "test", Start: time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC), Order: o}
	rep, err := d.Do()
	if err != nil || rep.Outcome != Accepted || !rep.JobFile.Complete || rep.Motor > 0 {
		t.Fatalf("%v, %s: %s, %g s of motion", err, rep.Outcome, rep.Reason, rep.Motor)
	}
	v := NewVirtual(simrig.New(d.Config, 1), d.Start)
	r, text, err := RigOf(d.Config)
	if err != nil {
		t.Fatal(err)
	}
	j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Order: o})
	for _, id := range []job.StepID{job.StepPort, job.StepIdentity} {
		if err := j.Do(id); err != nil {
			t.Fatal(err)
		}
	}
	if st := v.s.core.State(); !st.LookOnly || st.LimitsHeld {
		t.Errorf("look-only %v, limits held %v", st.LookOnly, st.LimitsHeld)
	}
	var no interface {
		Refusal() (int, string, string)
	}
	if err := v.s.core.Permit(safety.LimitWrite{At: v.Now()}); !errors.As(err, &no) {
		t.Errorf("limits may be written: %v", err)
	}
	if err := v.s.core.Permit(safety.GainWrite{At: v.Now()}); !errors.As(err, &no) {
		t.Errorf("gains may be written: %v", err)
	}
}

// The temperature of the room stands with what was found and with every run.
func TestAmbientIsKept(t *testing.T) {
	cfg := benchtop(t)
	r, text, err := RigOf(cfg)
	if err != nil {
		t.Fatal(err)
	}
	dir, room := filepath.Join(t.TempDir(), "sheet"), 19.5
	v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
	rec, err := sheet.Create(dir, sheet.Header{Rig: r.Name, BoardID: cfg.Board.ID, Program: "test", Start: "2026-01-02T08:00:00Z", Simulated: true}, sheet.WithClock(v.Now))
	if err != nil {
		t.Fatal(err)
	}
	j := job.New(v.Hands(rec), job.Options{Rig: r, RigText: text, Version: "test", Ambient: &room})
	for _, id := range []job.StepID{job.StepPort, job.StepIdentity, job.StepCount, job.StepSign} {
		if err := j.Do(id); err != nil {
			t.Fatal(err)
		}
	}
	if err := rec.Close("ended", "test"); err != nil {
		t.Fatal(err)
	}
	rd, _ := sheet.Open(dir)
	var found sheet.Snapshot
	var run sheet.RunRecord
	if err := rd.LastJSON(sheet.KindAsFound, "", &found); err != nil || found.AmbientDegC == nil || *found.AmbientDegC != room {
		t.Errorf("as found: %v, %v", err, found.AmbientDegC)
	}
	if err := rd.LastJSON(sheet.KindRun, "", &run); err != nil || run.AmbientDegC == nil || *run.AmbientDegC != room {
		t.Errorf("run: %v, %v", err, run.AmbientDegC)
	}
}
