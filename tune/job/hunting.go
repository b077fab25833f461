package job

import (
	"gainwright/protocol"
	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
)

// hunting looks for a limit cycle in samples during which the setpoint w (rad/s)
// stands; m are the margins of the running loop on the model, nil where not known.
func (j *Job) hunting(s []Sample, w float64, m *design.Margins) *identify.Hunting {
	loop := identify.Loop{Speed: w, SpeedStep: j.sizing().SpeedStep, Noise: j.Noise, VoltsMax: float64(j.Env.VoltsMax)}
	if m != nil && m.PhaseCrossover.Known() {
		loop.PhaseCrossover = float64(m.PhaseCrossover)
	}
	var t, y, u []float64
	for i := range s {
		if s[i].State != protocol.Looping || i > 0 && s[i].BoardUS <= s[i-1].BoardUS {
			continue
		}
		t, y, u = append(t, float64(s[i].BoardUS-s[0].BoardUS)*1e-6), append(y, float64(s[i].Speed)), append(u, float64(s[i].Volts))
	}
	return identify.FindHunting(t, y, u, loop)
}

func huntingRecord(h *identify.Hunting) *sheet.HuntingRecord {
	if h == nil {
		return nil
	}
	return &sheet.HuntingRecord{FrequencyHz: &h.Frequency, AmplitudeRadS: &h.Amplitude, Cause: h.Cause, Remedy: h.Remedy}
}

// larger is the one of two that swings more; either may be nil.
func larger(a, b *identify.Hunting) *identify.Hunting {
	if a == nil || b != nil && b.Amplitude > a.Amplitude {
		return b
	}
	return a
}

// huntingWords goes behind a finding.
func huntingWords(h *identify.Hunting) string {
	if h == nil {
		return ""
	}
	return "; " + h.String() + " (" + h.Remedy + ")"
}
