package strip

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func picture(c *Chart) string {
	var b strings.Builder
	_, h := c.Size()
	for y := 0; y < h; y++ {
		line := ""
		for _, cell := range c.Row(y) {
			line += string(cell.Rune)
		}
		b.WriteString(strings.TrimRight(line, " ") + "\n")
	}
	return b.String()
}

func ramp(n int) []Point {
	p := make([]Point, n)
	for i := range p {
		p[i] = Point{float64(i) / float64(n-1), 100 * float64(i) / float64(n-1)}
	}
	return p
}

func TestPictureOfARamp(t *testing.T) {
	var c Chart
	c.Reset(30, 8, ASCII, Axes{X1: 1, Y1: 100, Title: "speed, rpm", XUnit: "s"})
	c.Level(80, "limit")
	Line(&c, Data, ramp(101), 1)
	want := strings.Join([]string{
		"    speed, rpm",
		"100|                       ***",
		"   |-------------------****-t-",
		"   |              *****",
		" 50|          *****",
		"   |     *****",
		"  0|*****",
		"    0.0         0.5      1.0 s",
		"",
	}, "\n")
	// The picture is drawn by hand from the rule: six rows for 0 to 100, so a
	// row holds 20 and the line changes rows at 10, 30, 50, 70 and 90.
	got := picture(&c)
	for y, line := range strings.Split(got, "\n") {
		for x, r := range line {
			if r != '*' {
				continue
			}
			v := 100 * (float64(x) - 4) / 25
			row := 1 + int(math.Round((100-v)/20))
			if d := y - row; d < -1 || d > 1 {
				t.Errorf("star at row %d, column %d; the ramp is at row %d there", y, x, row)
			}
		}
	}
	for _, row := range []int{0, 7} {
		if d := cmp.Diff(strings.Split(want, "\n")[row], strings.Split(got, "\n")[row]); d != "" {
			t.Errorf("row %d (-want +got):\n%s", row, d)
		}
	}
	if stars := strings.Count(got, "*"); stars < 26 {
		t.Errorf("%d stars, want one in each of 26 columns at least:\n%s", stars, got)
	}
}

func TestOneSampleSpikeStaysVisible(t *testing.T) {
	for _, g := range []Glyphs{Braille, Block, ASCII} {
		pts := make([]Point, 5000)
		for i := range pts {
			pts[i] = Point{float64(i), 10}
		}
		var c Chart
		c.Reset(60, 10, g, Axes{X1: 4999, Y1: 100, Bare: true})
		Line(&c, Data, pts, 1)
		if top := c.Row(0); strings.Trim(runes(top), " ") != "" {
			t.Fatalf("glyphs %d: top row is not empty without a spike: %q", g, runes(top))
		}
		pts[2500].V = 100
		c.Reset(60, 10, g, Axes{X1: 4999, Y1: 100, Bare: true})
		Line(&c, Data, pts, 1)
		if top := c.Row(0); top[30].Kind != Data {
			t.Errorf("glyphs %d: a spike of one sample among 5000 is not in the top row: %q", g, runes(top))
		}
	}
}

func runes(cells []Cell) string {
	s := ""
	for _, c := range cells {
		s += string(c.Rune)
	}
	return s
}

func TestGapStaysAGap(t *testing.T) {
	pts := ramp(100)
	for i := 40; i < 60; i++ {
		pts[i].V = math.NaN()
	}
	var c Chart
	c.Reset(50, 5, ASCII, Axes{X1: 1, Y1: 100, Bare: true})
	Line(&c, Data, pts, 1)
	for y := 0; y < 5; y++ {
		for x, cell := range c.Row(y) {
			if x > 21 && x < 28 && cell.Kind == Data {
				t.Errorf("column %d lies in the gap but holds a value", x)
			}
		}
	}
}

// TestBrailleDots holds the dots against the Unicode names in the block Braille
// Patterns: U+2801 is DOTS-1 (upper left), U+2840 DOTS-7 (lower left), U+2888
// DOTS-48 (right column, first and fourth).
func TestBrailleDots(t *testing.T) {
	one := func(x, y float64) rune {
		var c Chart
		c.Reset(1, 1, Braille, Axes{X1: 1, Y1: 3})
		Line(&c, Data, []Point{{x, y}}, 1)
		return c.Row(0)[0].Rune
	}
	for _, tt := range []struct {
		x, y float64
		want rune
	}{{0, 3, 0x2801}, {0, 0, 0x2840}, {1, 3, 0x2808}, {1, 0, 0x2880}, {0, 2, 0x2802}, {1, 1, 0x2820}} {
		if got := one(tt.x, tt.y); got != tt.want {
			t.Errorf("dot at %g, %g is %U, want %U", tt.x, tt.y, got, tt.want)
		}
	}
}

func TestValuesOutsideArePinned(t *testing.T) {
	var c Chart
	c.Reset(10, 4, ASCII, Axes{X1: 1, Y1: 10, Bare: true})
	Line(&c, Data, []Point{{0, 50}, {1, 50}}, 1)
	for x, cell := range c.Row(0) {
		if cell.Kind != Data {
			t.Errorf("column %d of the top row is empty; a value over the axis must show at its end", x)
		}
	}
}

func TestNiceSteps(t *testing.T) {
	for _, tt := range []struct {
		span float64
		n    int
		want float64
	}{{100, 4, 50}, {3200, 4, 1000}, {0.9, 3, 0.5}, {24, 5, 5}, {1, 10, 0.1}} {
		if got := niceStep(tt.span, tt.n); math.Abs(got-tt.want) > 1e-9 {
			t.Errorf("niceStep(%g, %d) = %g, want %g", tt.span, tt.n, got, tt.want)
		}
	}
}

// FuzzAnything draws whatever comes at whatever size: nothing may panic, and
// every row must have its length.
func FuzzAnything(f *testing.F) {
	for seed := uint64(0); seed < 300; seed++ {
		f.Add(seed, int16(seed%90), int16(seed%31))
	}
	f.Fuzz(func(t *testing.T, seed uint64, w, h int16) {
		rng := rand.New(rand.NewPCG(seed, 7))
		odd := []float64{math.NaN(), math.Inf(1), math.Inf(-1), 0, math.Copysign(0, -1), 1e308, -1e308, 5e-324, 1, 24}
		pick := func() float64 {
			if rng.IntN(2) == 0 {
				return odd[rng.IntN(len(odd))]
			}
			return rng.NormFloat64() * 100
		}
		pts := make([]Point, rng.IntN(50))
		low := make([]Point, rng.IntN(50))
		for i := range pts {
			pts[i] = Point{pick(), pick()}
		}
		for i := range low {
			low[i] = Point{pick(), pick()}
		}
		var c Chart
		w, h = w%320, h%120
		c.Reset(int(w), int(h), Glyphs(rng.IntN(3)), Axes{X0: pick(), X1: pick(), Y0: pick(), Y1: pick(), Title: "speed", XUnit: "s"})
		Shade(&c, low, pts, pick())
		Line(&c, Forecast, low, pick())
		Line(&c, Data, pts, pick())
		Points(&c, Second, low, pick(), pick())
		c.Level(pick(), "limit")
		c.Upright(pick())
		gw, gh := c.Size()
		for y := 0; y < gh; y++ {
			if len(c.Row(y)) != gw {
				t.Fatalf("row %d has %d cells, want %d", y, len(c.Row(y)), gw)
			}
			for x, cell := range c.Row(y) {
				if cell.Rune < ' ' {
					t.Fatalf("cell %d,%d holds %U", x, y, cell.Rune)
				}
			}
		}
	})
}

func live(n int) []Point {
	rng := rand.New(rand.NewPCG(1, 2))
	p := make([]Point, n)
	for i := range p {
		p[i] = Point{float64(i) / 1000, 100 + rng.NormFloat64()}
	}
	return p
}

func TestAFrameAllocatesNothing(t *testing.T) {
	a, b := live(5000), live(5000)
	var c Chart
	draw := func() {
		c.Reset(200, 40, Braille, Axes{X1: 5, Y0: 90, Y1: 110, Title: "speed, rpm", XUnit: "s"})
		c.Level(108, "limit")
		Line(&c, Forecast, a, 1)
		Line(&c, Data, b, 1)
	}
	draw()
	if n := testing.AllocsPerRun(20, draw); n > 0 {
		t.Errorf("%g allocations a frame, want none", n)
	}
}

func BenchmarkFrame(b *testing.B) {
	x, y := live(5000), live(5000)
	var c Chart
	b.ReportAllocs()
	for b.Loop() {
		c.Reset(200, 40, Braille, Axes{X1: 5, Y0: 90, Y1: 110, Title: "speed, rpm", XUnit: "s"})
		Line(&c, Forecast, x, 1)
		Line(&c, Data, y, 1)
	}
}
