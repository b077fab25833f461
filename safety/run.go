package safety

import (
	"fmt"
	"math"
	"time"
)

// begin starts the run at the end of the count-down.
func (m *machine) begin() {
	m.Phase = Running
	m.RunAt = m.Now
	if m.Plan.plan.Inch {
		m.Inches++
	}
	m.valueAt = m.Now
	m.Value = 0
	m.driven, m.Silent, m.patterned = false, false, false
	m.runPos = m.pos
	m.judge.start()
	m.Segment = 0
	m.segment(m.Now)
	m.log("running %q", m.Plan.plan.Name)
}

// segment notes where and when the segment in hand began.
func (m *machine) segment(at time.Duration) {
	m.SegmentAt = at
	m.segPos, m.segCounts = m.pos, m.Last.Counts
	m.moved = false
	m.restSince = m.HeardAt
	m.resting = false
}

func (m *machine) runDeadlines() {
	switch {
	case m.Now-m.RunAt > m.env.RunTimeMax:
		m.trip(CodeRunTime, "")
	case m.Silent && m.Now-m.silentAt > m.env.BoardTimeout*3/2+m.env.TelemetryAgeMax:
		m.LookOnly = true
		m.Checks = m.Checks.Without(CheckSilence)
		m.do(CheckJudged{Check: CheckSilence, Words: cause(CodeBoardNoTime, "").Words})
		m.trip(CodeBoardNoTime, "")
	}
}

// drive sends the drive value of this moment. It is the only place that does, and
// the value is inside plan and envelope whatever the plan says. (S3, S4)
func (m *machine) drive() {
	p := &m.Plan.plan
	if !m.Silent && p.SilenceAt > 0 && m.Now-m.RunAt >= p.SilenceAt {
		m.Silent = true
		m.silentAt = m.Now
		m.log("silent from now on: the board has to stop by itself")
	}
	if m.Silent {
		return
	}
	for m.Now-m.SegmentAt >= p.Segments[m.Segment].Duration {
		if !m.next(m.SegmentAt + p.Segments[m.Segment].Duration) {
			return
		}
	}
	v := m.bounded(m.wanted())
	if m.driven && math.Abs(v-m.Value) < 1e-3 && m.Now-m.drivenAt < m.env.Heartbeat {
		return
	}
	m.Value, m.driven = v, true
	m.drivenAt, m.beatAt = m.Now, m.Now
	m.do(SendDrive{Mode: p.Segments[0].Mode, Value: v})
	m.askPattern(v)
}

// next goes on to the next segment, or ends the run.
func (m *machine) next(at time.Duration) bool {
	if m.Segment+1 >= len(m.Plan.plan.Segments) {
		m.over("the plan is over")
		return false
	}
	m.Segment++
	m.segment(at)
	return true
}

// over ends a run whose plan is done.
func (m *machine) over(why string) {
	if m.Plan.plan.Inch {
		m.inched(why)
		return
	}
	m.log("%s after %.3f s", why, (m.Now - m.RunAt).Seconds())
	m.stopping(EndDone, Cause{})
}

// wanted is the plan's value at this moment, no faster than the slew limit from
// the value before.
func (m *machine) wanted() float64 {
	s := m.Plan.plan.Segments[m.Segment]
	at := math.Min(float64(m.Now-m.SegmentAt)/float64(s.Duration), 1)
	v := s.From + (s.To-s.From)*at
	v = math.Max(math.Min(s.From, s.To), math.Min(v, math.Max(s.From, s.To))) // rounding never leaves the plan
	rate := m.env.SlewMax
	if s.Mode == ModeSpeed {
		rate = m.env.AccelMax
	}
	most := rate * (m.Now - m.valueAt).Seconds()
	m.valueAt = m.Now
	if math.Abs(v-m.Value) <= most {
		return v // itself: the sum could be rounded out of the plan
	}
	return m.Value + math.Copysign(most, v-m.Value)
}

// bounded cuts v to what plan and envelope allow.
func (m *machine) bounded(v float64) float64 {
	p := &m.Plan.plan
	top := tighter(p.VoltsMax, float64(m.env.VoltsMax))
	if p.Segments[0].Mode == ModeSpeed {
		top = tighter(p.SpeedMax, float64(m.env.SpeedMax))
	}
	low := -top
	if !m.env.Reverse {
		low = 0
	}
	if !finite(v) {
		panic(fmt.Sprintf("safety: drive value %v", v))
	}
	return math.Max(low, math.Min(top, v))
}

// until ends a segment early when its condition has come.
func (m *machine) until() {
	u := m.Plan.plan.Segments[m.Segment].Until
	done := false
	switch u.Kind {
	case UntilMotion:
		done = m.movedBy(u.Counts)
	case UntilRest:
		done = m.resting
	case UntilAbove:
		done = float64(m.Last.Speed) >= u.Speed
	case UntilBelow:
		done = float64(m.Last.Speed) <= u.Speed
	}
	if done {
		m.next(m.Now)
	}
}

// movedBy reports whether the shaft has moved by n counts since the segment
// began; where counts are not reported, whether it has turned at all.
func (m *machine) movedBy(n int64) bool {
	if !m.judge.counted {
		return m.moved
	}
	d := m.Last.Counts - m.segCounts
	return d >= n || -d >= n
}
