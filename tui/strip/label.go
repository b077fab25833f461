package strip

import (
	"math"
	"strconv"
	"unicode/utf8"
)

// gutterMax is the widest column of labels beside a plot, in cells.
const gutterMax = 9

// frame lays out the plot area and writes title and labels. A chart too small
// for words is all plot.
func (c *Chart) frame() {
	c.px, c.py, c.pw, c.ph = 0, 0, c.w, c.h
	if c.ax.Bare || c.w < 20 || c.h < 4 {
		return
	}
	if c.ax.Title != "" {
		c.py++
		c.ph--
	}
	c.ph-- // labels of the horizontal axis
	step := niceStep(c.ax.Y1-c.ax.Y0, max(min(2, c.ph-1), c.ph/3, 1))
	widest := 1
	c.eachTick(c.ax.Y0, c.ax.Y1, step, func(v float64) {
		widest = max(widest, len(c.number(v, step)))
	})
	gutter := min(max(widest, c.ax.Gutter), gutterMax)
	c.px, c.pw = gutter+1, c.w-gutter-1
	c.text(c.px, 0, 0, c.title(), Label)

	sign := '|'
	if c.glyphs != ASCII {
		sign = '│'
	}
	for y := 0; y < c.ph; y++ {
		c.cells[(c.py+y)*c.w+gutter] = Cell{sign, Axis}
	}
	ky := float64(c.ph*c.dy-1) / (c.ax.Y1 - c.ax.Y0)
	taken := -1
	c.eachTick(c.ax.Y0, c.ax.Y1, step, func(v float64) {
		row := int((c.ax.Y1-v)*ky+0.5) / c.dy
		if row == taken || row >= c.ph {
			return
		}
		taken = row
		s := c.number(v, step)
		c.bytes(gutter-len(s), c.py+row, s)
	})
	c.across()
}

func (c *Chart) title() string {
	if c.py == 0 {
		return ""
	}
	return c.ax.Title
}

// across writes the labels of the horizontal axis into the last row.
func (c *Chart) across() {
	row := c.h - 1
	step := niceStep(c.ax.X1-c.ax.X0, max(1, c.pw/10))
	if c.ax.Powers {
		step = math.Max(1, math.Ceil(step)) // whole decades
	}
	kx := float64(c.pw*c.dx-1) / (c.ax.X1 - c.ax.X0)
	unit := utf8.RuneCountInString(c.ax.XUnit)
	room := c.w - unit - 1 // the unit stands at the right end
	free := c.px - 1
	c.eachTick(c.ax.X0, c.ax.X1, step, func(v float64) {
		s := c.number(v, step)
		if c.ax.Powers {
			s = strconv.AppendFloat(c.num[:0], math.Pow(10, math.Round(v)), 'g', 3, 64)
		}
		x := c.px + int((v-c.ax.X0)*kx+0.5)/c.dx
		if v > c.ax.X0 {
			x -= len(s) / 2
		}
		x = min(x, room-len(s))
		if x <= free {
			return
		}
		c.bytes(x, row, s)
		free = x + len(s)
	})
	c.text(c.w-unit, row, 0, c.ax.XUnit, Label)
}

// niceStep returns a step of 1, 2 or 5 times a power of ten that divides span
// into at most n parts.
func niceStep(span float64, n int) float64 {
	raw := span / float64(n)
	if !(raw > 0) || math.IsInf(raw, 0) {
		return 1
	}
	base := math.Pow(10, math.Floor(math.Log10(raw)))
	for _, m := range []float64{1, 2, 5, 10} {
		if base*m >= raw*0.999999 {
			return base * m
		}
	}
	return base * 10
}

// eachTick calls f for the multiples of step within lo..hi, at most 100.
func (c *Chart) eachTick(lo, hi, step float64, f func(float64)) {
	first := math.Ceil(lo/step - 1e-9)
	for i := 0; i < 100; i++ {
		v := (first + float64(i)) * step
		if !(v <= hi+step*1e-9) {
			return
		}
		f(v)
	}
}

// number writes v with as many decimals as step needs. The bytes are valid
// until the next call.
func (c *Chart) number(v, step float64) []byte {
	if math.Abs(v) < step/1000 {
		v = 0
	}
	exp := int(math.Floor(math.Log10(step) + 1e-9))
	if exp > 5 || exp < -5 {
		return strconv.AppendFloat(c.num[:0], v, 'g', 3, 64)
	}
	return strconv.AppendFloat(c.num[:0], v, 'f', max(0, -exp), 64)
}

func (c *Chart) bytes(x, y int, s []byte) {
	for i, b := range s {
		if x+i >= 0 && x+i < c.w && y >= 0 && y < c.h {
			c.cells[y*c.w+x+i] = Cell{rune(b), Label}
		}
	}
}

// text writes words from column x on, but not left of column least.
func (c *Chart) text(x, y, least int, s string, k Kind) {
	for _, r := range s {
		if x >= least && x >= 0 && x < c.w && y >= 0 && y < c.h {
			c.cells[y*c.w+x] = Cell{r, k}
		}
		x++
	}
}
