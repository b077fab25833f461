package job

import (
	"errors"
	"fmt"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/sheet"
)

// namePush is the entry of a push of the proposal; a revert has its own.
const namePush = "push"

// doPush writes the proposed set to the board's RAM: shown old to new, confirmed
// by a typed word, one atomic change, read back and compared bit for bit.
func (j *Job) doPush() (result, error) {
	if j.NewSet == nil {
		if j.NoChange {
			return "no adjustment: the gains stay as found", nil
		}
		return "", refuse(740, "push", "there is no proposal", "do the proposal first")
	}
	if err := j.keepHand(); err != nil {
		return "", err
	}
	return j.push(*j.NewSet, namePush)
}

// Revert pushes the as-found gains back.
func (j *Job) Revert() error {
	words, err := j.push(j.Found.Clone(), "revert")
	if err == nil {
		j.Pushed = false
		j.h.Say("as-found gains are running again: %s", words)
	}
	return err
}

func (j *Job) push(to GainSet, name string) (result, error) {
	word := j.Rig.Name
	rows := pushRows(j.Running, to)
	j.h.Show(func(v *View) { v.Push = &PushView{Rows: rows, Word: word, State: "proposed"} })
	a, err := j.h.Ask(Question{Kind: AskWord, Want: word, Text: fmt.Sprintf("To push these gains to the board's RAM, type the rig's name: %s", word),
		Detail: []string{"Nothing moves. The set is swapped in at once and read back; the stored gains stay as they are."}})
	if err != nil {
		return "", err
	}
	if a.Text != word {
		return "", refuse(741, name, fmt.Sprintf("typed was %q", a.Text), "type the rig's name exactly to push")
	}
	if err := j.h.Permit(safety.GainWrite{}); err != nil {
		return "", refuse(742, name, err.Error(), "wait until the shaft is at rest and disarmed, then push again")
	}
	old := j.Running.Clone()
	back, err := j.writeSet(to)
	same := err == nil && back.Equal(to)
	if !same {
		err = j.restore(old, name, err)
	}
	j.h.Wrote(true)
	rec := j.pushRecord(old, to, back, same, a.Text, err)
	if keep := j.h.Keep("push", name, rec); keep != nil && err == nil {
		err = keep
	}
	for i := range rows {
		rows[i].ReadBack = "-"
		if i < len(back.Bits) {
			rows[i].ReadBack = fmt.Sprintf("%08X", back.Bits[i])
		}
	}
	state := "read back equal"
	if err != nil {
		state = err.Error()
	}
	j.h.Show(func(v *View) { v.Push = &PushView{Rows: rows, Word: word, State: state} })
	if err != nil {
		return "", err
	}
	j.Running, j.Pushed = to.Clone(), true
	j.steps[StepFirstLoop].Status, j.steps[StepVerify].Status, j.steps[StepStore].Status = ToDo, ToDo, ToDo
	return result(fmt.Sprintf("%d gains running, read back equal", len(to.Bits))), nil
}

// restore puts all old values back after a push that did not come out equal.
func (j *Job) restore(old GainSet, name string, cause error) error {
	if cause == nil {
		cause = errors.New("what was read back differs from what was sent")
	}
	back, err := j.writeSet(old)
	if err != nil || !back.Equal(old) {
		j.Pushed = false
		return refuse(743, name, cause.Error()+"; the old gains could not be put back either",
			"do not close the loop: switch the board off and on, which brings the stored gains back, then read again")
	}
	return refuse(744, name, cause.Error(), "all old gains are back and read back equal; look at the link, then push again")
}

func (j *Job) pushRecord(old, to, back GainSet, same bool, typed string, err error) sheet.PushRecord {
	rec := sheet.PushRecord{Words: to.Words(), Identical: &same, Confirmed: typed}
	uMax := float64(j.Env.VoltsMax)
	rec.Old, _ = rawJSON(gainRecord(old, j.ID, uMax))
	rec.New, _ = rawJSON(gainRecord(to, j.ID, uMax))
	if len(back.Bits) == len(back.Names) {
		rec.ReadBack, _ = rawJSON(gainRecord(back, j.ID, uMax))
	}
	rec.Finding = "read back equal, bit for bit"
	if err != nil {
		rec.Finding = err.Error()
	}
	return rec
}

func pushRows(old, to GainSet) []PushRow {
	var rows []PushRow
	for i, n := range to.Names {
		rows = append(rows, PushRow{Name: n, Old: number(old.at(i)),
			New: number(to.at(i)), Unit: gainUnits[n]})
	}
	return rows
}

// doStore copies the running gains to lasting memory, has the board switched off
// and on, and reads both sets again.
func (j *Job) doStore() (result, error) {
	if err := j.h.Permit(safety.GainWrite{}); err != nil {
		return "", refuse(742, "store", err.Error(), "wait until the shaft is at rest and disarmed, then store again")
	}
	a, err := j.whenStill(protocol.VerbGain, fmt.Sprintf("store %04X", j.Running.CRC()))
	j.h.Wrote(err == nil)
	if err != nil {
		return "", err
	}
	want := j.Running.Clone()
	rec := sheet.StoreRecord{Stored: ptr(true), PowerCycled: ptr(false)}
	err = j.h.PowerCycle(Question{Kind: AskPower, Text: "Switch the board off and on again now",
		Detail: []string{"The program waits until the board speaks. It stays disarmed; nothing starts by itself.",
			"Writes to lasting memory so far: " + a.Field(1)}})
	if err == nil {
		rec.PowerCycled = ptr(true)
		err = j.reread(want)
	}
	same := err == nil
	rec.Identical = &same
	rec.ReRead, _ = rawJSON(gainRecord(j.Stored, j.ID, float64(j.Env.VoltsMax)))
	rec.Finding = "stored and running gains equal after a restart"
	if err != nil {
		rec.Finding = err.Error()
	}
	if keep := j.h.Keep("store", "gains", rec); keep != nil && err == nil {
		err = keep
	}
	if err != nil {
		return "", err
	}
	j.StoredOK = true
	j.forgetChecks("the board was restarted: to be seen again before the next run")
	j.h.Show(func(v *View) {
		if v.Push != nil {
			p := *v.Push
			p.Stored = "stored, equal after a restart"
			v.Push = &p
		}
	})
	return "stored; running and stored gains equal after a restart", nil
}

func (j *Job) reread(want GainSet) error {
	boots := j.ID.Boots
	if err := j.readIdentity(); err != nil {
		return err
	}
	if j.ID.Boots == boots {
		return refuse(745, "store", "the board has not restarted: its start counter is the same", "switch its power off and on")
	}
	if err := j.readGains(); err != nil {
		return err
	}
	if !j.Stored.Equal(want) || !j.Running.Equal(want) {
		return refuse(746, "store", "after the restart the board holds other gains than were stored", "its lasting memory is not to be trusted; note it on the card")
	}
	return nil
}

// doAsLeft keeps what the board holds now.
func (j *Job) doAsLeft() (result, error) {
	if err := j.readGains(); err != nil {
		return "", err
	}
	// A start brought the board's own limits back: leave it with the rig file's.
	if j.lookOnly() == "" {
		if err := j.holdLimits(j.limitValues(), safety.LimitWrite{}); err != nil {
			return "", err
		}
	}
	left, err := j.snapshot()
	if err != nil {
		return "", err
	}
	if j.Verified != nil {
		left.StepResponse = j.Verified.Step
	}
	j.LeftRec = left
	if err := j.h.Keep("as-left", "board", left); err != nil {
		return "", err
	}
	words := "as-left saved, gains as found"
	if !j.Running.Equal(j.Found) {
		words = "as-left saved, gains changed"
	}
	if !j.Running.Equal(j.Stored) {
		words += "; running and stored differ: a power cut brings the stored ones back"
	}
	return result(words), nil
}
