package safety

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"time"
)

// Admitted is a plan that an envelope allows. Only Envelope.Admit makes one; the
// zero value never runs.
type Admitted struct {
	plan  Plan
	valid bool
}

// Valid reports whether Envelope.Admit made it.
func (a Admitted) Valid() bool { return a.valid }

// Plan returns a copy of the plan.
func (a Admitted) Plan() Plan { return a.plan.clone() }

// Sentinels inside a LimitError.
var (
	ErrOverLimit = errors.New("over the limit")
	ErrRefused   = errors.New("refused")
)

// LimitError says which segment of a plan is over which limit.
type LimitError struct {
	Segment    int // counted from 1; 0: the plan or the envelope as a whole
	What       string
	Got, Limit float64
	Unit       string
	Remedy     string
	err        error
}

// Error returns place, quantity, value, limit and remedy on one line.
func (e *LimitError) Error() string {
	s := "plan: "
	if e.Segment > 0 {
		s = "segment " + strconv.Itoa(e.Segment) + ": "
	}
	if errors.Is(e.err, ErrOverLimit) {
		s += fmt.Sprintf("%s %.6g %s is over the limit %.6g %s", e.What, e.Got, e.Unit, e.Limit, e.Unit)
	} else {
		s += e.What
	}
	if e.Remedy != "" {
		s += ": " + e.Remedy
	}
	return s
}

// Unwrap returns ErrOverLimit or ErrRefused.
func (e *LimitError) Unwrap() error { return e.err }

func over(seg int, what string, got, limit float64, unit, remedy string) error {
	return &LimitError{Segment: seg, What: what, Got: got, Limit: limit, Unit: unit, Remedy: remedy, err: ErrOverLimit}
}

func refused(seg int, what, remedy string) error {
	return &LimitError{Segment: seg, What: what, Remedy: remedy, err: ErrRefused}
}

// Admit checks every segment of p against the envelope and returns a private
// copy. The error is a *LimitError that names the first segment out of bounds.
func (env Envelope) Admit(p Plan) (Admitted, error) {
	if err := env.usable(); err != nil {
		return Admitted{}, err
	}
	if err := env.admitWhole(p); err != nil {
		return Admitted{}, err
	}
	for i, s := range p.Segments {
		if err := env.admitSegment(p, i, s); err != nil {
			return Admitted{}, err
		}
	}
	if err := env.admitCheck(p); err != nil {
		return Admitted{}, err
	}
	return Admitted{plan: p.clone(), valid: true}, nil
}

// usable refuses an envelope with a hole in it: what is not stated is not allowed.
func (env Envelope) usable() error {
	for _, l := range []struct {
		name string
		v    float64
	}{
		{"volts limit", float64(env.VoltsMax)}, {"speed limit", float64(env.SpeedMax)},
		{"current limit", float64(env.CurrentMax)}, {"acceleration limit", env.AccelMax},
		{"limit of the rate of change of volts", env.SlewMax}, {"turns limit", env.TurnsMax},
		{"continuous current", float64(env.CurrentContinuous)}, {"heat time constant", env.HeatTau.Seconds()},
		{"stall volts", float64(env.StallVolts)}, {"stall time", env.StallTime.Seconds()},
		{"wrong-way time", env.WrongWayTime.Seconds()}, {"rest speed", float64(env.RestSpeed)},
		{"creep speed", float64(env.CreepMax)}, {"run time limit", env.RunTimeMax.Seconds()},
		{"telemetry age limit", env.TelemetryAgeMax.Seconds()}, {"screen lease", env.LeaseMax.Seconds()},
		{"arm lapse", env.ArmLapse.Seconds()}, {"count-down", env.CountDown.Seconds()},
		{"heartbeat", env.Heartbeat.Seconds()}, {"board timeout", env.BoardTimeout.Seconds()},
	} {
		if !(l.v > 0) || math.IsInf(l.v, 0) {
			return refused(0, "the "+l.name+" is not stated", "give it in the rig file")
		}
	}
	if env.BoardTimeout < 2*env.Heartbeat+20*time.Millisecond {
		return refused(0, "the board timeout is shorter than two heartbeats and 20 ms", "lengthen it in the rig file")
	}
	if !env.VoltageDrive {
		return refused(0, "the drive is not stated to take volts", "current-mode drives are not driven by this console")
	}
	if env.GravityLoad && !env.BrakeListed {
		return refused(0, "gravity pulls the load and no holding brake is listed",
			"fit a brake and list it, or take the load off")
	}
	return nil
}

func (env Envelope) admitWhole(p Plan) error {
	if len(p.Segments) == 0 {
		return refused(0, "it has no segments", "add one")
	}
	if len(p.Segments) > SegmentsMax {
		return over(0, "number of segments", float64(len(p.Segments)), SegmentsMax, "", "shorten it")
	}
	for _, l := range []struct {
		name string
		v    float64
	}{{"volts", p.VoltsMax}, {"speed", p.SpeedMax}, {"current", p.CurrentMax}, {"turns", p.TurnsMax}} {
		if !(l.v >= 0) || math.IsInf(l.v, 0) {
			return refused(0, "its own "+l.name+" limit is not a number from 0 up", "leave it 0 for the envelope's")
		}
	}
	if p.SilenceAt < 0 {
		return refused(0, "its silence begins before its start", "give a time from 0 up")
	}
	var total time.Duration
	for i, s := range p.Segments {
		if s.Duration <= 0 {
			return refused(i+1, "its duration is not above 0", "give one")
		}
		if s.Duration > env.RunTimeMax || total+s.Duration > env.RunTimeMax {
			return over(i+1, "run time", (total + s.Duration).Seconds(), env.RunTimeMax.Seconds(), "s", "shorten the plan")
		}
		total += s.Duration
	}
	return nil
}

func (env Envelope) admitSegment(p Plan, i int, s Segment) error {
	n := i + 1
	if !finite(s.From) || !finite(s.To) {
		return refused(n, "a drive value is not a finite number", "give one")
	}
	if s.Mode != p.Segments[0].Mode {
		return refused(n, "it changes between volts and closed loop", "make it a run of its own")
	}
	if err := env.admitPattern(p, i, s); err != nil {
		return err
	}
	top := s.reach()
	slope := math.Abs(s.To-s.From) / s.Duration.Seconds()
	switch s.Mode {
	case ModeVolts:
		if lim := tighter(p.VoltsMax, float64(env.VoltsMax)); top > lim {
			return over(n, "drive", top, lim, "V", "make it smaller")
		}
		if slope > env.SlewMax {
			return over(n, "rate of change of volts", slope, env.SlewMax, "V/s", "make the ramp longer")
		}
	case ModeSpeed:
		if lim := tighter(p.SpeedMax, float64(env.SpeedMax)); top > lim {
			return over(n, "speed", top, lim, "rad/s", "make it smaller")
		}
		if slope > env.AccelMax {
			return over(n, "acceleration", slope, env.AccelMax, "rad/s²", "make the ramp longer")
		}
	default:
		return refused(n, "its mode is neither volts nor closed loop", "give one")
	}
	if !env.Reverse && math.Min(s.From, s.To) < 0 {
		return refused(n, "it drives backwards and the drive turns one way only", "plan forward values only")
	}
	if !env.Brake && s.Mode == ModeSpeed && env.falls(p, i) {
		return refused(n, "its setpoint falls and the drive cannot brake", "end the run there and let it coast")
	}
	if s.Until.Kind > UntilBelow || !finite(s.Until.Speed) || s.Until.Counts < 0 || (s.Until.Kind == UntilMotion && s.Until.Counts == 0) {
		return refused(n, "its end condition makes no sense", "give a time, a number of counts above 0, or rest")
	}
	return nil
}

// falls reports whether the magnitude of the setpoint falls in or on entry to
// segment i.
func (env Envelope) falls(p Plan, i int) bool {
	s := p.Segments[i]
	if math.Abs(s.To) < math.Abs(s.From) || s.From*s.To < 0 {
		return true
	}
	return i > 0 && (math.Abs(s.From) < math.Abs(p.Segments[i-1].To) || s.From*p.Segments[i-1].To < 0)
}

// admitCheck holds the runs that may move before all checks have passed to
// their own, narrower bounds. (S7)
func (env Envelope) admitCheck(p Plan) error {
	if p.Check != CheckSilence && p.SilenceAt != 0 {
		return refused(0, "it goes silent and is not the silence check", "leave the silence out")
	}
	if p.Locked && p.Duration() > env.LockedMax {
		return over(0, "time with the shaft held", p.Duration().Seconds(), env.LockedMax.Seconds(), "s", "shorten it")
	}
	if p.Inch {
		return env.admitInch(p)
	}
	switch p.Check {
	case CheckNone, CheckLimit, CheckInterlock:
	case CheckSign:
		return env.admitSign(p)
	case CheckStop, CheckSilence:
		if p.SpeedMax <= 0 || p.SpeedMax > float64(env.CreepMax) {
			return over(0, "speed limit of a check at creep", p.SpeedMax, float64(env.CreepMax), "rad/s", "state it, at creep or below")
		}
		if p.Check == CheckSilence && (p.SilenceAt == 0 || p.SilenceAt >= p.Duration()) {
			return refused(0, "the silence check never goes silent", "begin the silence before its end")
		}
	default:
		return refused(0, "no run is made for the "+p.Check.String(), "choose another check")
	}
	return nil
}

func (env Envelope) admitSign(p Plan) error {
	if p.TurnsMax <= 0 || p.TurnsMax > env.SignTurns {
		return over(0, "turns limit of the sign ramp", p.TurnsMax, env.SignTurns, "turns", "state it, at the envelope's or below")
	}
	if p.Locked {
		return refused(0, "the sign ramp needs a free shaft", "leave it unlocked")
	}
	for i, s := range p.Segments {
		top := math.Max(math.Abs(s.From), math.Abs(s.To))
		switch {
		case s.Mode != ModeVolts:
			return refused(i+1, "the sign ramp runs open loop only", "give volts")
		case top > float64(env.SignVolts):
			return over(i+1, "drive of the sign ramp", top, float64(env.SignVolts), "V", "make it smaller")
		case top > 0 && (s.Until.Kind != UntilMotion || s.Until.Counts > SignCounts):
			return refused(i+1, "it drives on after the first counts", fmt.Sprintf("end it after at most %d counts", SignCounts))
		}
	}
	return nil
}

// tighter is the smaller of a plan's own limit and the envelope's; 0 is none.
func tighter(own, env float64) float64 {
	if own > 0 && own < env {
		return own
	}
	return env
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
