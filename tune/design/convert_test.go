package design

import (
	"encoding/json"
	"math"
	"math/cmplx"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func TestBoardUnitsByHand(t *testing.T) {
	// 0.05 V per rad/s is 0.05·2π/60/24 of a 24 V bus per rpm.
	g := PI(0.05, 2, 0.001, 0)
	b, err := ToBoard(g, Board{SpeedUnit: RPMUnit, DriveUnit: 24, PerSample: true, Integer: true, Shift: 24, AccumulatorBits: 64})
	if err != nil {
		t.Fatal(err)
	}
	kp := 0.05 * 2 * math.Pi / 60 / 24
	ki := 2 * 0.001 * 2 * math.Pi / 60 / 24
	if math.Abs(b.Kp-kp) > 1e-15 || math.Abs(b.Ki-ki) > 1e-15 {
		t.Errorf("got kp %.12g ki %.12g, want %.12g %.12g", b.Kp, b.Ki, kp, ki)
	}
	if *b.KpInt != int64(math.Round(kp*(1<<24))) || *b.KiInt != int64(math.Round(ki*(1<<24))) {
		t.Errorf("got integers %d %d", *b.KpInt, *b.KiInt)
	}
	// A derivative is divided by the sample time.
	d := g
	d.Kd, d.DerivativeFilter = 0.0004, 0.002
	bd, err := ToBoard(d, Board{SpeedUnit: 1, DriveUnit: 2, PerSample: true})
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(bd.Kd-0.0004/0.001/2) > 1e-15 || math.Abs(bd.Held.Kd/0.0004-1) > 1e-7 {
		t.Errorf("kd per sample: got %.12g, held %.12g", bd.Kd, bd.Held.Kd)
	}
	// 2²⁴ over 146 rounds up to 114 913 rpm: such an integral never moves.
	if want := math.Ceil((1<<24)/float64(*b.KiInt)) * RPMUnit; math.Abs(float64(b.SmallestError)-want) > 1e-9 {
		t.Errorf("smallest error %.6g rad/s, want %.6g", b.SmallestError, want)
	}
}

func TestBoardRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := Board{
			SpeedUnit: rapid.Float64Range(1e-4, 50).Draw(t, "speed unit"), DriveUnit: rapid.Float64Range(1e-3, 60).Draw(t, "drive unit"),
			PerSample: rapid.Bool().Draw(t, "per sample"), Integer: true, Shift: rapid.IntRange(0, 30).Draw(t, "shift"), AccumulatorBits: 64,
		}
		like := PI(0, 0, 0.001, 0)
		n := rapid.Int64Range(-(1<<31)+1, 1<<31-1)
		kp, ki, kd := n.Draw(t, "kp"), n.Draw(t, "ki"), n.Draw(t, "kd")
		g, err := FromBoard(kp, ki, kd, b, like)
		if err != nil {
			t.Fatal(err)
		}
		back, err := ToBoard(g, b)
		if err != nil {
			t.Fatal(err)
		}
		if *back.KpInt != kp || *back.KiInt != ki || *back.KdInt != kd {
			t.Fatalf("%d %d %d came back as %d %d %d", kp, ki, kd, *back.KpInt, *back.KiInt, *back.KdInt)
		}
	})
}

func TestFormsRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := rapid.Float64Range(1e-4, 1e3)
		g := Gains{Form: FormSeries, Kc: f.Draw(t, "kc"), Ti: f.Draw(t, "ti"), SetpointWeight: 1, DerivativeFilter: 0.001}
		g.Td = g.Ti * rapid.Float64Range(0, 0.95).Draw(t, "td/ti")
		ideal, err := g.To(FormIdeal)
		if err != nil {
			t.Fatal(err)
		}
		series, err := ideal.To(FormSeries)
		if err != nil {
			t.Fatal(err)
		}
		for _, pair := range [][2]float64{{series.Kc, g.Kc}, {series.Ti, g.Ti}, {series.Td, g.Td}} {
			if math.Abs(pair[0]-pair[1]) > 1e-7*(math.Abs(pair[1])+1e-9) {
				t.Fatalf("%+v came back as %+v", g, series)
			}
		}
		b, err := json.Marshal(ideal)
		if err != nil {
			t.Fatal(err)
		}
		var back Gains
		if err := json.Unmarshal(b, &back); err != nil {
			t.Fatal(err)
		}
		if back != ideal {
			t.Fatalf("%+v came back from JSON as %+v", ideal, back)
		}
	})
}

func TestBoardRefuses(t *testing.T) {
	g := PI(0.05, 2, 0.001, 0)
	for name, b := range map[string]Board{
		"does not fit":     {SpeedUnit: 1, DriveUnit: 1, Integer: true, Shift: 40},
		"rounds to 0":      {SpeedUnit: 1, DriveUnit: 1, Integer: true, Shift: 2},
		"overflows":        {SpeedUnit: 0.01, DriveUnit: 0.001, Integer: true, Shift: 16, SpeedMax: 500},
		"no units":         {},
		"no sample time":   {SpeedUnit: 1, DriveUnit: 1, PerSample: true},
		"shift is 70 bits": {SpeedUnit: 1, DriveUnit: 1, Integer: true, Shift: 70},
	} {
		c := g
		if name == "no sample time" {
			c.SampleTime = 0
		}
		if _, err := ToBoard(c, b); err == nil {
			t.Errorf("%s: not refused", name)
		}
	}
}

func TestFloatBoardHoldsBinary32(t *testing.T) {
	g := PI(0.1, 1.7, 0.001, 0)
	b, err := ToBoard(g, Board{SpeedUnit: 1, DriveUnit: 1, DriveMax: 24})
	if err != nil {
		t.Fatal(err)
	}
	if b.Held.Kp != float64(float32(0.1)) || b.Held.Ki != float64(float32(1.7)) || b.Rounding == 0 || b.Rounding > 6e-8 {
		t.Errorf("held %+v, rounding %g", b.Held, b.Rounding)
	}
	// Adding just over the smallest error to a binary32 near 24 moves it, half of
	// it does not.
	step := func(e float64) bool { v := float32(23.9); return v+float32(1.7*0.001*e) != v }
	if e := float64(b.SmallestError); !step(1.01*e) || step(0.25*e) {
		t.Errorf("smallest error %.4g rad/s does not tell what moves the sum", e)
	}
}

// The transfer function has to be the frequency response that the margins use.
func TestTransferFunctionIsTheLaw(t *testing.T) {
	for _, disc := range []string{"continuous", BackwardEuler, ForwardEuler, Tustin, Incremental} {
		g := Gains{Kp: 0.3, Ki: 4, Kd: 0.002, DerivativeFilter: 0.003, SetpointWeight: 1, SampleTime: 0.001, Discretisation: disc}
		if disc == "continuous" {
			g.SampleTime, g.Discretisation = 0, ""
		}
		num, den := g.TransferFunction()
		at := g.Parallel().response()
		for _, w := range []float64{0.3, 40, 900} {
			s := complex(0, w)
			if g.SampleTime > 0 {
				s = cmplx.Exp(s * complex(g.SampleTime, 0))
			}
			var n, d complex128
			for _, c := range num {
				n = n*s + complex(c, 0)
			}
			for _, c := range den {
				d = d*s + complex(c, 0)
			}
			if got, want := n/d, at(w); cmplx.Abs(got-want) > 1e-9*cmplx.Abs(want) {
				t.Errorf("%s, ω = %g: got %v, want %v", disc, w, got, want)
			}
		}
	}
}

func TestCHeader(t *testing.T) {
	b, err := ToBoard(PI(0.05, 2, 0.001, 0), Board{SpeedUnit: 1, DriveUnit: 1, Integer: true, Shift: 16})
	if err != nil {
		t.Fatal(err)
	}
	h := b.CHeader("bench")
	if !strings.Contains(h, "#define GAIN_KP 3277L") || !strings.Contains(h, "#define GAIN_SHIFT 16") {
		t.Errorf("got\n%s", h)
	}
}

func TestGainsJSONRefuses(t *testing.T) {
	for _, text := range []string{
		`{"form":"parallel"}`, `{"form":"ideal","kp":1,"ki":2}`, `{"form":"series","kp":1}`, `{"form":"odd","kp":1}`,
		`{"kp":1,"sample_time":-1}`, `{"kp":1,"kd":1,"sample_time":0.001,"discretisation":"tustin"}`,
		`{"kp":1,"u_min":3,"u_max":-3}`, `{"form":"ideal","kp":1,"ti":0}`, `{"kp":1,"derivative_on":"setpoint"}`,
	} {
		var g Gains
		if err := json.Unmarshal([]byte(text), &g); err == nil {
			t.Errorf("%s: not refused", text)
		}
	}
}
