package safetytest

import (
	"math"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

// done is what one call of Step put out, as far as it matters here.
type done struct{ stop, ramp, ended, silence, other, latched bool }

// effects judges what goes out.
func (r *Referee) effects(e safety.Event, out []safety.Effect) (did done) {
	stopped := false
	for _, x := range out {
		if _, log := x.(safety.Log); !log {
			did.other = true
		}
		switch x := x.(type) {
		case safety.SendStop:
			did.stop, stopped = true, true
			if r.ramping {
				r.ramping, r.endedAt = false, r.world // until then the ramp had the power
			}
		case safety.SendRampStop:
			did.ramp, stopped = true, true
		case safety.SendDrive:
			if stopped {
				r.blame("S1", "a drive value behind a stop")
			}
			r.drive(x)
		case safety.SendPattern:
			if stopped {
				r.blame("S1", "a pattern behind a stop")
			}
			r.patternSent(x)
		case safety.SendHeartbeat:
			if r.stage == idle && !r.ramping || stopped && !did.ramp {
				r.blame("S3", "a heartbeat for a board that is not armed")
			}
			if r.silentNow() && r.now-r.driveAt > r.plan.SilenceAt {
				r.blame("S7", "a heartbeat in the silence of the silence check")
			}
		case safety.SendArm:
			r.arm(e)
		case safety.SendReset:
			if r.stage != idle {
				r.blame("S8", "a reset of the board while armed")
			}
		case safety.WriteAllowed:
			r.write(e, x)
		case safety.TripLatched:
			did.latched = true
			r.tripped, r.acked, r.trippedAt = true, false, r.now
		case safety.RunEnded:
			did.ended, did.silence = true, x.Reason == safety.EndSilence
		case safety.CheckJudged:
			if _, word := e.(safety.OutputOff); x.Passed && !word || word && x.Passed != r.checks[x.Check] {
				r.blame("S7", "the silence check was judged %v", x.Passed)
			}
			if !x.Passed {
				delete(r.checks, x.Check)
			}
			r.lookOnly = r.lookOnly || !x.Passed
		}
	}
	return did
}

// drive judges one drive value. (S3, S4, S6)
func (r *Referee) drive(x safety.SendDrive) {
	if r.stage != going || r.now-r.startAt < r.env.CountDown {
		r.blame("S3", "a drive value without plan, arm, clear area, start key and count-down")
		return
	}
	if !r.drives {
		r.drives, r.driveAt = true, r.now
		r.counts0, r.counted = r.last.Counts, r.last.Has&protocol.HasCounts != 0
	}
	r.asked0 = x.Value
	top := least(r.plan.VoltsMax, float64(r.env.VoltsMax))
	if x.Mode == safety.ModeSpeed {
		top = least(r.plan.SpeedMax, float64(r.env.SpeedMax))
	}
	if x.Mode != r.plan.Segments[0].Mode || !(math.Abs(x.Value) <= top) || x.Value < 0 && !r.env.Reverse {
		r.blame("S4", "drive value %v %v is outside", x.Value, x.Mode)
	}
	if lo, hi := reach(r.plan); x.Value < math.Min(lo, 0) || x.Value > math.Max(hi, 0) {
		r.blame("S4", "drive value %v is outside its plan", x.Value)
	}
	if r.plan.SilenceAt > 0 && r.now-r.driveAt > r.plan.SilenceAt {
		r.blame("S7", "a drive value in the silence of the silence check")
	}
	if r.now-r.driveAt > r.plan.Duration() {
		r.blame("S4", "a drive value after the end of its plan")
	}
	if !r.heard || r.now-r.heardAt > r.env.TelemetryAgeMax {
		r.blame("S6", "a drive value without fresh telemetry")
	}
	if r.held && r.takenAt > 0 && r.now-r.takenAt > r.env.TelemetryAgeMax+60*time.Millisecond {
		r.blame("S6", "a drive value on telemetry that is really %v old", r.now-r.takenAt)
	}
}

// patternSent judges what the board's loop is asked to add to the last drive value.
// (S3, S4)
func (r *Referee) patternSent(x safety.SendPattern) {
	last := r.plan.Segments[max(0, len(r.plan.Segments)-1):]
	if r.stage != going || !r.drives || len(last) == 0 || x.Pattern != last[0].Pattern || r.patterns > 0 {
		r.blame("S3", "a pattern without a run that has it, or a second time")
		return
	}
	r.patterns++
	top := least(r.plan.VoltsMax, float64(r.env.VoltsMax))
	if lo, hi := x.Volts-x.Pattern.Amplitude, x.Volts+x.Pattern.Amplitude; x.Volts != r.asked0 || !(lo >= -top && hi <= top) || lo < 0 && !r.env.Reverse {
		r.blame("S4", "a pattern of %v V about %v V is outside", x.Pattern.Amplitude, x.Volts)
	}
}

func reach(p safety.Plan) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, s := range p.Segments {
		lo = math.Min(lo, math.Min(s.From, s.To))
		hi = math.Max(hi, math.Max(s.From, s.To))
	}
	return lo, hi
}

func least(own, env float64) float64 {
	if own > 0 {
		return math.Min(own, env)
	}
	return env
}

// arm judges one request to the board to arm. (S3, S5, S6, S7, S8, S9, S10)
func (r *Referee) arm(e safety.Event) {
	q, ok := e.(safety.ArmRequest)
	if !ok || !q.Plan.Valid() {
		r.blame("S3", "armed by %T without an admitted plan", e)
		return
	}
	p := q.Plan.Plan()
	if r.stopSeen && r.now-r.lastStop < 500*time.Millisecond {
		r.blame("S5", "armed %v after a stop", r.now-r.lastStop)
	}
	if r.asked && r.stopSeen && r.lastStop > r.askedAt {
		r.blame("S5", "armed by a request that is older than the last stop")
	}
	if r.stage != idle || r.stopDue {
		r.blame("S8", "armed while armed or before the board said off")
	}
	if r.tripped {
		r.blame("S10", "armed without acknowledgement and reset")
	}
	if !r.connected || r.lookOnly || r.recordBad {
		r.blame("S8", "armed without a board, look-only or without a record")
	}
	if !r.held {
		r.blame("S9", "armed without limits held and read back equal")
	}
	if q.Unattended && !r.simulated {
		r.blame("S6", "a real board armed unattended")
	}
	if !q.Unattended && (!r.leased || r.now-r.leasedAt > r.env.LeaseMax) {
		r.blame("S6", "armed without a live screen")
	}
	if !r.heard || r.now-r.heardAt > r.env.TelemetryAgeMax {
		r.blame("S6", "armed without fresh telemetry")
	}
	if math.Abs(float64(r.last.Speed)) > float64(r.env.RestSpeed) {
		r.blame("S9", "armed while the shaft turns")
	}
	if r.env.ChecksAsked.Has(safety.CheckTicked) && !r.checks[safety.CheckTicked] {
		r.blame("S7", "armed for %q without the checklist", p.Name)
	}
	for _, c := range asks(p.Check, r.env.ChecksAsked) {
		if !r.checks[c] {
			r.blame("S7", "armed for %q without the %v", p.Name, c)
		}
	}
	r.stage, r.plan, r.lone, r.drives, r.patterns = armSent, p, q.Unattended, false, 0
	r.silentRun = false
}

// asks lists what SAFETY.md S7 wants seen before a run of kind c.
func asks(c safety.Check, extra safety.Checks) []safety.Check {
	l := []safety.Check{safety.CheckStopKey}
	if c == safety.CheckSign {
		return l
	}
	l = append(l, safety.CheckCount, safety.CheckSign)
	if c == safety.CheckStop {
		return l
	}
	l = append(l, safety.CheckStop)
	if c == safety.CheckSilence {
		return l
	}
	l = append(l, safety.CheckSilence)
	if c == safety.CheckNone {
		l = append(l, extra.List()...)
	}
	return l
}

// write judges leave to write gains or limits. (S9, S11)
func (r *Referee) write(e safety.Event, x safety.WriteAllowed) {
	if r.stage != idle || r.stopDue || !r.connected || r.lookOnly || !r.heard || !r.saysOff ||
		r.now-r.heardAt > r.env.TelemetryAgeMax || math.Abs(float64(r.last.Speed)) > float64(r.env.RestSpeed) {
		r.blame("S9", "a write was allowed and the motor is not known to stand still, disarmed")
	}
	if q, ok := e.(safety.LimitWrite); ok {
		if q.Loosens && q.Reason == "" {
			r.blame("S11", "limits were loosened without a reason")
		}
		r.held = false
	}
}

// sample notes one sample and names the promise under which it calls for a stop.
func (r *Referee) sample(e safety.Sample) string {
	s := e.Sample
	for _, v := range []float64{float64(s.Speed), float64(s.Volts), float64(s.Current), float64(s.Bus)} {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return "S6"
		}
	}
	if r.heard && s.BoardUS <= r.boardUS {
		return "" // a repeat refreshes nothing
	}
	if !r.heard {
		r.heardAt = e.At
	}
	r.heard, r.boardUS, r.last = true, s.BoardUS, s
	r.heardAt = max(r.heardAt, e.At)
	if s.Slow.Seen && r.connected && s.Slow.Boots != r.boot {
		r.boot = s.Slow.Boots
		r.news(safety.BoardRestarted{At: e.At})
		return "S8"
	}
	off := s.State == protocol.Off || s.State == protocol.Tripped
	switch {
	case !off:
		r.saysOff = false
	case !r.stopDue:
		r.saysOff = true
	case e.At >= r.stopAt+safety.OffConfirm:
		r.off()
	}
	if (s.State == protocol.Tripped || s.TripHeld) && r.stage > idle && !r.silentNow() {
		return "S8"
	}
	for _, in := range r.env.Inputs {
		if r.stage > idle && s.Slow.Inputs>>in.Bit&1 == 0 {
			return "S8"
		}
	}
	if en := r.env.Enabling; en.Listed && r.stage > idle && s.Slow.Inputs>>en.Bit&1 == 0 {
		return "S16"
	}
	if r.stage != going || !r.drives {
		return ""
	}
	return r.overLimit(s)
}

func (r *Referee) overLimit(s protocol.Sample) string {
	speed := least(r.plan.SpeedMax, float64(r.env.SpeedMax))
	volts := least(r.plan.VoltsMax, float64(r.env.VoltsMax))
	amps := least(r.plan.CurrentMax, float64(r.env.CurrentMax))
	turns := least(r.plan.TurnsMax, r.env.TurnsMax)
	has := func(h protocol.Has) bool { return s.Has&h != 0 }
	moved := math.Abs(float64(s.Counts-r.counts0)) * r.env.RadPerCount / (2 * math.Pi)
	switch {
	case math.Abs(float64(s.Speed)) > speed,
		math.Abs(float64(s.Volts)) > volts*1.04+0.1,
		has(protocol.HasCurrent) && math.Abs(float64(s.Current)) > amps,
		has(protocol.HasBus) && r.env.BusMax > 0 && s.Bus > r.env.BusMax,
		has(protocol.HasBus) && s.Bus < r.env.BusMin,
		s.Slow.HasTmp && r.env.TempMax > 0 && s.Slow.Temp > r.env.TempMax,
		r.counted && has(protocol.HasCounts) && moved > turns*1.02+0.01:
		return "S4"
	}
	return ""
}
