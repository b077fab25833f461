package sheet

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestTicks(t *testing.T) {
	tests := []struct {
		low, high float64
		n         int
		want      []float64
	}{
		{0, 200, 5, []float64{0, 50, 100, 150, 200}},
		{0, 1, 5, []float64{0, 0.2, 0.4, 0.6000000000000001, 0.8, 1}},
		{-37, 12, 5, []float64{-30, -20, -10, 0, 10}},
		{1e9, 1e9 + 1, 2, []float64{1e9, 1e9 + 0.5, 1e9 + 1}},
		{5, 5, 5, nil},
		{0, math.Inf(1), 5, nil},
	}
	for _, tt := range tests {
		got := ticks(tt.low, tt.high, tt.n)
		if diff := cmp.Diff(tt.want, got, cmp.Comparer(func(a, b float64) bool { return math.Abs(a-b) < 1e-9 })); diff != "" {
			t.Errorf("%g to %g: %s", tt.low, tt.high, diff)
		}
	}
}

// One sample in a hundred thousand that goes astray must still be seen.
func TestThinKeepsSpikes(t *testing.T) {
	x, y := make([]float64, 100_000), make([]float64, 100_000)
	for i := range x {
		x[i] = float64(i)
	}
	y[33_333], y[66_666] = 50, -50
	tx, ty := thin(x, y)
	if len(tx) > pointsMax {
		t.Errorf("%d points, at most %d", len(tx), pointsMax)
	}
	found := map[float64]float64{}
	for i := range tx {
		if i > 0 && tx[i] <= tx[i-1] {
			t.Fatalf("x goes back at %g", tx[i])
		}
		found[tx[i]] = ty[i]
	}
	if found[33_333] != 50 || found[66_666] != -50 {
		t.Error("a spike was lost")
	}
}

// A gap in the data is a gap in the line, and no NaN reaches the picture.
func TestPlotGaps(t *testing.T) {
	nan := math.NaN()
	svg := plot{series: []series{{x: []float64{0, 1, 2, 3, 4}, y: []float64{1, 2, nan, 3, math.Inf(1)}}}}.svg()
	line := svg[:strings.Index(svg, `class="l"`)] // the legend's sample comes after
	line = line[strings.LastIndex(line, `<path d="`)+9:]
	line = line[:strings.Index(line, `"`)]
	if n := strings.Count(line, "M"); n != 2 || strings.Count(line, "L") != 1 {
		t.Errorf("want two pieces, one of them of two points: %s", line)
	}
	if strings.Contains(svg, "NaN") || strings.Contains(svg, "Inf") {
		t.Error("a number that is none in the picture")
	}
	for name, p := range map[string]plot{
		"nothing":      {title: "t"},
		"only NaN":     {title: "t", series: []series{{x: []float64{1}, y: []float64{nan}}}},
		"log of zero":  {title: "t", logX: true, series: []series{{x: []float64{0, -1}, y: []float64{1, 1}}}},
		"lengths vary": {title: "t", series: []series{{x: []float64{1, 2}, y: nil}}},
	} {
		if got := p.svg(); got != "<p>t: no data to draw.</p>\n" {
			t.Errorf("%s: %s", name, got)
		}
	}
}

// Where a margin is read off is what a Bode plot is for: the mark must stand
// where the line crosses.
func TestPlotPutsMarksOnTheScale(t *testing.T) {
	p := plot{logX: true, series: []series{{x: []float64{1, 10, 100}, y: []float64{20, 0, -20}}}}
	a := p.axes()
	if got, want := a.x(10), (a.x(1)+a.x(100))/2; math.Abs(got-want) > 1e-9 {
		t.Errorf("a decade is not in the middle of two: %g, want %g", got, want)
	}
	if got, want := a.y(0), (a.y(20)+a.y(-20))/2; math.Abs(got-want) > 1e-9 {
		t.Errorf("0 dB is not in the middle: %g, want %g", got, want)
	}
	if a.y(20) >= a.y(-20) {
		t.Error("the scale is upside down")
	}
}

// The worst case's band goes out along its upper edge and back along its lower.
func TestPlotBand(t *testing.T) {
	x := []float64{0, 1, 2}
	p := plot{bands: []band{{x: x, low: []float64{0, 1, 2}, high: []float64{10, 11, 12}}}}
	a := p.axes()
	want := `<path d="M`
	for i, corner := range [][2]float64{{0, 10}, {1, 11}, {2, 12}, {2, 2}, {1, 1}, {0, 0}} {
		if i > 0 {
			want += "L"
		}
		want += fmt.Sprintf("%.1f %.1f", a.x(corner[0]), a.y(corner[1]))
	}
	if svg := p.svg(); !strings.Contains(svg, want+` z"`) {
		t.Errorf("no band %s in\n%s", want, svg)
	}
}
