package identify

import (
	"math"
	"sort"

	"gainwright/tune/trace"
)

// observation says what the samples are: the speed itself, its mean over a
// window, or the position counted so far.
type observation int

const (
	instant observation = iota
	windowMean
	position
)

// span is a run of samples behind one initial state. Samples that are masked
// without a break lie inside it and are listed in skip.
type span struct {
	from, to int   // samples of the stretch
	skip     []int // indices in [from, to) that are not used
	steady   bool  // starts at rest under the voltage before it: no free state
	used     int
}

// stretch is one gap-free piece of a trace, prepared for fitting.
type stretch struct {
	trace  int     // index among the traces fitted together
	first  int     // sample of the trace at which it starts
	lag    float64 // s after the trace's first sample at which it starts
	drive  *drive
	y      []float64
	spans  []span
	obs    observation
	window float64
	held   []heldRun // position only: where the rounding of the counts stands still
}

// heldRun is a run of samples of a stretch in which the counts advance by the same
// number every time, none included: their rounding error is then one and the same.
type heldRun struct{ from, to int }

// heldLeast is the shortest run that counts as held; heldMost how many of the
// longest are given an offset of their own.
const (
	heldLeast = 8
	heldMost  = 6
)

// findHeld lists the held runs of a position record, the longest heldMost of them
// in the order of time.
func (s *stretch) findHeld(quantum float64) {
	for from := 0; from+1 < len(s.y); {
		to := from + 2
		for to < len(s.y) && math.Abs(s.y[to]-2*s.y[to-1]+s.y[to-2]) < 1e-6*quantum {
			to++
		}
		if to-from >= heldLeast {
			s.held = append(s.held, heldRun{from, to})
		}
		from = max(to-1, from+1)
	}
	sort.SliceStable(s.held, func(i, j int) bool { return s.held[i].to-s.held[i].from > s.held[j].to-s.held[j].from })
	s.held = s.held[:min(len(s.held), heldMost)]
	sort.Slice(s.held, func(i, j int) bool { return s.held[i].from < s.held[j].from })
}

// heldIn lists the held runs that begin in a span.
func (s *stretch) heldIn(sp span) []heldRun {
	var out []heldRun
	for _, h := range s.held {
		if h.from >= sp.from && h.from < sp.to {
			out = append(out, h)
		}
	}
	return out
}

// stretches cuts a trace at its gaps and, inside each piece, at the masks behind
// which the motor's state is not known.
func stretches(tr *trace.Trace, number int, obs observation, steadyStart bool) []*stretch {
	var out []*stretch
	n := tr.Len()
	for from := 0; from < n; {
		to := from + 1
		for to < n && tr.At(to) != trace.Gap {
			to++
		}
		if to-from >= 3 {
			if s := newStretch(tr, number, from, to, obs, steadyStart && from == 0); len(s.spans) > 0 {
				out = append(out, s)
			}
		}
		from = to
	}
	return out
}

func newStretch(tr *trace.Trace, number, from, to int, obs observation, steadyStart bool) *stretch {
	n := to - from
	s := &stretch{trace: number, first: from, lag: tr.Time[from] - tr.Time[0], obs: obs, window: tr.Window}
	if obs == windowMean && tr.Window == 0 {
		s.obs = instant
	}
	t, u := make([]float64, n), make([]float64, n)
	s.y = make([]float64, n)
	for i := 0; i < n; i++ {
		t[i] = tr.Time[from+i] - tr.Time[from]
		if obs == position {
			s.y[i] = tr.Counts[from+i] * tr.RadPerCount
		} else {
			s.y[i] = tr.Speed[from+i]
		}
		// u[i] holds from t[i] on.
		if tr.Hold == trace.From {
			u[i] = tr.Voltage[from+i]
		} else if i+1 < n {
			u[i] = tr.Voltage[from+i+1]
		} else {
			u[i] = tr.Voltage[from+i]
		}
	}
	s.drive = newDrive(t, u, tr.Voltage[from])
	if obs == position {
		s.findHeld(tr.RadPerCount)
	}
	s.cut(tr, steadyStart)
	return s
}

// spanLeast is the fewest used samples that are worth a free initial state.
const spanLeast = 8

func (s *stretch) cut(tr *trace.Trace, steadyStart bool) {
	n := len(s.y)
	breaks := func(i int) bool { m := tr.At(s.first + i); return m.Breaks() && !(m == trace.Gap && i == 0) }
	for i := 0; i < n; {
		if breaks(i) {
			i++
			continue
		}
		sp := span{from: i, steady: steadyStart && i == 0}
		for i < n && !breaks(i) {
			if tr.At(s.first+i) != trace.Used {
				sp.skip = append(sp.skip, i)
			}
			i++
		}
		sp.to = i
		// The window of the first sample behind a restart reaches into what is
		// not known.
		if !sp.steady && s.obs == windowMean && (len(sp.skip) == 0 || sp.skip[0] != sp.from) {
			sp.skip = append([]int{sp.from}, sp.skip...)
		}
		sp.used = sp.to - sp.from - len(sp.skip)
		if sp.used >= spanLeast {
			s.spans = append(s.spans, sp)
		}
	}
}
