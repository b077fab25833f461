package job

import (
	"errors"
	"fmt"
	"math"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/sheet"
)

// doCount has the shaft turned once by hand and compares what was counted, then
// sees the stop key work at rest: nothing moves before both.
func (j *Job) doCount() (result, error) {
	if err := j.askConditions(); err != nil {
		return "", err
	}
	before, err := j.h.Watch(500 * time.Millisecond)
	if err != nil {
		return "", err
	}
	if err := j.needCounts(before); err != nil {
		return "", err
	}
	j.Noise = speedNoise(before)
	shaft, want := "motor shaft", j.ID.CountsPerTurn
	if j.ID.GearRatio > 1 {
		shaft = "output shaft"
		if j.ID.EncoderSide == "motor" {
			want *= j.ID.GearRatio
		}
	}
	if _, err := j.h.Ask(Question{Kind: AskHandTurn, Text: "Turn the " + shaft + " one turn by hand, the positive way, then enter",
		Detail: []string{fmt.Sprintf("One turn should count %.0f. The drive is off and disarmed.", want),
			"Positive is the way the arrow on the machine points."}}); err != nil {
		return "", err
	}
	after, err := j.atRest(want)
	if err != nil {
		return "", err
	}
	got := float64(after[len(after)-1].Counts - before[len(before)-1].Counts)
	finding, err := judgeCount(got, want)
	j.check("count", "board", err == nil, finding, sheet.Quantity{Name: "counts for one turn", Value: &got, Unit: "1"})
	j.h.Check(safety.CheckCount, err == nil)
	if err != nil {
		return "", err
	}
	seen, err := j.h.StopKey(Question{Kind: AskStopKey, Text: "Press the stop key now: space",
		Detail: []string{"Nothing moves. The time from the key to the wire to the board's answer is kept."}})
	if errors.Is(err, ErrDeclined) {
		return "", err // not asked for long enough to say that it failed
	}
	ok := err == nil && seen.Cuts > 0
	finding = stopFinding(seen)
	if errors.Is(err, ErrNoCut) {
		finding = err.Error()
		if _, gone := j.h.Request(protocol.VerbID, ""); errors.Is(gone, protocol.ErrNoAnswer) {
			return "", refuse(763, "stop key", "the board sends, but answers neither a cut nor a request: it hears nothing from this end", "look at the line to the board: cable, adapter, baud rate")
		}
		err = refuse(762, "stop key", finding, "a board that does not answer a cut is look-only: use the E-stop, mend the firmware")
	}
	j.check("stop key", "board", ok, finding, stopQuantities(seen)...)
	if err != nil {
		return "", err
	}
	j.h.Check(safety.CheckStopKey, ok)
	return result(fmt.Sprintf("%.0f counts for one turn, %.0f expected; stop key seen", got, want)), nil
}

// atRest watches until a hand that answered early has let the shaft come to
// rest, or for five seconds: a turn that is not yet over would count short.
func (j *Job) atRest(turn float64) ([]protocol.Sample, error) {
	for range 16 {
		s, err := j.h.Watch(300 * time.Millisecond)
		if err != nil {
			return nil, err
		}
		if err := j.needCounts(s); err != nil {
			return nil, err
		}
		if moved := abs64(s[len(s)-1].Counts - s[0].Counts); float64(moved) <= math.Max(2, 0.002*turn) {
			return s, nil
		}
	}
	return nil, refuse(764, "count check", "the shaft did not come to rest after the turn by hand", "let it stand, then turn it exactly one turn")
}

func (j *Job) needCounts(s []protocol.Sample) error {
	if n := j.h.Line().Restarts; len(s) == 0 && n > 0 {
		return refuse(727, "no telemetry", fmt.Sprintf("the board restarted by itself, %d times in this session", n), "look for dips of its supply and for a watchdog; then start again at the identity")
	}
	if len(s) == 0 {
		return refuse(711, "no telemetry", "the board sends no samples", "look at the link; ask for the identity again")
	}
	if s[len(s)-1].Has&protocol.HasCounts == 0 {
		return refuse(711, "no counts", "the board's telemetry carries no encoder counts", "the firmware must send U lines (SPEC P5.2)")
	}
	return nil
}

// countSlack is how far one turn by hand may be off: a hand does not stop on the
// degree, and the mistakes looked for are factors of two (our choice).
const countSlack = 0.08

// judgeCount compares what one turn counted with what it should.
func judgeCount(got, want float64) (string, error) {
	ratio := math.Abs(got) / want
	switch {
	case math.Abs(ratio-1) <= countSlack && got < 0:
		return "", refuse(712, "count check", fmt.Sprintf("one turn counted %.0f: the right number, the wrong way", got),
			"if you turned it the positive way, swap the encoder channels (power off) or the sign in the rig file; else turn it again")
	case math.Abs(ratio-1) <= countSlack:
		return fmt.Sprintf("%.0f counts for one turn by hand, %.0f expected", got, want), nil
	case got == 0:
		return "", refuse(760, "count check", "one turn counted nothing", "look at the encoder's plug and supply")
	}
	for _, f := range []float64{0.25, 0.5, 2, 4} {
		if math.Abs(ratio/f-1) <= countSlack {
			return "", refuse(710, "count check", fmt.Sprintf("one turn counted %.0f, expected were %.0f: the encoder is likely read x%g of what the rig file says", got, want, f),
				"compare lines and edges: x1, x2 or x4 of the lines on the label; correct the counts per turn where they are wrong")
		}
	}
	return "", refuse(710, "count check", fmt.Sprintf("one turn counted %.0f, expected were %.0f", got, want),
		"turn exactly one turn and try again; if it changes from turn to turn the encoder or its coupling slips; if it stays, correct counts per turn or gear ratio")
}

func speedNoise(s []protocol.Sample) float64 {
	v := make([]float64, len(s))
	for i := range s {
		v[i] = float64(s[i].Speed)
	}
	return spread(v)
}
