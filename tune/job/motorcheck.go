package job

import (
	"errors"
	"fmt"
	"strings"

	"gainwright/tune/sheet"
)

// Bounds of the motor check, and what an override leaves of the limits (our choice:
// a maker's ±10 % and a warm magnet stay inside, another winding or a wrong count
// does not).
const (
	motorLow, motorHigh = 0.7, 1.4
	overrideShare       = 0.5
)

// motorCheck refuses a motor that is not the one of the rig file, by its back-EMF
// constant. A typed reason goes on all the same, at reduced limits, and is kept.
func (j *Job) motorCheck() error {
	want := j.Rig.Motor.Ke
	ke, how := 0.0, "V − R·I over speed"
	if j.electric != nil {
		ke = j.electric.Ke
	}
	if ke <= 0 && j.Gain > 0 {
		ke, how = 1/j.Gain, "one over the gain"
	}
	if want <= 0 || ke <= 0 || j.overridden {
		return nil
	}
	ratio := ke / want
	if ratio > motorLow && ratio < motorHigh {
		return nil
	}
	cause := fmt.Sprintf("the rig file says Ke %.3g V·s/rad, this motor has %.3g (x%.2f, by %s): another winding, or counts taken x2 or x4", want, ke, ratio, how)
	a, err := j.h.Ask(Question{Kind: AskText, Override: true, Text: "This is not the motor of the rig file. A reason to go on all the same, at half of its limits?",
		Detail: []string{cause, "b refuses: take the rig file of this motor, or correct it."}})
	if err != nil && !errors.Is(err, ErrDeclined) {
		return err
	}
	reason := strings.TrimSpace(a.Text)
	if err != nil || reason == "" {
		return refuse(788, "motor check", cause, "take the rig file of this motor, or correct it; to go on all the same do the staircase again and type a reason")
	}
	j.overridden = true
	j.Env.VoltsMax *= overrideShare
	j.Env.SpeedMax *= overrideShare
	j.Env.CurrentMax *= overrideShare
	j.h.Say("motor check overridden: %s", reason)
	return j.h.Keep("event", "override", sheet.EventRecord{What: "motor check overridden, plans made for half of the limits", Detail: cause + "; reason: " + reason})
}
