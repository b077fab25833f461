package forecast

import (
	"math"

	"gainwright/safety"
)

// pattern returns what the board's loop adds in step i of a segment, in V. A relay
// sees the speed late by the dead time.
func (r *runner) pattern(seg safety.Segment, h float64) func(i int) float64 {
	x := seg.Pattern
	if x.Kind == safety.PatternNone {
		return func(int) float64 { return 0 }
	}
	if x.Kind == safety.PatternRelay {
		return r.relay(x, h)
	}
	levels := x.Levels()
	each := float64(x.Loops) * r.s.k.Loop
	return func(i int) float64 {
		at := int((float64(i) + 0.5) * h / each)
		switch {
		case each <= 0 || at >= len(levels):
			return 0
		case levels[at]:
			return x.Amplitude
		}
		return -x.Amplitude
	}
}

func (r *runner) relay(x safety.Pattern, h float64) func(i int) float64 {
	late := make([]float64, int(math.Round((r.s.m.DeadTime+r.s.k.Loop)/h))+1)
	for i := range late {
		late[i] = r.speed
	}
	up, switched := false, 0
	return func(i int) float64 {
		seen := late[i%len(late)]
		late[i%len(late)] = r.speed
		was := up
		switch {
		case i == 0:
			up, was = seen < x.Middle, seen < x.Middle
		case seen >= x.Middle+x.Hysteresis:
			up = false
		case seen <= x.Middle-x.Hysteresis:
			up = true
		}
		if up != was {
			switched++
		}
		switch {
		case switched >= x.Switchings:
			return 0
		case up:
			return x.Amplitude
		}
		return -x.Amplitude
	}
}
