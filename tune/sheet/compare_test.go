package sheet

import (
	"encoding/json"
	"errors"
	"math"
	"path/filepath"
	"strings"
	"testing"
)

// The temperature coefficient of annealed copper at other reference temperatures
// than 20 °C, as copper wire tables print it: 0.00427 at 0 °C, 0.00409 at 10,
// 0.00385 at 25, 0.00378 at 30 (NBS Handbook 100, *from memory*). Our line must
// have these slopes, relative to its value at each of the temperatures.
func TestResistanceAgainstWireTables(t *testing.T) {
	for degC, alpha := range map[float64]float64{0: 0.00427, 10: 0.00409, 20: 0.00393, 25: 0.00385, 30: 0.00378} {
		// 1/R25 goes with the resistance at the temperature for one winding.
		at := 1 / ResistanceAt25(1, degC)
		next := 1 / ResistanceAt25(1, degC+1)
		if got := next/at - 1; math.Abs(got-alpha) > 0.5e-5 {
			t.Errorf("at %g °C %.5f per kelvin, the table has %.5f", degC, got, alpha)
		}
	}
	if got := ResistanceAt25(1.12, 25); math.Abs(got-1.12) > 1e-15 {
		t.Errorf("at 25 °C nothing changes, got %g", got)
	}
	if !math.IsNaN(ResistanceAt25(1, -300)) || !math.IsNaN(ResistanceAt25(1, math.NaN())) {
		t.Error("a temperature that cannot be gave a resistance")
	}
}

func TestCompare(t *testing.T) {
	base := exampleJob().motor
	tests := []struct {
		name     string
		change   func(*MotorRecord)
		quantity string
		verdict  Verdict
		retune   string
	}{
		{"same motor", func(*MotorRecord) {}, "Ke", Within, ""},
		{"other encoder", func(m *MotorRecord) { m.CountsPerTurn = ptr(4096.0) }, "counts per turn", Mismatch, ""},
		{"leads swapped", func(m *MotorRecord) { m.Sign = ptr(-1.0) }, "sign", Mismatch, ""},
		// 1.12 ohm at 24 °C is 1.124 at 25; the hot winding has that at 80 °C
		// with 1.36 ohm, which raw would be 22 % too much.
		{"same R, hot", func(m *MotorRecord) { m.ROhm, m.RDegC = ptr(1.36), ptr(80.0) }, "R at 25 °C", Within, ""},
		{"same reading, hot", func(m *MotorRecord) { m.RDegC = ptr(80.0) }, "R at 25 °C", Outside, ""},
		{"R without its temperature", func(m *MotorRecord) { m.RDegC = nil }, "R at 25 °C", Unknown, ""},
		{"Ke at the edge", func(m *MotorRecord) { m.KeVsPerRad = ptr(0.0452 * 1.1) }, "Ke", Within, ""},
		{"Ke past the edge", func(m *MotorRecord) { m.KeVsPerRad = ptr(0.0452 * 1.101) }, "Ke", Outside, ""},
		{"friction doubled", func(m *MotorRecord) { m.BreakawayForwardV = ptr(2.8) }, "breakaway forward", Within, ""},
		{"friction less than half", func(m *MotorRecord) { m.BreakawayForwardV = ptr(0.69) }, "breakaway forward", Outside, ""},
		{"K moved", func(m *MotorRecord) { m.GainRadSPerV = ptr(21.4 * 1.16) }, "gain K", Outside, "gain K moved by +16 %"},
		{"tau moved", func(m *MotorRecord) { m.TauS = ptr(0.088 * 0.84) }, "time constant", Outside, "time constant moved by -16 %"},
		{"margin gone", func(m *MotorRecord) { m.PhaseMarginDeg = ptr(31.0) }, "phase margin", Told, "31 deg"},
		{"overshoot", func(m *MotorRecord) { m.OvershootPercent = ptr(15.1) }, "overshoot", Told, "more than 5 points"},
		{"not measured", func(m *MotorRecord) { m.JKgM2 = nil }, "J", Unknown, ""},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			later := base
			tt.change(&later)
			rows := Compare(base, later)
			for _, r := range rows {
				if r.Quantity == tt.quantity && r.Verdict != tt.verdict {
					t.Errorf("%s: %s (change %v), want %s", r.Quantity, r.Verdict, r.Change, tt.verdict)
				}
				if r.Quantity != tt.quantity && (r.Verdict == Outside || r.Verdict == Mismatch) {
					t.Errorf("%s: %s, though it did not change", r.Quantity, r.Verdict)
				}
				if r.Origin == "" || r.Allowed == "" {
					t.Errorf("%s has no tolerance or no origin of it", r.Quantity)
				}
			}
			if why := strings.Join(Retune(rows, later), "; "); (why == "") != (tt.retune == "") || !strings.Contains(why, tt.retune) {
				t.Errorf("retune: %q, want %q", why, tt.retune)
			}
		})
	}
}

func TestCompareNamesOtherLoad(t *testing.T) {
	later := exampleJob().motor
	later.LoadState = "bare"
	for _, r := range Compare(exampleJob().motor, later) {
		if noted := strings.Contains(r.Note, "other load"); noted != (r.Quantity == "J" || r.Quantity == "time constant" ||
			strings.Contains(r.Quantity, "friction") || strings.Contains(r.Quantity, "breakaway") || r.Quantity == "no-load current" ||
			r.Quantity == "phase margin" || r.Quantity == "overshoot") {
			t.Errorf("%s: note %q", r.Quantity, r.Note)
		}
	}
}

func TestCompareDirs(t *testing.T) {
	root := t.TempDir()
	later := exampleJob()
	later.motor.CountsPerTurn = ptr(4096.0)
	old, swapped := exampleJob().write(t, filepath.Join(root, "old")), later.write(t, filepath.Join(root, "new"))
	rows, err := CompareDirs(old, swapped)
	if err != nil {
		t.Fatal(err)
	}
	b, err := json.Marshal(rows[0])
	if err != nil {
		t.Fatal(err)
	}
	want := `{"quantity":"counts per turn","unit":"1","old":2000,"new":4096,"change":1.048,"allowed":"equal","origin":"a count or a sign is right or wrong","verdict":"mismatch"}`
	if string(b) != want {
		t.Errorf("got  %s\nwant %s", b, want)
	}
	if _, err := CompareDirs(mustWrite(t), swapped); !errors.Is(err, ErrNoEntry) {
		t.Errorf("a sheet without a motor: %v", err)
	}
}
