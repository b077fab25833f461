package job

import (
	"fmt"
	"math"
	"strings"

	"gainwright/tune/design"
	"gainwright/tune/model"
)

// Bounds of feed-forward (our choice). Static friction is made up for in part only:
// friction that has become less must not be driven over.
const (
	feedWorth    = 0.10 // of the error's area, or of the settling time: less is not worth a term more
	feedFriction = 0.8  // of sliding friction, the lesser direction
	feedShares   = 4    // shares of 1/K that are tried
	feedLength   = 8.0  // settling times of a start that is simulated
)

// How the words of feed-forward begin, and what they say where the board has no
// slot.
const (
	feedPrefix = "feed-forward of "
	noPlace    = "this board has no place for it"
)

// Feed is what a feed-forward is judged on beside the model.
type Feed struct {
	design.Friction
	Start float64 `json:"start_rad_s"` // setpoint of a start from rest
}

// feed takes friction and a start at a fifth of top speed, where it counts most.
func (j *Job) feed() *Feed {
	return &Feed{Friction: j.friction(), Start: math.Min(firstLoopShare*float64(j.Env.SpeedMax), j.VerifySpeed())}
}

// tracking sets the time by which a board with back-calculation leads its integral
// back: that of the integral, or its geometric mean with that of the derivative
// (Åström & Hägglund, PID Controllers, 2nd ed., section 3.5, from memory). With 0
// the integral winds up.
func (s DesignSettings) tracking(p *design.Proposal) {
	g := p.Gains.Parallel()
	if s.AntiWindup != design.AntiWindupBackCalculation || !contains(s.Slots, "tt") || !(g.Ki > 0) {
		return
	}
	tt := g.Kp / g.Ki
	if g.Kd > 0 {
		tt = math.Sqrt(g.Kd / g.Ki)
	}
	p.Gains.TrackingTime = math.Max(tt, s.SampleTime)
}

// feedForward proposes or declines the two terms on their merits, for the law that
// p has. What would be worth it and has no slot is said. Records from before it was
// judged have no Feed.
func (s DesignSettings) feedForward(loop model.Linear, p *design.Proposal) {
	if s.Feed == nil {
		return
	}
	var f design.Feedforward
	g := p.Gains
	lo, hi := -s.DriveMax, s.DriveMax
	if s.Quadrants == 1 {
		lo = 0
	}
	g.UMin, g.UMax = &lo, &hi
	var words string
	f.Speed, words = s.feedSpeed(loop, g)
	p.Notes = append(p.Notes, words)
	g.Feedforward = &design.Feedforward{Speed: f.Speed}
	f.StaticForward, words = s.feedStatic(loop, g)
	f.StaticReverse = f.StaticForward
	p.Notes = append(p.Notes, words)
	if f != (design.Feedforward{}) {
		p.Gains.Feedforward = &f
	}
}

// feedSpeed tries shares of 1/K, the drive that a speed needs: the largest that
// keeps the overshoot and is worth it. It acts on the setpoint alone, as the
// setpoint weight does, of which b + kv/kp is the same.
func (s DesignSettings) feedSpeed(loop model.Linear, g design.Gains) (kv float64, words string) {
	full := 1 / loop.DCGain()
	if math.IsInf(full, 0) || math.IsNaN(full) || full <= 0 {
		return 0, feedPrefix + "the speed declined: the model integrates, a steady speed needs no drive"
	}
	g = linear(g)
	length := 0.0
	step := func(kv float64) (design.Step, bool) {
		g.Feedforward = nil
		if kv > 0 {
			g.Feedforward = &design.Feedforward{Speed: kv}
		}
		r, err := design.SimulateLoop(loop, g, design.Scenario{Parts: []design.Part{{From: 1, To: 1, Duration: length}}})
		if err != nil {
			return design.Step{}, false
		}
		m := r.Measure(0, 0, 0, 1, settleShare)
		return m, m.SettlingTime.Known()
	}
	judged, err := design.Judge(loop, g)
	if err != nil || !judged.Step.SettlingTime.Known() {
		return 0, feedPrefix + "the speed declined: the loop without it does not settle"
	}
	length = math.Max(feedLength*float64(judged.Step.SettlingTime), 100*g.SampleTime)
	without, ok := step(0)
	if !ok {
		return 0, feedPrefix + "the speed declined: the loop without it does not settle"
	}
	best, first := without, without
	for i := 1; i <= feedShares; i++ {
		k := full * float64(i) / feedShares
		m, ok := step(k)
		if i == 1 {
			first = m
		}
		if ok && float64(m.Overshoot) <= 0.8*s.Overshoot && m.SettlingTime < (1-feedWorth)*best.SettlingTime {
			kv, best = k, m
		}
	}
	if kv == 0 && !first.SettlingTime.Known() {
		return 0, feedPrefix + fmt.Sprintf("the speed declined: with a quarter of 1/K, %s V/(rad/s), the step does not settle", number(full/feedShares))
	}
	if kv == 0 {
		return 0, feedPrefix + fmt.Sprintf("the speed declined: it acts on the setpoint as the setpoint weight does (b + kv/kp); a quarter of 1/K, %s V/(rad/s), makes the overshoot %.1f %% and the settling %.0f ms, without it %.1f %% and %.0f ms",
			number(full/feedShares), float64(first.Overshoot), 1000*float64(first.SettlingTime), float64(without.Overshoot), 1000*float64(without.SettlingTime))
	}
	words = feedPrefix + fmt.Sprintf("the speed kv = %s V/(rad/s): settling %.0f ms instead of %.0f, overshoot %.1f %%", number(kv), 1000*float64(best.SettlingTime), 1000*float64(without.SettlingTime), float64(best.Overshoot))
	if !contains(s.Slots, "kv") {
		return 0, words + "; not proposed, " + noPlace
	}
	return kv, words
}

// feedFact is what came of feed-forward, for the design page.
func feedFact(g design.Gains, notes []string) Fact {
	f := Fact{Name: "feed-forward", Value: "declined"}
	for _, n := range notes {
		if strings.HasPrefix(n, feedPrefix) {
			f.Why += strings.TrimPrefix(n, feedPrefix) + ". "
		}
	}
	switch ff := g.Feedforward; {
	case f.Why == "":
		f.Value = "not judged"
	case ff != nil:
		f.Value = fmt.Sprintf("kv %s, ks %s V", number(ff.Speed), number(ff.StaticForward))
	case strings.Contains(f.Why, noPlace):
		f.Value = "no place on this board"
	}
	return f
}

// feedStatic tries the friction that was found on a start from rest.
func (s DesignSettings) feedStatic(loop model.Linear, g design.Gains) (ks float64, words string) {
	if s.Feed.CoulombForward == 0 || s.Feed.Start <= 0 {
		return 0, feedPrefix + "friction declined: sliding friction is not known"
	}
	f := s.Feed
	try := f.CoulombForward
	if f.CoulombReverse > 0 {
		try = math.Min(try, f.CoulombReverse)
	}
	try *= feedFriction
	start := func(ks float64) (area, overshoot float64, ok bool) {
		ff := *g.Feedforward
		ff.StaticForward, ff.StaticReverse = ks, ks
		g.Feedforward = &ff
		settle := 0.5
		if m, err := design.Judge(loop, linear(g)); err == nil && m.Step.SettlingTime.Known() {
			settle = float64(m.Step.SettlingTime)
		}
		r, err := design.SimulateLoop(loop, g, design.Scenario{Friction: f.Friction, Parts: []design.Part{{From: f.Start, To: f.Start, Duration: math.Max(feedLength*settle, 100*g.SampleTime)}}})
		if err != nil {
			return 0, 0, false
		}
		for i, v := range r.Speed {
			area += math.Abs(r.Setpoint[i]-v) * r.Period
			overshoot = math.Max(overshoot, 100*(v/f.Start-1))
		}
		return area, overshoot, true
	}
	a0, o0, ok0 := start(0)
	a1, o1, ok1 := start(try)
	if !ok0 || !ok1 || a0 == 0 {
		return 0, feedPrefix + "friction declined: a start from rest cannot be simulated"
	}
	gain := 100 * (1 - a1/a0)
	what := fmt.Sprintf("ks = %s V, %.0f %% of sliding friction, takes %.0f %% off the error of a start from rest to %s, overshoot %.1f %% (without it %.1f %%)", number(try), 100*feedFriction, gain, rpm(f.Start), o1, o0)
	switch {
	case gain < 100*feedWorth:
		return 0, feedPrefix + "friction declined: " + what + ": not worth it"
	case o1 > math.Max(s.Overshoot, o0):
		return 0, feedPrefix + "friction declined: " + what
	case !contains(s.Slots, "ks"):
		return 0, feedPrefix + "friction: " + what + "; not proposed, " + noPlace
	}
	return try, feedPrefix + "friction: " + what
}
