package trace

import (
	"bytes"
	"errors"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"
)

func TestReadCSV(t *testing.T) {
	const text = "\ufeff# rig bench one\r\n# hold = from\r\n# window_s = 0.002\r\n" +
		"time,voltage,speed,flow,setpoint,mask\r\nms,V,rpm,l/min,rpm,1\r\n" +
		"0,0,0,1.5,60,used\r\n\r\n# between rows = 3\r\n2,6,30,1.6,60,sag\r\n"
	tr, err := ReadCSV(strings.NewReader(text), "dir/one.csv")
	if err != nil {
		t.Fatal(err)
	}
	want := &Trace{
		Name: "one", Time: []float64{0, 2e-3}, Voltage: []float64{0, 6},
		Speed: []float64{0, math.Pi}, Setpoint: []float64{2 * math.Pi, 2 * math.Pi},
		Mask: []Mask{Used, Sag}, Hold: From, Window: 0.002,
		Other: []Column{{Name: "flow", Unit: "l/min", Text: []string{"1.5", "1.6"}}},
	}
	near := cmp.Comparer(func(a, b float64) bool { return math.Abs(a-b) < 1e-12 })
	if d := cmp.Diff(want, tr, near); d != "" {
		t.Error(d)
	}
}

// Every fault names its place: file, line, column of the table.
func TestFaultsNameTheirPlace(t *testing.T) {
	const head = "time,voltage,speed\ns,V,rad/s\n"
	for _, c := range []struct{ name, text, place string }{
		{"nothing", "", "f.csv:1: "},
		{"only comments", "# a\n# b\n", "f.csv:2: "},
		{"missing column", "time,voltage\n", "f.csv:1: no column named \"speed\""},
		{"column twice", "time,voltage,speed,time\n", "f.csv:1:4: "},
		{"nameless column", "time,,speed\n", "f.csv:1:2: "},
		{"unknown unit", "time,voltage,speed\ns,kV,rad/s\n", "f.csv:2:2: "},
		{"few units", "time,voltage,speed\ns,V\n", "f.csv:2: "},
		{"no rows", head, "f.csv:2: no samples"},
		{"short row", head + "0,1,2\n1,2\n", "f.csv:4: "},
		{"long row", head + "0,1,2,3\n", "f.csv:3: "},
		{"not a number", head + "0,1,2\n# c\n1,x,2\n", "f.csv:5:2: "},
		{"NaN", head + "0,1,NaN\n", "f.csv:3:3: "},
		{"infinity", head + "0,1,2\n1,-inf,2\n", "f.csv:4:2: "},
		{"empty cell", head + "0,,2\n", "f.csv:3:2: "},
		{"time stands", head + "0,1,2\n0,1,2\n", "f.csv:4:1: "},
		{"time falls", "speed,time,voltage\nrpm,us,V\n1,5,1\n1,4,1\n", "f.csv:4:2: "},
		{"bad hold", "# hold = now\n" + head, "f.csv:1: comment hold"},
		{"bad window", "# window_s = -1\n" + head, "f.csv:1: comment window_s"},
		{"bad mask", "time,voltage,speed,mask\ns,V,rad/s,1\n0,0,0,because\n", "f.csv:3:4: "},
	} {
		_, err := ReadCSV(strings.NewReader(c.text), "f.csv")
		var pe *ParseError
		if !errors.As(err, &pe) || !errors.Is(err, ErrInvalid) {
			t.Errorf("%s: %v is not a *ParseError that wraps ErrInvalid", c.name, err)
			continue
		}
		if !strings.HasPrefix(err.Error(), c.place) {
			t.Errorf("%s: %q, want it to begin with %q", c.name, err, c.place)
		}
	}
}

// What is written is read back to the last bit.
func TestRoundTrip(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		n := rapid.IntRange(1, 20).Draw(rt, "n")
		col := func(name string) []float64 {
			return rapid.SliceOfN(rapid.Float64Range(-1e6, 1e6), n, n).Draw(rt, name)
		}
		tr := &Trace{Name: "x", Hold: Hold(rapid.IntRange(0, 1).Draw(rt, "hold")), Window: rapid.Float64Range(0, 1).Draw(rt, "window")}
		at := 0.0
		for range n {
			at += rapid.Float64Range(1e-6, 1).Draw(rt, "dt")
			tr.Time = append(tr.Time, at)
		}
		tr.Voltage, tr.Speed = col("voltage"), col("speed")
		if rapid.Bool().Draw(rt, "bus") {
			tr.Bus, tr.Counts = col("bus"), col("counts")
			tr.RadPerCount = 0.003
		}
		if rapid.Bool().Draw(rt, "mask") {
			for range n {
				tr.Mask = append(tr.Mask, Mask(rapid.IntRange(0, int(maskEnd)-1).Draw(rt, "m")))
			}
		}
		var b bytes.Buffer
		if err := tr.WriteCSV(&b, "source: here\nand there"); err != nil {
			rt.Fatal(err)
		}
		back, err := ReadCSV(&b, "y.csv")
		if err != nil {
			rt.Fatal(err)
		}
		if d := cmp.Diff(tr, back); d != "" {
			rt.Fatal(d)
		}
	})
}

func TestGapsAndMasks(t *testing.T) {
	tr := &Trace{}
	for i := range 100 {
		at := 0.001 * float64(i)
		if i >= 50 {
			at += 0.01
		}
		tr.Time = append(tr.Time, at)
		tr.Voltage = append(tr.Voltage, 5)
		speed, bus := 10.0, 24.0
		if i >= 60 && i < 85 {
			speed = 0
		}
		if i >= 10 && i < 20 {
			bus = 20
		}
		tr.Speed, tr.Bus = append(tr.Speed, speed), append(tr.Bus, bus)
	}
	tr.Voltage[30] = 23.9
	if n := tr.MarkGaps(); n != 1 || tr.At(50) != Gap {
		t.Errorf("%d gaps, sample 50 is %s", n, tr.At(50))
	}
	tr.MarkDrive()
	want := map[string]int{"gap": 1, "sag": 10, "saturated": 1, "stall": 25}
	// The stall threshold is half of the largest voltage, which is the odd 23.9 V.
	delete(want, "stall")
	if d := cmp.Diff(want, tr.Masked()); d != "" {
		t.Error(d)
	}
	tr.Voltage[30] = 5
	tr.MarkDrive()
	if got := tr.Masked()["stall"]; got != 25 {
		t.Errorf("%d samples stalled, want 25", got)
	}
	if !Gap.Breaks() || Manual.Breaks() || Used.Breaks() {
		t.Error("Breaks")
	}
}

func TestSliceAndSplit(t *testing.T) {
	tr := &Trace{Time: []float64{0, 1, 2, 3}, Voltage: []float64{1, 2, 3, 4}, Speed: []float64{5, 6, 7, 8}}
	a, b := tr.SplitFraction(0.25)
	if a.Len() != 3 || b.Len() != 1 || b.Speed[0] != 8 || a.Current != nil {
		t.Errorf("%+v %+v", a, b)
	}
	if tr.Duration() != 3 || tr.Period() != 1 {
		t.Errorf("duration %g, period %g", tr.Duration(), tr.Period())
	}
	a.Voltage = append(a.Voltage, 99)
	if tr.Voltage[3] != 4 {
		t.Error("appending to a slice of a trace overwrote the trace")
	}
}

func FuzzReadCSV(f *testing.F) {
	f.Add("time,voltage,speed\ns,V,rad/s\n0,1,2\n1,2,3\n")
	f.Add("# hold = from\ntime,voltage,speed,x\nms,V,rpm,1\n0,1,2,a\n")
	f.Fuzz(func(t *testing.T, text string) {
		tr, err := ReadCSV(strings.NewReader(text), "f")
		if err != nil {
			if !errors.Is(err, ErrInvalid) {
				t.Fatalf("%v does not wrap ErrInvalid", err)
			}
			return
		}
		if err := tr.Validate(); err != nil {
			t.Fatalf("accepted, but %v", err)
		}
	})
}
