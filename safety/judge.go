package safety

import (
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
	"gainwright/protocol/si"
)

// Judging constants. None of them is a limit of the rig.
const (
	slopeSpan   = 20 * time.Millisecond  // least span of the slope of speed
	slipShare   = 0.3                    // speed may leave (V−IR)/Ke by this share
	slipTime    = 300 * time.Millisecond // for this long
	runawayGap  = 0.35                   // or by this share of the speed limit
	runawayTime = 40 * time.Millisecond  // for this long: a loop that sees too little speed runs away
	unseenTime  = 40 * time.Millisecond  // without a count, beside a speed by volts: none comes
	looseRatio  = 2.5                    // acceleration against the model's
	looseTime   = 6 * time.Millisecond
	looseGoes   = 0.25                  // share of the slope with which the newest sample has to go on
	aheadFrom   = 0.7                   // share of the ceiling from which to look ahead
	aheadStop   = 20 * time.Millisecond // console and wire, from sample to output off
	voltsSlack  = 0.03                  // share by which applied volts may be over what was asked
	voltsOffset = 0.1                   // V, likewise
)

// judgeState is what the console limiter keeps from sample to sample.
type judgeState struct {
	clock time.Duration // board time since the first sample

	counted   bool
	counts    int64
	changedAt time.Duration // clock when the counts changed last

	older, newer speedAt // two looks at the speed, at least slopeSpan apart
	looks        int
	slope        float64 // rad/s²
	sloped       bool
	last         speedAt
	newest       float64 // rad/s², from the sample before to the newest

	stallFrom time.Duration
	stalling  bool
	wrongFrom time.Duration
	wrongWas  float64
	wrong     bool
	slipFrom  time.Duration
	slipping  bool
	awayFrom  time.Duration
	away      bool
	looseFrom time.Duration
	loose     bool
}

type speedAt struct {
	at     time.Duration
	speed  float64
	lo, hi float64 // V applied from then on
}

// look takes counts and slope from one sample.
func (j *judgeState) look(s *protocol.Sample, dt time.Duration) {
	j.clock += dt
	if s.Has&protocol.HasCounts != 0 {
		if !j.counted || s.Counts != j.counts {
			j.changedAt = j.clock
		}
		j.counted, j.counts = true, s.Counts
	} else if s.Speed != 0 {
		j.changedAt = j.clock
	}
	v := float64(s.Volts)
	j.older.lo, j.older.hi = min(j.older.lo, v), max(j.older.hi, v)
	j.newer.lo, j.newer.hi = min(j.newer.lo, v), max(j.newer.hi, v)
	now := speedAt{j.clock, float64(s.Speed), v, v}
	if j.looks == 0 {
		j.older, j.newer, j.last, j.looks = now, now, now, 1
		return
	}
	if h := (now.at - j.last.at).Seconds(); h > 0 {
		j.newest = (now.speed - j.last.speed) / h
		j.last = now
	}
	if now.at-j.older.at >= slopeSpan {
		j.slope = (now.speed - j.older.speed) / (now.at - j.older.at).Seconds()
		j.sloped = true
	}
	if now.at-j.newer.at >= slopeSpan {
		j.older, j.newer = j.newer, now
	}
}

// start forgets what belongs to the run before.
func (j *judgeState) start() {
	j.changedAt = j.clock
	j.stalling, j.wrong, j.slipping, j.away, j.loose = false, false, false, false, false
}

// for returns whether cond has held for d without a break.
func (j *judgeState) lasts(cond bool, on *bool, from *time.Duration, d time.Duration) bool {
	if !cond {
		*on = false
		return false
	}
	if !*on {
		*on, *from = true, j.clock
	}
	return j.clock-*from >= d
}

// stallVolts is the drive above which the shaft is expected to turn: what was seen
// only lowers it.
func (env *Envelope) stallVolts() si.Volts {
	if v := env.Look.StallVolts; v > 0 && v < env.StallVolts {
		return v
	}
	return env.StallVolts
}

// heatMax is the heat budget in A²s.
func (env *Envelope) heatMax() float64 {
	return float64(env.CurrentContinuous) * float64(env.CurrentContinuous) * env.HeatTau.Seconds()
}

// HeatShare is the share of the heat budget that is used up, from 0.
func (env Envelope) HeatShare(s State) float64 {
	if m := env.heatMax(); m > 0 {
		return s.Heat / m
	}
	return 0
}

// heat adds one sample to the I²t budget and lets it cool. Where current is not
// measured it is (V − Ke·ω)/R; where R is unknown too, heat is not counted and
// run time is all there is.
func (m *machine) heat(s *protocol.Sample, dt time.Duration) {
	if m.env.HeatTau <= 0 {
		return
	}
	i := 0.0
	switch {
	case s.Has&protocol.HasCurrent != 0:
		i = float64(s.Current)
	case m.env.Resistance > 0 && s.State.Moving():
		i = (float64(s.Volts) - m.env.Ke*float64(s.Speed)) / m.env.Resistance
	}
	h := dt.Seconds()
	m.Heat = math.Max(0, m.Heat*math.Exp(-h/m.env.HeatTau.Seconds())+i*i*h)
}

// judgeStill trips when something happens although nothing is driven.
func (m *machine) judgeStill(s protocol.Sample) {
	if v := math.Abs(float64(s.Speed)); v > float64(m.env.CreepMax) {
		m.trip(CodeUndriven, fmt.Sprintf("%.4g rad/s", v))
		return
	}
	if !m.judgeInchRest() && !m.judgeSupply(s) {
		m.judgeInputs()
	}
}

// judgeRun compares one sample of a run with every limit. The first that is over
// trips; later ones are only counted. (S4)
func (m *machine) judgeRun(s protocol.Sample) {
	for _, over := range []func(protocol.Sample) bool{
		m.judgeSpeed, m.judgeDrive, m.judgeSupply, m.judgeTurns, m.judgeCounts, m.judgeWay, m.judgeSlip, m.judgeLoose,
	} {
		if over(s) {
			return
		}
	}
	m.judgeInputs()
}

func (m *machine) limit(got, limit float64, code Code, unit string) bool {
	if got <= limit {
		return false
	}
	m.trip(code, fmt.Sprintf("%.4g %s, limit %.4g %s", got, unit, limit, unit))
	return true
}

func (m *machine) judgeSpeed(s protocol.Sample) bool {
	top := tighter(m.Plan.plan.SpeedMax, float64(m.env.SpeedMax))
	w := float64(s.Speed)
	if m.limit(math.Abs(w), top, CodeSpeed, "rad/s") {
		return true
	}
	if m.judge.sloped && m.limit(math.Abs(m.judge.slope), m.env.AccelMax, CodeAccel, "rad/s²") {
		return true
	}
	if math.Abs(w) > aheadFrom*top {
		return m.limit(math.Abs(m.ahead(s)), top, CodeSpeedAhead, "rad/s")
	}
	return false
}

// ahead is the speed when a stop sent now would take effect: by the model where
// there is one, ω∞ + (ω − ω∞)·e^(−d/τ) with ω∞ = K·V, else by the slope seen.
// A speed that falls is the speed now. In closed loop the board holds the
// setpoint, and the ceiling itself is all that is judged.
func (m *machine) ahead(s protocol.Sample) float64 {
	w := float64(s.Speed)
	if m.Plan.plan.Segments[0].Mode != ModeVolts {
		return w
	}
	l := m.env.Look
	d := (m.Now - m.HeardAt + aheadStop + l.DeadTime).Seconds()
	var then float64
	switch {
	case l.Gain > 0 && l.Tau > 0:
		end := l.Gain * m.volts(float64(s.Volts))
		then = end + (w-end)*math.Exp(-d/l.Tau.Seconds())
	case m.judge.sloped:
		then = w + m.judge.slope*d
	default:
		return w
	}
	if math.Abs(then) < math.Abs(w) {
		return w
	}
	return then
}

func (m *machine) judgeDrive(s protocol.Sample) bool {
	top := tighter(m.Plan.plan.VoltsMax, float64(m.env.VoltsMax))
	if m.limit(math.Abs(float64(s.Volts)), top*(1+voltsSlack)+voltsOffset, CodeVolts, "V") {
		return true
	}
	if s.Has&protocol.HasCurrent != 0 {
		most := tighter(m.Plan.plan.CurrentMax, float64(m.env.CurrentMax))
		if m.limit(math.Abs(float64(s.Current)), most, CodeCurrent, "A") {
			return true
		}
	}
	return m.limit(m.Heat, m.env.heatMax(), CodeHeat, "A²s")
}

func (m *machine) judgeSupply(s protocol.Sample) bool {
	if s.Has&protocol.HasBus != 0 {
		if m.env.BusMax > 0 && m.limit(float64(s.Bus), float64(m.env.BusMax), CodeBusHigh, "V") {
			return true
		}
		if s.Bus < m.env.BusMin {
			m.trip(CodeBusLow, fmt.Sprintf("bus %.4g V, limit %.4g V", s.Bus, m.env.BusMin))
			return true
		}
	}
	if s.Slow.HasTmp && m.env.TempMax > 0 {
		return m.limit(float64(s.Slow.Temp), float64(m.env.TempMax), CodeTemp, "°C")
	}
	return false
}

func (m *machine) judgeTurns(protocol.Sample) bool {
	top := tighter(m.Plan.plan.TurnsMax, m.env.TurnsMax)
	moved := math.Abs(m.pos - m.runPos)
	if m.Plan.plan.Locked && m.movedBy(SignCounts) {
		m.trip(CodeNotHeld, "")
		return true
	}
	return m.limit(moved, top, CodeTurns, "turns")
}

// judgeCounts tells apart a stalled motor from one that turns unseen, by the
// current: near V/R it stands, far below it turns. The second is the one with
// which a closed loop would go to full speed.
func (m *machine) judgeCounts(s protocol.Sample) bool {
	if m.Plan.plan.Locked {
		return false
	}
	j := &m.judge
	driven := math.Abs(float64(s.Volts)) > float64(m.env.stallVolts())
	still := driven && j.clock-j.changedAt > 0
	if !j.lasts(still, &j.stalling, &j.stallFrom, m.env.StallTime) {
		return false
	}
	detail := fmt.Sprintf("%.4g V for %d ms", s.Volts, (j.clock - j.stallFrom).Milliseconds())
	code := CodeStallOrDead
	if ohms, _ := m.env.winding(); s.Has&protocol.HasCurrent != 0 && ohms > 0 {
		locked := math.Abs(float64(s.Volts)) / ohms
		i := math.Abs(float64(s.Current))
		detail += fmt.Sprintf(", %.3g A", i)
		switch {
		case i > 0.5*locked:
			code = CodeStalled
		case i < 0.25*locked:
			code = CodeNoCounts
		}
	}
	m.trip(code, detail)
	return true
}

// judgeWay trips when drive and speed have been opposite for WrongWayTime and
// the speed has not fallen: a reversal is opposite too, but it slows down.
func (m *machine) judgeWay(s protocol.Sample) bool {
	j := &m.judge
	v, w := float64(s.Volts), float64(s.Speed)
	against := v*w < 0 && math.Abs(w) > float64(m.env.RestSpeed) && math.Abs(v) > float64(m.env.StallVolts)/4
	if against && !j.wrong {
		j.wrongWas = math.Abs(w)
	}
	if !j.lasts(against, &j.wrong, &j.wrongFrom, m.env.WrongWayTime) || math.Abs(w) < 0.97*j.wrongWas {
		return false
	}
	m.trip(CodeWrongWay, fmt.Sprintf("%+.4g V gives %+.4g rad/s", v, w))
	return true
}

// winding is resistance and back-EMF constant: the rig file's, else measured, else 0.
func (env *Envelope) winding() (ohms, ke float64) {
	if env.Ke > 0 && env.Resistance > 0 {
		return env.Resistance, env.Ke
	}
	return env.Look.Resistance, env.Look.Ke
}

// judgeSlip compares the speed with (V − I·R)/Ke, which needs no model of the
// load: they part when encoder or coupling slips, or the encoder is frozen.
func (m *machine) judgeSlip(s protocol.Sample) bool {
	j := &m.judge
	ohms, ke := m.env.winding()
	if s.Has&protocol.HasCurrent == 0 || ke <= 0 || ohms <= 0 || m.Plan.plan.Locked || m.freewheels(s, ke) {
		return false
	}
	byVolts := (float64(s.Volts) - float64(s.Current)*ohms) / ke
	apart := math.Abs(byVolts - float64(s.Speed))
	far := j.lasts(apart > slipShare*math.Max(math.Abs(byVolts), 0.3*float64(m.env.SpeedMax)), &j.slipping, &j.slipFrom, slipTime)
	away := j.lasts(math.Abs(byVolts) > math.Abs(float64(s.Speed)) && apart > runawayGap*float64(m.env.SpeedMax), &j.away, &j.awayFrom, runawayTime)
	if !far && !away {
		return false
	}
	if byVolts*float64(s.Speed) < 0 && math.Abs(float64(s.Speed)) > math.Abs(byVolts)/2 {
		m.trip(CodeWrongWay, fmt.Sprintf("encoder says %.4g rad/s, volts and current say %.4g", s.Speed, byVolts))
		return true
	}
	code := CodeSlip
	if j.counted && j.clock-j.changedAt >= unseenTime {
		code = CodeNoCounts // not one count: it turns unseen
	}
	m.trip(code, fmt.Sprintf("encoder says %.4g rad/s, volts and current say %.4g", s.Speed, byVolts))
	return true
}

// freewheels reports whether a drive that cannot brake lets go of a shaft that is
// faster than its volts: then they say nothing of its speed.
func (m *machine) freewheels(s protocol.Sample, ke float64) bool {
	return !m.env.Brake && math.Abs(float64(s.Speed))*ke > math.Abs(float64(s.Volts))
}

func (m *machine) judgeInputs() {
	if in := m.openInput(); in != "" {
		m.trip(CodeInterlock, in)
		return
	}
	m.judgeEnabling()
}

// openInput names the first interlock input that is not in its working position,
// or whose position is not known.
func (m *machine) openInput() string {
	for _, in := range m.env.Inputs {
		if !m.Last.Slow.Seen {
			return in.Name + " is not reported"
		}
		if m.Last.Slow.Inputs>>in.Bit&1 == 0 {
			return in.Name
		}
	}
	return ""
}
