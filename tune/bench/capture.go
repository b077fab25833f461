package bench

import (
	"errors"
	"fmt"
	"math"
	"strconv"

	"gainwright/protocol"
	"gainwright/tune/job"
	"gainwright/tune/trace"
)

// Errors of a capture.
var (
	ErrCapture    = errors.New("the capture is not usable")
	errCapturePie = errors.New("a piece of the capture is malformed")
)

// sampleDigits is the length of one captured sample on the wire: counts, volts
// and current, four hex digits each.
const sampleDigits = 12

// upload reads the capture of a run piece by piece, checks it as a whole and
// makes a trace of it.
func (h *hands) upload(spec job.Run) (*trace.Trace, error) {
	a, err := h.Request(protocol.VerbCap, "state")
	if err != nil {
		return nil, err
	}
	n := atoi(a.Field(1))
	step, err := strconv.ParseFloat(a.Field(3), 64)
	if a.Field(0) != "full" || n < 2 || err != nil || step <= 0 {
		return nil, fmt.Errorf("%w: the board says %q", ErrCapture, a.Joined())
	}
	digits := make([]byte, 0, n*sampleDigits)
	for at := 0; at < n; {
		a, err := h.Request(protocol.VerbCap, "get "+strconv.Itoa(at))
		if err != nil {
			return nil, err
		}
		piece := a.Field(1)
		if atoi(a.Field(0)) != at || len(piece) == 0 || len(piece)%sampleDigits != 0 {
			return nil, fmt.Errorf("%w: %q", errCapturePie, a.Joined())
		}
		digits = append(digits, piece...)
		at += len(piece) / sampleDigits
		h.do(func(s *session) { s.view.Busy, s.view.Share = "reading the capture", float64(at)/float64(n) })
	}
	h.do(func(s *session) { s.view.Busy, s.view.Share = "", 0 })
	a, err = h.Request(protocol.VerbCap, "crc")
	if err != nil {
		return nil, err
	}
	if want := fmt.Sprintf("%04X", protocol.CRC16(digits)); a.Field(0) != want {
		return nil, fmt.Errorf("%w: its check code is %s, of what was read %s", ErrCapture, a.Field(0), want)
	}
	var id protocol.Identity
	h.do(func(s *session) { id = s.core.Identity() })
	return captureTrace(spec.Plan.Name, digits, step*1e-6, id)
}

// captureTrace turns the digits of a capture into a trace: speed is the mean
// between two samples, the counts themselves are kept beside it.
func captureTrace(name string, digits []byte, step float64, id protocol.Identity) (*trace.Trace, error) {
	n := len(digits) / sampleDigits
	rad := id.RadPerCount()
	if rad <= 0 {
		return nil, fmt.Errorf("%w: the board does not say its counts per turn", ErrCapture)
	}
	tr := &trace.Trace{Name: name, Window: step, RadPerCount: rad}
	var counts, last int64
	for i := range n {
		var w [3]uint16
		for k := range w {
			v, ok := protocol.ParseHex16(digits[i*sampleDigits+4*k:][:4])
			if !ok {
				return nil, errCapturePie
			}
			w[k] = v
		}
		if i == 0 {
			counts = int64(w[0])
			last = counts
			continue
		}
		counts += int64(int16(w[0] - uint16(counts)))
		tr.Time = append(tr.Time, float64(i)*step)
		tr.Counts = append(tr.Counts, float64(counts))
		tr.Speed = append(tr.Speed, float64(counts-last)*rad/step)
		tr.Voltage = append(tr.Voltage, float64(int16(w[1]))*id.Scales.VoltsLSB)
		if id.Scales.CurrentLSB > 0 {
			tr.Current = append(tr.Current, float64(int16(w[2]))*id.Scales.CurrentLSB)
		}
		last = counts
	}
	if len(tr.Time) < 2 || math.IsNaN(tr.Speed[0]) {
		return nil, ErrCapture
	}
	return tr, nil
}
