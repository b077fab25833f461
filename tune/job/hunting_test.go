package job

import (
	"math"
	"strings"
	"testing"

	"gainwright/protocol"
	"gainwright/protocol/si"
)

// Samples of a loop that swings go through the job to a record and to words; those
// of a run that is no closed loop do not.
func TestHuntingIsRecorded(t *testing.T) {
	j := &Job{}
	j.Env.VoltsMax = 12
	var s []Sample
	for i := range 120 {
		x := float64(i) * 0.01
		s = append(s, Sample{Sample: protocol.Sample{BoardUS: uint64(5e6 + 1e4*i), State: protocol.Looping,
			Speed: si.RadPerSec(100 + 5*math.Sin(2*math.Pi*6*x)), Volts: 6}})
	}
	h := j.hunting(s, 100, nil)
	if h == nil {
		t.Fatal("a swing of ± 5 rad/s is not found")
	}
	rec := huntingRecord(h)
	if math.Abs(*rec.FrequencyHz-6) > 0.01 || math.Abs(*rec.AmplitudeRadS-5) > 0.05 {
		t.Errorf("%.4g Hz, ± %.4g rad/s", *rec.FrequencyHz, *rec.AmplitudeRadS)
	}
	if w := huntingWords(h); !strings.Contains(w, "hunts at 6") || !strings.Contains(w, rec.Remedy) {
		t.Errorf("words %q", w)
	}
	for i := range s {
		s[i].State = protocol.Driving
	}
	if h := j.hunting(s, 100, nil); h != nil {
		t.Errorf("an open-loop run hunts: %v", h)
	}
	if huntingRecord(nil) != nil || huntingWords(nil) != "" {
		t.Error("something is said of nothing")
	}
}
