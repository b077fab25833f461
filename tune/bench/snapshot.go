package bench

import (
	"fmt"
	"time"

	"gainwright/protocol"
	"gainwright/protocol/si"
	"gainwright/safety"
	"gainwright/tune/job"
)

// snapshot completes the view with how link and drive stand now. The value it
// returns is never written again.
func (s *session) snapshot() *job.View {
	v := s.view
	v.Now = s.now
	v.Link = s.linkView()
	v.Drive = s.driveView(v.Link)
	v.Ask = s.asking
	v.Interlocks = s.inputViews()
	if r := s.run; r != nil && r.ended == nil {
		p := r.spec.View
		v.Plan = &p
	}
	if l := v.Live; l != nil && l.Running {
		c := *l
		if s.run != nil && s.run.started {
			c.Elapsed = s.now - s.run.begun
		}
		st := s.core.State()
		if segs := st.Plan.Plan().Segments; st.Phase == safety.Running && st.Segment < len(segs) {
			c.Segment = segs[st.Segment].Note
		}
		v.Live = &c
	}
	return &v
}

func (s *session) linkView() job.LinkView {
	l := s.core.Link()
	v := job.LinkView{Age: l.Age, Frames: l.Stats.Samples, Rate: l.Rate, BadLines: l.Stats.BadLines, Lost: l.Stats.Lost,
		Stale: l.Stats.Stale, BoardBoot: int(s.core.Identity().Boots)}
	if !l.Seen {
		v.Age = -1
	}
	limit := s.core.Envelope().TelemetryAgeMax
	if limit == 0 {
		limit = 150 * time.Millisecond
	}
	switch {
	case l.Lost:
		v.State, v.Why = job.LinkLost, l.LostWhy
	case !s.opened:
		v.State = job.NoPort
	case !l.Connected && !l.Seen:
		v.State = job.Opening
	case !l.Seen || l.Age > limit:
		v.State = job.Stale
	case l.LookOnly != "" || s.core.State().LookOnly:
		v.State, v.Why = job.LookOnly, l.LookOnly
	default:
		v.State = job.Fresh
	}
	return v
}

func (s *session) driveView(l job.LinkView) job.DriveView {
	st, env := s.core.State(), s.core.Envelope()
	d := job.DriveView{Phase: st.Phase.String(), SpeedMax: env.SpeedMax, VoltsMax: env.VoltsMax, HeatShare: -1}
	if p := st.Plan.Plan(); p.SpeedMax > 0 {
		d.SpeedMax = min(d.SpeedMax, si.RadPerSec(p.SpeedMax))
	}
	if st.Heard {
		x := st.Last
		d.Speed, d.Volts = x.Speed, x.Volts
		if x.Has&protocol.HasCurrent != 0 {
			c := x.Current
			d.Current = &c
		}
		if x.Has&protocol.HasBus != 0 {
			b := x.Bus
			d.Bus = &b
		}
		if x.Has&protocol.HasCounts != 0 {
			n := x.Counts
			d.Counts = &n
		}
		d.Moving = x.State.Moving() && !(st.Phase == safety.Armed && st.Inches > 0) || x.Speed > env.RestSpeed || x.Speed < -env.RestSpeed
	}
	d.Unknown = l.State == job.LinkLost || l.State == job.Stale || !st.Heard
	if h := float64(env.CurrentContinuous*env.CurrentContinuous) * env.HeatTau.Seconds(); h > 0 {
		d.HeatShare = st.Heat / h
	}
	d.Space = s.spaceWords(st, env)
	d.Inch, d.Inches = st.Plan.Plan().Inch, st.Inches
	if env.Enabling.Listed {
		d.Enabling = env.Enabling.Position(st.Last).String()
	}
	switch st.Phase {
	case safety.Armed:
		d.ArmLeft = env.ArmLapse - (s.now - st.ArmedAt)
		d.Clear = st.Clear
		d.ClearAsk = !st.Clear
		d.ClearWait = max(0, safety.ClearWait-(s.now-st.ArmedAt))
	case safety.CountDown:
		d.CountLeft = env.CountDown - (s.now - st.CountedAt)
	case safety.Tripped:
		d.Trip, d.Remedy, d.Acked = st.Trip.Cause.String(), st.Trip.Cause.Do, st.Trip.Acked
	}
	return d
}

// spaceWords say what the stop key does now.
func (s *session) spaceWords(st safety.State, env safety.Envelope) string {
	switch {
	case st.Phase == safety.Running && env.Stop == safety.StopRamp && len(st.Plan.Plan().Segments) > 0 && st.Plan.Plan().Segments[0].Mode == safety.ModeSpeed:
		return "RAMP AND CUT, again: CUT"
	case st.Phase == safety.Running || st.Phase == safety.CountDown || st.Phase == safety.Stopping:
		if s.core.Identity().OffMeans == "short" {
			return "CUT, the winding brakes"
		}
		return "CUT, the motor coasts"
	case st.Phase == safety.Armed || st.Phase == safety.Arming:
		return "CUT and disarm"
	}
	return "sends a stop"
}

// show puts a run on the screens.
func (s *session) show(r *running) {
	s.run = r
	s.view.Refusal = nil
	p := r.spec.View
	l := &job.LiveView{Name: p.Name, Length: r.spec.Plan.Duration(), Expect: p.Expect, Running: true,
		SpeedMax: float64(s.core.Envelope().SpeedMax), VoltsMax: float64(s.core.Envelope().VoltsMax)}
	if m := r.spec.Plan.SpeedMax; m > 0 {
		l.SpeedMax = min(l.SpeedMax, m)
	}
	s.view.Live = l
	s.say(fmt.Sprintf("plan shown: %s, %d segments, %.1f s at most", p.Name, len(r.spec.Plan.Segments), r.spec.Plan.Duration().Seconds()))
}
