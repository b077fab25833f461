package safety

import (
	"fmt"
	"math"

	"gainwright/protocol"
)

// tellApart names what is wrong with a run from its newest sample alone, for a stop
// that comes before the slower judgements have had their time: stalled, turning
// unseen, wrong way, slipping, a supply that folds back, a load that came off.
// CodeNone where nothing says.
func (m *machine) tellApart() (Code, string) {
	s, j := m.Last, &m.judge
	v, w := float64(s.Volts), float64(s.Speed)
	ohms, ke := m.env.winding()
	measured := s.Has&protocol.HasCurrent != 0 && ohms > 0
	i := math.Abs(float64(s.Current))
	if j.counted && j.clock-j.changedAt >= unseenTime && math.Abs(v) > float64(m.env.RestSpeed)*ke {
		detail := fmt.Sprintf("%.4g V, not a count for %d ms", v, (j.clock - j.changedAt).Milliseconds())
		if !measured {
			return CodeStallOrDead, detail
		}
		detail += fmt.Sprintf(", %.3g A", i)
		switch locked := math.Abs(v) / ohms; {
		case i > 0.7*locked:
			return CodeStalled, detail
		case i < 0.5*locked: // what is left of the volts is back-EMF: it turns
			return CodeNoCounts, detail
		}
		return CodeStallOrDead, detail
	}
	if measured && ke > 0 && !m.freewheels(s, ke) {
		byVolts := (v - float64(s.Current)*ohms) / ke
		detail := fmt.Sprintf("encoder says %.4g rad/s, volts and current say %.4g", w, byVolts)
		switch {
		case byVolts*w < 0 && math.Abs(w) > math.Abs(byVolts)/2:
			return CodeWrongWay, detail
		case math.Abs(byVolts-w) > slipShare*math.Max(math.Abs(byVolts), 0.3*float64(m.env.SpeedMax)):
			return CodeSlip, detail
		}
	}
	if b := float64(s.Bus); s.Has&protocol.HasBus != 0 && m.env.BusMin > 0 && b < 1.1*float64(m.env.BusMin) {
		return CodeBusLow, fmt.Sprintf("bus %.4g V, limit %.4g V", b, float64(m.env.BusMin))
	}
	return CodeNone, ""
}

// leftForecast stops a run that does not do what was forecast, with the cause where
// the sample tells one.
func (m *machine) leftForecast(words string) {
	if code, detail := m.tellApart(); code != CodeNone {
		m.log("the speed left the band of the forecast: %s", words)
		m.trip(code, detail)
		return
	}
	m.trip(CodeForecast, words)
}
