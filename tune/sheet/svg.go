package sheet

import (
	"fmt"
	"html"
	"math"
	"slices"
	"strings"

	"gainwright/tune/sheet/plain"
)

// plot is one diagram of the report. It becomes SVG inside the page: no script,
// no font and no file from outside, lines told apart by their dashes so that a
// black-and-white printer will do.
type plot struct {
	title, xLabel, yLabel string
	logX                  bool
	height                int // 0 stands for plotHeight
	series                []series
	bands                 []band
	vertical              []mark
	horizontal            []mark
}

// series is a line, or with points set a cloud of marks. NaN and infinities
// leave a gap.
type series struct {
	name   string
	x, y   []float64
	points bool
}

// band is an area between two lines over the same x.
type band struct {
	name         string
	x, low, high []float64
}

// mark is a line across the whole plot with its words.
type mark struct {
	at    float64
	label string
}

const (
	plotWidth  = 720
	plotHeight = 240
	padLeft    = 62
	padRight   = 14
	padTop     = 34
	padBottom  = 40
	// pointsMax is where a line has more points than the plot has columns to
	// tell apart; past it each column keeps its lowest and highest.
	pointsMax = 1600
)

var strokes = []struct{ colour, dash string }{
	{"#000", ""}, {"#0060b0", "7 3"}, {"#b04a00", "2 3"}, {"#666", "10 3 2 3"}, {"#006a4e", "1 4"},
}

// svg returns the diagram, or a sentence if there is nothing to draw.
func (p plot) svg() string {
	a := p.axes()
	if !a.ok {
		return "<p>" + shownText(p.title) + ": no data to draw.</p>\n"
	}
	var b strings.Builder
	fmt.Fprintf(&b, `<svg xmlns="http://www.w3.org/2000/svg" role="img" viewBox="0 0 %d %d" class="plot"><title>%s</title>`+"\n", plotWidth, a.height, shownText(p.title))
	fmt.Fprintf(&b, `<text x="%d" y="14" class="t">%s</text>`+"\n", padLeft, shownText(p.title))
	a.grid(&b, p.xLabel, p.yLabel)
	for _, band := range p.bands {
		a.band(&b, band)
	}
	for i, s := range p.series {
		a.line(&b, s, i)
	}
	for _, m := range p.vertical {
		if x := a.x(m.at); inside(x, padLeft, plotWidth-padRight) {
			// Words to the right of the line, or to the left where they would leave the picture.
			class, at := "s", x+3
			if x > plotWidth*2/3 {
				class, at = "e", x-3
			}
			fmt.Fprintf(&b, `<path d="M%.1f %d V%.1f" class="m"/><text x="%.1f" y="%d" class="%s">%s</text>`+"\n", x, padTop, a.bottom(), at, padTop+10, class, shownText(m.label))
		}
	}
	for _, m := range p.horizontal {
		if y := a.y(m.at); inside(y, padTop, a.bottom()) {
			fmt.Fprintf(&b, `<path d="M%d %.1f H%d" class="m"/><text x="%d" y="%.1f" class="s">%s</text>`+"\n", padLeft, y, plotWidth-padRight, padLeft+4, y-3, shownText(m.label))
		}
	}
	p.legend(&b)
	b.WriteString("</svg>\n")
	return b.String()
}

func (p plot) legend(b *strings.Builder) {
	x := padLeft
	name := func(words, sample string) {
		fmt.Fprintf(b, `%s<text x="%d" y="28" class="s">%s</text>`+"\n", sample, x+26, shownText(words))
		x += 40 + 6*min(40, plain.Width(words))
	}
	for i, s := range p.series {
		st := strokes[i%len(strokes)]
		sample := fmt.Sprintf(`<path d="M%d 24 h22" stroke="%s" stroke-dasharray="%s" class="l"/>`, x, st.colour, st.dash)
		if s.points {
			sample = pointMark(float64(x+11), 24, i)
		}
		name(s.name, sample)
	}
	for _, band := range p.bands {
		name(band.name, fmt.Sprintf(`<path d="M%d 20 h22 v8 h-22 z" class="b"/>`, x))
	}
}

// axes maps values to the picture.
type axes struct {
	x0, x1, y0, y1 float64
	logX, ok       bool
	height         int
}

func (p plot) axes() axes {
	a := axes{logX: p.logX, height: p.height, x0: math.Inf(1), x1: math.Inf(-1), y0: math.Inf(1), y1: math.Inf(-1)}
	if a.height == 0 {
		a.height = plotHeight
	}
	see := func(xs, ys []float64) {
		for i := range min(len(xs), len(ys)) {
			if !a.drawable(xs[i], ys[i]) {
				continue
			}
			a.x0, a.x1 = min(a.x0, xs[i]), max(a.x1, xs[i])
			a.y0, a.y1 = min(a.y0, ys[i]), max(a.y1, ys[i])
			a.ok = true
		}
	}
	for _, s := range p.series {
		see(s.x, s.y)
	}
	for _, b := range p.bands {
		see(b.x, b.low)
		see(b.x, b.high)
	}
	for _, m := range p.horizontal {
		if a.ok && finite(m.at) {
			a.y0, a.y1 = min(a.y0, m.at), max(a.y1, m.at)
		}
	}
	if !a.ok {
		return a
	}
	room := (a.y1 - a.y0) * 0.06
	if room == 0 {
		room = max(math.Abs(a.y0)*0.1, 1e-9)
	}
	a.y0, a.y1 = a.y0-room, a.y1+room
	if a.x1 == a.x0 {
		a.x1 = a.x0 + max(math.Abs(a.x0)*0.1, 1e-9)
	}
	return a
}

func (a axes) drawable(x, y float64) bool {
	return finite(x) && finite(y) && (!a.logX || x > 0)
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

func inside(v, low, high float64) bool { return v >= low && v <= high }

func (a axes) bottom() float64 { return float64(a.height - padBottom) }

func (a axes) x(v float64) float64 {
	share := (v - a.x0) / (a.x1 - a.x0)
	if a.logX {
		share = math.Log(v/a.x0) / math.Log(a.x1/a.x0)
	}
	return padLeft + share*(plotWidth-padLeft-padRight)
}

func (a axes) y(v float64) float64 {
	return a.bottom() - (v-a.y0)/(a.y1-a.y0)*(a.bottom()-padTop)
}

func (a axes) grid(b *strings.Builder, xLabel, yLabel string) {
	for _, v := range a.xTicks() {
		x := a.x(v)
		fmt.Fprintf(b, `<path d="M%.1f %d V%.1f" class="g"/><text x="%.1f" y="%.1f" class="n">%s</text>`+"\n", x, padTop, a.bottom(), x, a.bottom()+14, tickText(v))
	}
	for _, v := range ticks(a.y0, a.y1, 5) {
		y := a.y(v)
		fmt.Fprintf(b, `<path d="M%d %.1f H%d" class="g"/><text x="%d" y="%.1f" class="e">%s</text>`+"\n", padLeft, y, plotWidth-padRight, padLeft-5, y+4, tickText(v))
	}
	fmt.Fprintf(b, `<path d="M%d %d V%.1f H%d" class="a"/>`+"\n", padLeft, padTop, a.bottom(), plotWidth-padRight)
	fmt.Fprintf(b, `<text x="%d" y="%d" class="n">%s</text>`, (padLeft+plotWidth-padRight)/2, a.height-8, shownText(xLabel))
	fmt.Fprintf(b, `<text x="14" y="%d" class="n" transform="rotate(-90 14 %[1]d)">%s</text>`+"\n", (padTop+a.height-padBottom)/2, shownText(yLabel))
}

func (a axes) xTicks() []float64 {
	if !a.logX {
		return ticks(a.x0, a.x1, 8)
	}
	var out []float64
	for e := math.Floor(math.Log10(a.x0)); e <= math.Log10(a.x1); e++ {
		for _, m := range []float64{1, 2, 5} {
			if v := m * math.Pow(10, e); v >= a.x0*0.9999 && v <= a.x1*1.0001 {
				out = append(out, v)
			}
		}
	}
	return out
}

// ticks returns at most n+1 round values, steps of 1, 2 or 5 times a power of ten,
// inside [low, high].
func ticks(low, high float64, n int) []float64 {
	raw := (high - low) / float64(n)
	if !finite(raw) || raw <= 0 {
		return nil
	}
	decade := math.Pow(10, math.Floor(math.Log10(raw)))
	step := 10 * decade
	for _, m := range []float64{5, 2, 1} {
		if m*decade >= raw {
			step = m * decade
		}
	}
	var out []float64
	for k := math.Ceil(low / step); k*step <= high && len(out) <= n; k++ {
		out = append(out, k*step)
	}
	return out
}

func tickText(v float64) string {
	if math.Abs(v) < 1e-12 {
		return "0"
	}
	return fmt.Sprintf("%.4g", v)
}

func (a axes) line(b *strings.Builder, s series, i int) {
	if s.points {
		for k := range min(len(s.x), len(s.y)) {
			if a.drawable(s.x[k], s.y[k]) {
				b.WriteString(pointMark(a.x(s.x[k]), a.y(s.y[k]), i))
			}
		}
		b.WriteByte('\n')
		return
	}
	st := strokes[i%len(strokes)]
	x, y := thin(s.x, s.y)
	var d strings.Builder
	pen := "M"
	for k := range x {
		if !a.drawable(x[k], y[k]) {
			pen = "M"
			continue
		}
		fmt.Fprintf(&d, "%s%.1f %.1f", pen, a.x(x[k]), a.y(y[k]))
		pen = "L"
	}
	fmt.Fprintf(b, `<path d="%s" stroke="%s" stroke-dasharray="%s" class="l"/>`+"\n", d.String(), st.colour, st.dash)
}

func pointMark(x, y float64, i int) string {
	st := strokes[i%len(strokes)]
	if i%2 == 0 {
		return fmt.Sprintf(`<circle cx="%.1f" cy="%.1f" r="3.2" stroke="%s" fill="none"/>`, x, y, st.colour)
	}
	return fmt.Sprintf(`<path d="M%.1f %.1f l6 6 m0 -6 l-6 6" stroke="%s" fill="none"/>`, x-3, y-3, st.colour)
}

func (a axes) band(b *strings.Builder, s band) {
	var up, back []string
	n := min(len(s.x), len(s.low), len(s.high))
	for k := 0; k < n; k += 1 + n/pointsMax {
		if a.drawable(s.x[k], s.low[k]) && a.drawable(s.x[k], s.high[k]) {
			up = append(up, fmt.Sprintf("%.1f %.1f", a.x(s.x[k]), a.y(s.high[k])))
			back = append(back, fmt.Sprintf("%.1f %.1f", a.x(s.x[k]), a.y(s.low[k])))
		}
	}
	slices.Reverse(back)
	if len(up) > 1 {
		fmt.Fprintf(b, `<path d="M%s z" class="b"/>`+"\n", strings.Join(append(up, back...), "L"))
	}
}

// thin keeps, of a line with more points than can be seen, the lowest and the
// highest in each of pointsMax/2 groups, so that no spike is lost. A group with
// a gap in it stays a gap.
func thin(x, y []float64) ([]float64, []float64) {
	n := min(len(x), len(y))
	if n <= pointsMax {
		return x[:n], y[:n]
	}
	var tx, ty []float64
	groups := pointsMax / 2
	for g := range groups {
		from, to := g*n/groups, (g+1)*n/groups
		low, high := from, from
		for k := from; k < to; k++ {
			if !finite(y[k]) {
				low, high = k, k
				break
			}
			if y[k] < y[low] {
				low = k
			}
			if y[k] > y[high] {
				high = k
			}
		}
		first, second := min(low, high), max(low, high)
		tx, ty = append(tx, x[first]), append(ty, y[first])
		if second != first {
			tx, ty = append(tx, x[second]), append(ty, y[second])
		}
	}
	return tx, ty
}

// shownText is the one way of text from outside into the page.
func shownText(s string) string { return html.EscapeString(plain.Visible(s, 2000)) }
