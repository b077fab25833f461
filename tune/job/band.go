package job

import (
	"fmt"
	"math"

	"gainwright/safety"
)

// Band is where the speed of a run is expected. Left is called with the samples in
// the order of time.
type Band struct {
	Line  []Point // s since the first drive value, rad/s
	Width float64 // rad/s either way
	Slack float64 // s by which the run may be early or late
	For   float64 // s outside before it counts
	Swing float64 // rad/s to either side of the forecast, in closed loop; swings of more, one after another, are hunting; 0: not judged

	since  float64
	out    bool
	cursor int
	side   int       // of the forecast, at which the last swing was
	turned []float64 // s at which it went over to the other
}

// Widths of the band (our choice). The forecast's own is for what is likely; this
// one is for what is wrong.
const (
	bandTimes   = 3.0  // of the forecast's band
	bandShare   = 0.15 // of the top speed, at least
	bandLoop    = 0.35 // the same in closed loop
	bandSlack   = 0.03 // s, and a third of the time constant
	bandFor     = 0.06 // s
	bandPattern = 0.05 // s, for the request that begins a pattern in the board's loop

	// A step that rings has a few swings; a loop that hunts does not end.
	swingShare  = 0.08 // of the top speed
	swingTurns  = 8
	swingWithin = 1.0 // s
)

// band makes the band of a plan, nil where the forecast does not rest on a model
// or the run may end its segments early.
func (j *Job) band(p safety.Plan, line []Point, own float64) *Band {
	last := p.Segments[len(p.Segments)-1].Pattern
	if p.Check != safety.CheckNone || p.Locked || last.Kind == safety.PatternRelay || len(line) < 2 || j.Fit == nil || j.Fit.Best() == nil {
		return nil
	}
	end := 0.0
	for i, s := range p.Segments {
		if s.Until.Kind != safety.UntilTime {
			if i < len(p.Segments)-1 || s.Until.Kind != safety.UntilRest {
				return nil
			}
			break
		}
		end += s.Duration.Seconds()
	}
	top := 0.0
	for _, q := range line {
		top = math.Max(top, math.Abs(q.V))
	}
	share := bandShare
	if p.Segments[0].Mode == safety.ModeSpeed {
		share = bandLoop
	}
	b := &Band{Width: math.Max(math.Max(bandTimes*own, share)*top, 6*math.Max(j.Noise, j.sizing().SpeedStep)), Slack: bandSlack + j.Tau/3, For: bandFor}
	if p.Segments[0].Mode == safety.ModeSpeed {
		b.Swing = math.Max(swingShare*top, 6*math.Max(j.Noise, j.sizing().SpeedStep))
	}
	if p.HasPattern() {
		b.Slack += bandPattern
	}
	for _, q := range line {
		if q.T <= end {
			b.Line = append(b.Line, q)
		}
	}
	return b
}

// swings reports in words that the speed swings about the forecast again and again.
func (b *Band) swings(t, off float64) string {
	side := 0
	switch {
	case b.Swing <= 0:
		return ""
	case off > b.Swing:
		side = 1
	case off < -b.Swing:
		side = -1
	}
	if side == 0 || side == b.side {
		return ""
	}
	b.side = side
	b.turned = append(b.turned, t)
	n := len(b.turned)
	if n < swingTurns || t-b.turned[n-swingTurns] > swingWithin {
		return ""
	}
	return fmt.Sprintf("hunting: %d swings of more than %s about its forecast within %.2f s", swingTurns, rpm(b.Swing), t-b.turned[n-swingTurns])
}

// Left reports in words that the speed has been outside for long enough, "" else.
func (b *Band) Left(t, speed float64) string {
	if b == nil || len(b.Line) < 2 || t > b.Line[len(b.Line)-1].T-b.Slack {
		return ""
	}
	for b.cursor < len(b.Line)-1 && b.Line[b.cursor+1].T < t-b.Slack {
		b.cursor++
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for i := b.cursor; i < len(b.Line); i++ {
		lo, hi = math.Min(lo, b.Line[i].V), math.Max(hi, b.Line[i].V)
		if b.Line[i].T > t+b.Slack {
			break
		}
	}
	if words := b.swings(t, speed-(lo+hi)/2); words != "" {
		return words
	}
	if speed >= lo-b.Width && speed <= hi+b.Width {
		b.out = false
		return ""
	}
	if !b.out {
		b.out, b.since = true, t
	}
	if t-b.since < b.For {
		return ""
	}
	return fmt.Sprintf("%s at %.2f s, forecast %s to %s ± %s", rpm(speed), t, rpm(lo), rpm(hi), rpm(b.Width))
}
