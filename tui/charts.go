package tui

import (
	"math"

	"gainwright/tui/palette"
	"gainwright/tui/strip"
	"gainwright/tune/job"
)

// curve is one line of a chart and what it shows.
type curve struct {
	kind   strip.Kind
	points []job.Point
}

// plot says what a chart shows.
type plot struct {
	title string
	unit  string  // of the horizontal axis
	scale float64 // from the unit of the points to the one shown
	limit float64 // in the unit shown; 0 for none
	near  bool    // the limit is drawn only where the curves come near it
	x0    float64 // range of the horizontal axis where x1 > x0; otherwise that of the curves
	x1    float64
	zero  bool // the vertical axis holds zero
	low   []job.Point
	high  []job.Point
	marks []float64
	// powers says that the horizontal axis is in powers of ten.
	powers bool
	levels []level
	dots   []job.Point // single points, with the ends of their ± in pairs
	bars   []job.Point
}

// level is a line across a chart with its word.
type level struct {
	at   float64
	word string
}

// gutter is the room for labels beside a chart: speeds take four figures, so
// every chart keeps as much and their times line up.
const gutter = 4

// curves draws a chart over the whole of a.
func (p *painter) curves(a area, pl plot, cs ...curve) {
	if a.w <= 0 || a.h <= 0 {
		return
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	t0, t1 := lo, hi
	for _, c := range cs {
		lo, hi = strip.Values(lo, hi, c.points, pl.scale)
		t0, t1 = strip.Times(t0, t1, c.points)
	}
	lo, hi = strip.Values(lo, hi, pl.low, pl.scale)
	lo, hi = strip.Values(lo, hi, pl.high, pl.scale)
	for _, pts := range [][]job.Point{pl.dots, pl.bars} {
		lo, hi = strip.Values(lo, hi, pts, pl.scale)
		t0, t1 = strip.Times(t0, t1, pts)
	}
	if pl.x1 > pl.x0 {
		t0, t1 = pl.x0, pl.x1
	}
	if t0 > t1 || (lo > hi && pl.limit == 0) {
		a.put(1, 0, palette.Plain, pl.title)
		a.put(1, 1, palette.Plain, "no samples yet")
		return
	}
	if lo > hi {
		lo, hi = 0, pl.limit
	}
	if pl.zero {
		lo, hi = min(lo, 0), max(hi, 0)
	}
	if pl.near && max(hi, -lo) < pl.limit/2 {
		pl.limit = 0
	}
	if pl.limit > 0 {
		if hi > 0 || lo >= 0 {
			hi = max(hi, pl.limit)
		}
		if lo < -0.02*pl.limit {
			lo = min(lo, -pl.limit)
		}
	}
	room := 0.04 * (hi - lo)
	if lo != 0 || !pl.zero {
		lo -= room
	}
	hi += room
	ch := &p.chart
	ch.Reset(a.w, a.h, p.s.look.Glyphs, strip.Axes{X0: t0, X1: t1, Y0: lo, Y1: hi, Title: p.tame(pl.title), XUnit: p.tame(pl.unit), Gutter: gutter, Powers: pl.powers})
	if len(pl.low) > 0 {
		strip.Shade(ch, pl.low, pl.high, pl.scale)
	}
	for _, m := range pl.marks {
		ch.Upright(m)
	}
	if pl.limit > 0 {
		ch.Level(pl.limit, "limit")
		ch.Level(-pl.limit, "limit")
	}
	for _, l := range pl.levels {
		ch.Level(l.at, l.word)
	}
	for _, c := range cs {
		strip.Line(ch, c.kind, c.points, pl.scale)
	}
	for i := 0; i+1 < len(pl.bars); i += 2 {
		strip.Line(ch, strip.Second, pl.bars[i:i+2], pl.scale)
	}
	strip.Points(ch, strip.Data, pl.dots, 1, pl.scale)
	p.blit(a)
}

var kindRoles = [...]palette.Role{
	strip.Blank: palette.Plain, strip.Label: palette.Plain, strip.Axis: palette.Thin, strip.Band: palette.Thin,
	strip.Limit: palette.Edge, strip.Forecast: palette.Thin, strip.Setpoint: palette.Thin, strip.Second: palette.Beside,
	strip.Mark: palette.Thin, strip.Data: palette.Main,
}

// blit copies the chart to the canvas.
func (p *painter) blit(a area) {
	_, h := p.chart.Size()
	for y := 0; y < min(h, a.h); y++ {
		for x, c := range p.chart.Row(y) {
			if c.Kind != strip.Blank && x < a.w {
				p.set(a.x+x, a.y+y, c.Rune, kindRoles[c.Kind])
			}
		}
	}
}

// stairs draws steady points of voltage and speed, with the way they were
// measured from the first to the last.
func (p *painter) stairs(a area, pts []job.Point) {
	if a.w <= 0 || a.h <= 0 {
		return
	}
	lo, hi := strip.Values(0, 0, pts, rpmPerRad)
	t0, t1 := strip.Times(0, 0, pts)
	room := 0.05 * (hi - lo)
	ch := &p.chart
	ch.Reset(a.w, a.h, p.s.look.Glyphs, strip.Axes{X0: t0, X1: t1 * 1.02, Y0: lo - room, Y1: hi + room, Title: "staircase: rpm against V", XUnit: "V", Gutter: gutter})
	strip.Points(ch, strip.Data, pts, 1, rpmPerRad)
	p.blit(a)
}

// digits holds figures that can be read from two metres, five rows high.
var digits = map[rune][5]string{
	'0': {"#####", "#   #", "#   #", "#   #", "#####"},
	'1': {"  #  ", " ##  ", "  #  ", "  #  ", " ### "},
	'2': {"#####", "    #", "#####", "#    ", "#####"},
	'3': {"#####", "    #", " ####", "    #", "#####"},
	'4': {"#   #", "#   #", "#####", "    #", "    #"},
	'5': {"#####", "#    ", "#####", "    #", "#####"},
	'6': {"#####", "#    ", "#####", "#   #", "#####"},
	'7': {"#####", "    #", "   # ", "  #  ", "  #  "},
	'8': {"#####", "#   #", "#####", "#   #", "#####"},
	'9': {"#####", "#   #", "#####", "    #", "#####"},
	'-': {"     ", "     ", "#####", "     ", "     "},
	'.': {"     ", "     ", "     ", "     ", "  #  "},
	' ': {"     ", "     ", "     ", "     ", "     "},
}

// big writes s in large figures from x, y on and returns the column behind it;
// where they do not fit it writes s as it is.
func (p *painter) big(a area, x, y int, s string) int {
	if x+6*len(s) > a.w || y+5 > a.h {
		return a.put(x, y, palette.Strong, s)
	}
	full := "█"
	if p.ascii {
		full = "#"
	}
	for _, r := range s {
		for row, bits := range digits[r] {
			for col, b := range bits {
				if b == '#' {
					a.put(x+col, y+row, palette.Strong, full)
				}
			}
		}
		x += 6
	}
	return x
}
