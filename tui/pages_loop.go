package tui

import (
	"fmt"
	"math"

	"gainwright/tui/palette"
	"gainwright/tui/strip"
	"gainwright/tune/job"
)

// loop draws the open loop of the proposal: gain over phase, the margins where they
// are read off, and the worst draw beside it.
func (p *painter) loop(a area) {
	d := p.v.Design
	if d == nil || len(d.Bode.Gain) == 0 {
		a.put(1, 0, palette.Plain, "No loop yet: it comes with the proposal.")
		return
	}
	b := d.Bode
	head := []string{}
	if b.PM != nil && b.Crossover != nil {
		head = append(head, fmt.Sprintf("phase margin %.1f deg at %.3g Hz", *b.PM, math.Pow(10, *b.Crossover)))
	}
	if b.GM != nil && b.PhaseCross != nil {
		head = append(head, fmt.Sprintf("gain margin %.1f dB at %.3g Hz", *b.GM, math.Pow(10, *b.PhaseCross)))
	}
	x := 1
	for i, s := range head {
		if i > 0 {
			x = a.put(x, 0, palette.Plain, "   ")
		}
		x = a.put(x, 0, palette.Strong, s)
	}
	if d.CanBeMoved && x+30 < a.w {
		a.put(x+3, 0, palette.Plain, fmt.Sprintf("bound on Ms %.2f, j k", d.MsMax))
	}
	marks := []float64{}
	for _, m := range []*float64{b.Crossover, b.PhaseCross} {
		if m != nil {
			marks = append(marks, *m)
		}
	}
	body := a.sub(0, 1, a.w, a.h-1)
	top := body.h / 2
	title := ""
	if len(b.WorstGain) > 0 {
		title = "   dotted: worst case"
	}
	lowest, low := -40.0, -360.0
	p.curves(body.sub(0, 0, body.w, top), plot{title: "gain, dB" + title, unit: "Hz", scale: 1, powers: true, zero: true, marks: marks, levels: []level{{0, "0 dB"}}},
		curve{strip.Forecast, above(b.WorstGain, lowest)}, curve{strip.Data, above(b.Gain, lowest)})
	p.curves(body.sub(0, top, body.w, body.h-top), plot{title: "phase, degrees", unit: "Hz", scale: 1, powers: true, marks: marks, levels: []level{{-180, "-180"}}},
		curve{strip.Forecast, above(b.WorstPhase, low)}, curve{strip.Data, above(b.Phase, low)})
}

// above leaves out what lies under a level, so that what matters keeps its height.
func above(pts []job.Point, least float64) []job.Point {
	for i, q := range pts {
		if q.V < least {
			return pts[:i]
		}
	}
	return pts
}
