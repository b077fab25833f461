package safety

import (
	"fmt"
	"math"

	"gainwright/protocol"
)

// judgeLoose compares the acceleration with what the model allows for the volts
// applied, (K·V − ω)/τ: much more means that inertia has come off.
func (m *machine) judgeLoose(s protocol.Sample) bool {
	j, l := &m.judge, m.env.Look
	if l.Gain <= 0 || l.Tau <= 0 || !j.sloped {
		return false
	}
	// Dry friction slows down a shaft too: at most the drive that would start it.
	k, w := l.Gain, float64(s.Speed)
	lo, hi := m.driveRange()
	switch friction := float64(m.env.stallVolts()); {
	case w > 0:
		lo -= friction
	case w < 0:
		hi += friction
	}
	most := (k*hi - w) / l.Tau.Seconds()
	if j.slope < 0 {
		most = (w - k*lo) / l.Tau.Seconds()
	}
	span := slopeSpan.Seconds()
	grain := 4*float64(m.env.RestSpeed)/span + 4*m.env.RadPerCount/(span*span) // of encoder and window
	// A shaft that is held, or an encoder that stops or turns about, is no load that
	// came off: the judges of counts and way have words for those.
	pushed := most <= 0 && w*j.slope > 0 && w*float64(s.Volts) >= 0
	other := most <= 0 && !pushed
	goesOn := j.newest*j.slope > looseGoes*j.slope*j.slope // one wild sample does not
	far := !other && goesOn && math.Abs(j.slope) > looseRatio*math.Max(most, 0)+grain
	if !j.lasts(far, &j.loose, &j.looseFrom, looseTime) {
		return false
	}
	code := CodeLoose
	if pushed {
		code = CodePushed
	}
	m.trip(code, fmt.Sprintf("%.4g rad/s², the model allows %.4g", math.Abs(j.slope), most))
	return true
}

// driveRange is what was applied in the span of the slope, and what was asked for
// since; in closed loop anything up to the envelope's limit.
func (m *machine) driveRange() (lo, hi float64) {
	asked, more := m.Value, m.pattern()
	if m.Plan.plan.Segments[0].Mode == ModeSpeed {
		return -float64(m.env.VoltsMax), float64(m.env.VoltsMax)
	}
	return math.Min(m.judge.older.lo, asked-more), math.Max(m.judge.older.hi, asked+more)
}
