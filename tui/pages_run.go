package tui

import (
	"fmt"
	"math"

	"gainwright/tui/palette"
	"gainwright/tui/strip"
	"gainwright/tune/job"
)

// plan draws a plan with its forecast, and below it the way from the arm to the
// run.
func (p *painter) plan(a area) {
	pl := p.v.Plan
	if pl == nil {
		a.put(1, 0, palette.Plain, "No plan waits. A step of the path that moves the motor brings one.")
		return
	}
	flow := 4
	body := a.sub(0, 0, a.w, a.h-flow)
	p.flow(a.sub(0, a.h-flow, a.w, flow))

	left := 41
	if a.w > 100 {
		left = 50
	}
	facts := body.sub(0, 0, left, body.h)
	y := facts.sub(1, 0, left-2, facts.h).wrap(0, palette.Plain, pl.Purpose)
	kind := fmt.Sprintf("%d segments, %s", pl.Segments, pl.Mode)
	if pl.Resize {
		kind += ", size " + number(pl.Size*100, 0) + p.keyed(" % ({j} {k})")
	}
	facts.put(1, y, palette.Plain, kind)
	widths := p.widths(facts.w, pl.Facts)
	if widths[2] > 0 {
		head := facts.sub(1, y+1, facts.w-1, 1)
		head.put(widths[0], 0, palette.Strong, "forecast")
		head.put(widths[0]+widths[1], 0, palette.Strong, "limit")
		y++
	}
	p.rows(facts, y+1, widths, pl.Facts)

	x := left + 1
	if p.v.Drive.Phase == countDown {
		p.count(body.sub(x, 0, body.w-x, body.h))
		return
	}
	top := body.h * 3 / 5
	low, high := band(pl.Expect, pl.Band)
	p.curves(body.sub(x, 0, body.w-x, top), plot{
		title: "forecast speed, rpm", unit: "s", scale: rpmPerRad, limit: p.v.Drive.SpeedMax.RPM(), zero: true, low: low, high: high,
	}, curve{strip.Data, pl.Expect})
	title, scale, limit := "drive, V", 1.0, float64(p.v.Drive.VoltsMax)
	if pl.Unit == "rad/s" {
		title, scale, limit = "setpoint, rpm", rpmPerRad, 0
	}
	p.curves(body.sub(x, top, body.w-x, body.h-top), plot{title: title, unit: "s", scale: scale, limit: limit, zero: true}, curve{strip.Second, pl.Drive})
}

// band returns the curves that lie a share of the value above and below pts.
func band(pts []job.Point, share float64) (low, high []job.Point) {
	if !(share > 0) {
		return nil, nil
	}
	for _, q := range pts {
		d := math.Abs(q.V) * share
		low = append(low, job.Point{T: q.T, V: q.V - d})
		high = append(high, job.Point{T: q.T, V: q.V + d})
	}
	return low, high
}

// count shows the count-down so that it can be read from two metres.
func (p *painter) count(a area) {
	left := fmt.Sprint(int(math.Ceil(max(0, p.v.Drive.CountLeft.Seconds()))))
	a.put(2, 0, palette.Strong, "The motor starts in")
	p.big(a, 6, 2, left)
	a.put(2, 8, palette.Strong, "Any key ends the count-down.")
}

// flow shows the five acts from a plan to a run and says what is asked now.
func (p *painter) flow(a area) {
	d := p.v.Drive
	at, say := 0, p.keyed("{a} arms this plan; the arm lapses by itself. {b} puts the plan aside.")
	switch {
	case d.Phase == arming:
		at, say = 0, "The board is asked for the arm; it reads the limits back first."
	case d.Phase == armed && d.ClearAsk:
		at, say = 1, p.keyed("Is everyone clear of the shaft, tools away, guard closed?   {y} area is clear   {x} disarm")
		if d.ClearWait > 0 {
			say = "Look at the shaft: is everyone clear, tools away, guard closed? An answer counts in " + seconds(d.ClearWait) + "."
		}
	case d.Phase == armed && d.Inch && d.Inches > 0:
		at, say = 4, p.keyed("{g} moves the next inch; any other key disarms. The arm lapses in ")+whole(d.ArmLeft)+"."
	case d.Phase == armed:
		at, say = 2, p.keyed("{g} starts the count-down of 3 s.   {x} disarms.   The arm lapses in ")+whole(d.ArmLeft)+"."
	case d.Phase == countDown:
		at, say = 3, "The motor starts in "+whole(d.CountLeft)+". Any key ends the count-down."
	case d.Phase == running || d.Phase == stopping:
		at, say = 4, "The run goes on."
	}
	if pl := p.v.Plan; pl != nil {
		x := 1
		for i, n := range pl.Notes {
			role := palette.Plain
			if i < pl.Grave {
				role = palette.Caution
			}
			x = a.put(x, 0, role, n) + 2
		}
	}
	x := 1
	for i, word := range []string{"1 arm", "2 area clear", "3 go", "4 count-down", "5 run"} {
		role := palette.Plain
		if i == at {
			role = palette.Chosen
		}
		x = a.put(x, 1, role, " "+word+" ")
		if i < 4 {
			arrow := " → "
			if p.ascii {
				arrow = " > "
			}
			x = a.put(x, 1, palette.Plain, arrow)
		}
	}
	a.sub(1, 0, a.w-2, a.h).wrap(2, palette.Strong, say)
}

// live draws the run that goes on, or the last one.
func (p *painter) live(a area) {
	l := p.v.Live
	if l == nil {
		a.put(1, 0, palette.Plain, "Nothing has run yet.")
		return
	}
	p.runHead(a)
	length := max(l.Length, l.Elapsed).Seconds()
	if length <= 0 {
		length = 1
	}
	body := a.sub(0, 3, a.w, a.h-3)
	top := body.h * 3 / 5
	legend, drive := "speed, rpm", "drive, V"
	if l.Running && !p.fresh() {
		legend, drive = "NOT FRESH  "+legend, "NOT FRESH  "+drive
	}
	if len(l.Expect) > 0 {
		legend += "   dotted: forecast"
	}
	if len(l.Setpoint) > 0 {
		legend += "   dashed: setpoint"
	}
	x0 := 0.0
	p.curves(body.sub(0, 0, body.w, top), plot{
		title: legend, unit: "s", scale: rpmPerRad, limit: l.SpeedMax * rpmPerRad, x0: x0, x1: length, zero: true, marks: l.Marks,
	}, curve{strip.Forecast, l.Expect}, curve{strip.Setpoint, l.Setpoint}, curve{strip.Data, l.Speed})
	p.curves(body.sub(0, top, body.w, body.h-top), plot{
		title: drive, unit: "s", scale: 1, limit: l.VoltsMax, x0: x0, x1: length, zero: true,
	}, curve{strip.Second, l.Volts})
}

// runHead draws the three rows above the strips of a run.
func (p *painter) runHead(a area) {
	l := p.v.Live
	switch {
	case l.Running && !p.fresh():
		role, text := p.old(fmt.Sprintf("was running, %s of %s", seconds(l.Elapsed), seconds(l.Length)))
		a.put(1, 0, role, text)
	case l.Running:
		x := a.put(1, 0, palette.Moving, " RUNNING ")
		text := fmt.Sprintf("%s of %s, %s left", seconds(l.Elapsed), seconds(l.Length), seconds(max(0, l.Length-l.Elapsed)))
		x = a.put(x+2, 0, palette.Plain, text)
		share := 0.0
		if l.Length > 0 {
			share = float64(l.Elapsed) / float64(l.Length)
		}
		p.progress(a, x+2, 0, min(30, a.w-x-12), share)
	case l.Ended != "":
		x := a.put(1, 0, palette.Strong, "ENDED")
		a.put(x+2, 0, palette.Plain, l.Ended+", after "+seconds(l.Elapsed)+" of "+seconds(l.Length))
	default:
		a.put(1, 0, palette.Strong, "not running")
	}
	if l.Segment != "" {
		x := a.put(1, 1, palette.Plain, "segment")
		a.put(x+1, 1, palette.Strong, l.Segment)
	}
	if a.w < 70 {
		return
	}
	if l.Learn != "" {
		a.put(a.w/2, 1, palette.Strong, l.Learn)
	}
	if n := len(l.Marks); n > 0 {
		a.right(a.w-1, 1, palette.Plain, fmt.Sprintf("marks: %d", n))
	}
}
