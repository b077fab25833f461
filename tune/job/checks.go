package job

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/excite"
	"gainwright/tune/sheet"
)

// doSign ramps each way until the first counts.
func (j *Job) doSign() (result, error) {
	j.firstGuess()
	r, err := j.run(StepSign, excite.Sign(j.sizing()), nil)
	if err != nil {
		return "", err
	}
	fwd, vf, okF := firstMotion(r.Samples, 1, 4)
	rev, vr, okR := firstMotion(r.Samples, -1, 4)
	two := j.Env.Reverse
	wrong := okF && fwd < 0 || okR && rev > 0 || r.Cause.Code == safety.CodeWrongWay
	var bad error
	switch {
	case wrong:
		bad = refuse(713, "sign check", "drive + gives speed −: motor leads or encoder channels are swapped; closed loop is refused",
			"power off, then swap the one that makes + turn as the arrow on the machine: the motor leads if + drive turns against the arrow, the encoder channels if it turns with it")
	case r.Reason != safety.EndDone:
		bad = j.notDone(r)
	case !okF || two && !okR:
		bad = refuse(714, "sign check", fmt.Sprintf("no counts up to %.3g V", float64(j.Env.SignVolts)),
			"is drive power on and the shaft free? If it turned and nothing counted, look at the encoder; else raise sign_volts_V in the rig file with a reason")
	}
	finding := fmt.Sprintf("starts at %.3g V forward, %.3g V reverse, counts follow the drive", vf, vr)
	if bad != nil {
		finding = bad.Error()
	}
	j.check("sign", "board", bad == nil, finding, startQuantities(vf, vr, okF, okR)...)
	j.h.Check(safety.CheckSign, bad == nil)
	if bad != nil {
		return "", bad
	}
	j.StartForward, j.StartReverse = vf, vr
	if !two {
		j.StartReverse = vf
	}
	return result(finding), nil
}

// firstGuess takes gain and time constant from the nameplate until something
// better is known.
func (j *Job) firstGuess() {
	if j.Gain == 0 {
		j.Gain = j.nameplateGain()
	}
}

// firstMotion finds where drive of one direction first moved the shaft by at
// least n counts from its rest: the signed motion that followed and the volts at
// the first of those counts.
func firstMotion(s []Sample, dir float64, n int64) (moved float64, volts float64, ok bool) {
	base, armed := int64(0), false
	started := 0.0
	for i := range s {
		v := float64(s[i].Volts) * dir
		if v <= 0 {
			if armed && ok {
				return moved, volts, true
			}
			base, armed = s[i].Counts, true
			continue
		}
		if !armed {
			base, armed = s[i].Counts, true
		}
		d := s[i].Counts - base
		// A count to and fro is the noise of an edge; the start is where the shaft
		// last stood within it.
		if abs64(d) <= 1 {
			started = v
		}
		if abs64(d) >= n && !ok {
			volts, ok = started, true
		}
		if ok {
			moved = float64(d)
		}
	}
	return moved, volts, ok
}

func abs64(v int64) int64 {
	if v < 0 {
		return -v
	}
	return v
}

// doStop has the stop key pressed at creep speed.
func (j *Job) doStop() (result, error) {
	r, err := j.creepForStop()
	if err != nil {
		return "", err
	}
	ok := r.Reason == safety.EndStopped && r.Cause.Code == safety.CodeAsked && r.Stop != nil && r.Started
	var bad error
	finding := ""
	switch {
	case ok:
		finding = "at creep: " + stopFinding(*r.Stop)
	case r.Reason == safety.EndDone:
		bad = refuse(715, "stop check", "the run ended by itself, no stop key was pressed", "do it again and press space while the shaft creeps")
	case r.Reason == safety.EndStopped:
		bad = refuse(715, "stop check", "stopped by "+r.Cause.Words, "do it again and press space while the shaft creeps")
	default:
		bad = j.notDone(r)
	}
	if bad != nil {
		finding = bad.Error()
	}
	var q []sheet.Quantity
	if r.Stop != nil {
		q = stopQuantities(*r.Stop)
	}
	j.check("stop at creep", "board", ok, finding, q...)
	j.h.Check(safety.CheckStop, ok)
	if bad != nil {
		return "", bad
	}
	j.roughModel(r)
	return result(finding), nil
}

// creepForStop runs at creep for the stop check. Where only the nameplate says what
// a volt gives, the shaft may come too near the creep ceiling: then what was seen
// says how much slower to creep, and it is offered again.
func (j *Job) creepForStop() (Result, error) {
	for try := 0; ; try++ {
		r, err := j.run(StepStop, excite.Creep(j.sizing(), safety.CheckStop, 20*time.Second), nil)
		quick := r.Reason == safety.EndTripped && (r.Cause.Code == safety.CodeSpeedAhead || r.Cause.Code == safety.CodeSpeed)
		if err != nil || !quick || try == creepTries {
			return r, err
		}
		w, v := 0.0, 0.0
		for _, s := range r.Samples {
			if x := math.Abs(float64(s.Speed)); x > w {
				w, v = x, float64(s.Volts)
			}
		}
		seen := j.Gain * creepSlower
		if free := v - 0.85*j.StartForward; free > 0 {
			seen = math.Max(seen, creepSlower*w/free)
		}
		j.Gain = seen
		if err := j.h.ClearTrip(Question{Kind: AskEnter, Text: "It crept too near its ceiling. Acknowledge the trip, then reset it; it creeps slower then",
			Detail: []string{"Acknowledging says that it was seen and changes nothing. The reset clears it. Neither starts anything."}}); err != nil {
			return r, err
		}
	}
}

// How often, and by how much, creep is made slower (our choice).
const (
	creepTries  = 3
	creepSlower = 1.3
)

func stopFinding(s StopSeen) string {
	return fmt.Sprintf("key to wire %.2f ms, wire to the board's answer %.2f ms", s.KeyToWire.Seconds()*1000, s.WireToBoard.Seconds()*1000)
}

// startQuantities is the drive at which the shaft first moved, each way that was
// seen.
func startQuantities(forward, reverse float64, okF, okR bool) (q []sheet.Quantity) {
	if okF {
		q = append(q, sheet.Quantity{Name: "starts forward at", Value: &forward, Unit: "V"})
	}
	if okR {
		q = append(q, sheet.Quantity{Name: "starts reverse at", Value: &reverse, Unit: "V"})
	}
	return q
}

func stopQuantities(s StopSeen) []sheet.Quantity {
	a, b := s.KeyToWire.Seconds()*1000, s.WireToBoard.Seconds()*1000
	return []sheet.Quantity{{Name: "key to wire", Value: &a, Unit: "ms"}, {Name: "wire to the board's answer", Value: &b, Unit: "ms"}}
}

// numberLife is how long a one-time number is good, by the protocol, and a little.
const numberLife = 2200 * time.Millisecond

// oldNumber sees that the board refuses to arm on a one-time number that has
// lapsed: one that takes it would take a line that was delayed or repeated.
func (j *Job) oldNumber() error {
	a, err := j.h.Request(protocol.VerbNonce, "")
	if err != nil {
		return err
	}
	if _, err := j.h.Watch(numberLife); err != nil {
		return err
	}
	_, err = j.h.Request(protocol.VerbArm, fmt.Sprintf("%s %04X", a.Field(0), j.LimitsCRC))
	var no *protocol.RefusedError
	switch {
	case errors.As(err, &no):
		j.check("old number", "board", true, "an arm on a one-time number that had lapsed was refused: "+no.Error())
		return nil
	case err != nil:
		return err
	}
	_, off := j.h.Request(protocol.VerbDisarm, "")
	finding := "the board armed on a one-time number that had lapsed"
	j.check("old number", "board", false, finding)
	return errors.Join(refuse(719, "silence check", finding, "such a board may arm on a delayed line: it is look-only until its firmware is mended"), off)
}

// doSilence goes silent at creep speed; the board must stop by itself.
func (j *Job) doSilence() (result, error) {
	if err := j.oldNumber(); err != nil {
		return "", err
	}
	plan := excite.Creep(j.sizing(), safety.CheckSilence, 4*time.Second)
	r, err := j.run(StepSilence, plan, nil)
	if err != nil {
		return "", err
	}
	if r.Judged == nil && r.Reason != safety.EndSilence {
		err := j.notDone(r)
		j.check("silence", "board", false, err.Error())
		return "", err
	}
	if r.Judged == nil || !r.Judged.Passed {
		cause := "the run ended before it was seen"
		if r.Judged != nil {
			cause = r.Judged.Words
		} else if r.Cause.Words != "" {
			cause = r.Cause.Words
		}
		j.check("silence", "board", false, cause)
		return "", refuse(716, "silence check", cause, "a board whose timeout has not been seen working is look-only: mend its firmware, or its heartbeat limit")
	}
	j.Silence = *r.Judged
	ms := r.Judged.SinceBeat.Seconds() * 1000
	finding := fmt.Sprintf("output off %.0f ms after the last heartbeat, on the board's clock; declared %.0f ms", ms, j.Env.BoardTimeout.Seconds()*1000)
	j.check("silence", "board", true, finding, sheet.Quantity{Name: "last heartbeat to output off", Value: &ms, Unit: "ms"})
	return result(finding), nil
}

// doLimits sets the board's speed ceiling low, provokes the trip and sets it
// back.
func (j *Job) doLimits() (result, error) {
	k := j.sizing()
	low := 0.3 * float64(j.Env.CreepMax)
	values := j.limitValues()
	values[protocol.LimSpeed] = low
	if err := j.holdLimits(values, safety.LimitWrite{At: j.h.Now()}); err != nil {
		return "", err
	}
	plan := excite.Creep(k, safety.CheckLimit, 3*time.Second)
	plan.SpeedMax = float64(j.Env.CreepMax)
	r, err := j.run(StepLimits, plan, nil)
	if err == nil && (r.Reason == safety.EndTripped || r.Reason == safety.EndStopped) {
		if e := j.h.ClearTrip(Question{Kind: AskEnter, Text: "The board has tripped. Acknowledge it, then reset it",
			Detail: []string{"Acknowledging says that it was seen and changes nothing. The reset clears it. Neither starts anything."}}); e != nil {
			err = e
		}
	}
	// Set back whatever came of it.
	if back := j.holdLimits(j.limitValues(), safety.LimitWrite{At: j.h.Now()}); back != nil {
		return "", errors.Join(err, back)
	}
	if err != nil {
		return "", err
	}
	l := r.BoardStop
	if l == nil || l.Cause != protocol.CauseSpeed {
		finding := "the board did not trip at its speed ceiling"
		if r.Cause.Words != "" {
			finding += ": " + r.Cause.Words
		}
		top := 0.0
		for _, s := range r.Samples {
			top = math.Max(top, math.Abs(float64(s.Speed)))
		}
		if top < low && r.Reason == safety.EndDone { // the board had nothing to trip on
			finding = fmt.Sprintf("the shaft came to %s, below the ceiling of %s that was set low: it turns slower than the rig file says", rpm(top), rpm(low))
			j.check("limit", "board", false, finding)
			return "", refuse(789, "limit check", finding, "look at voltage, highest speed and Ke in the rig file: is it the file of this motor?")
		}
		j.check("limit", "board", false, finding)
		return "", refuse(717, "limit check", finding, "a board that does not keep its limits is look-only")
	}
	finding := fmt.Sprintf("ceiling set to %s, tripped at %s, set back and read back", rpm(low), rpm(l.SpeedRadS))
	j.h.Check(safety.CheckLimit, true)
	j.check("limit", "board", true, finding, sheet.Quantity{Name: "trip speed", Value: &l.SpeedRadS, Unit: "rad/s"})
	return result(finding), nil
}

// check keeps a check in record and view.
func (j *Job) check(name, layer string, passed bool, finding string, q ...sheet.Quantity) {
	rec := sheet.CheckRecord{Check: name, Layer: layer, Passed: &passed, Measured: q, Finding: finding}
	j.Checks = append(j.Checks, rec)
	_ = j.h.Keep("check", name, rec)
	var views []CheckView
	for i, c := range j.Checks {
		if slices.ContainsFunc(j.Checks[i+1:], func(l sheet.CheckRecord) bool { return l.Check == c.Check }) {
			continue // made again since
		}
		state := "failed"
		if *c.Passed {
			state = "seen working"
		}
		views = append(views, CheckView{Name: c.Check, State: state, Detail: c.Finding})
	}
	j.h.Show(func(v *View) { v.Checks = views })
}
