package model

import (
	"encoding/json"
	"errors"
	"math"
	"reflect"
	"testing"
)

func TestLinearJSONRoundTrip(t *testing.T) {
	in := `{"num":[20],"den":[0.05,1],"dead_time":0.002,"ci95":{"gain":[19,21]},"rmse":0.3}`
	var m Linear
	if err := json.Unmarshal([]byte(in), &m); err != nil {
		t.Fatal(err)
	}
	if m.InputUnit != InputVolts {
		t.Errorf("absent input_unit became %q, want V", m.InputUnit)
	}
	b, err := json.Marshal(m)
	if err != nil {
		t.Fatal(err)
	}
	var back Linear
	if err := json.Unmarshal(b, &back); err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(m, back) {
		t.Errorf("round trip gave %+v, want %+v", back, m)
	}
}

func TestLinearRefuses(t *testing.T) {
	good := FirstOrder(20, 0.05, 0.002)
	if err := good.Validate(); err != nil {
		t.Fatalf("a sound model was refused: %v", err)
	}
	for _, c := range []struct {
		name string
		edit func(*Linear)
	}{
		{"no num", func(m *Linear) { m.Num = nil }},
		{"no den", func(m *Linear) { m.Den = nil }},
		{"zero num", func(m *Linear) { m.Num = []float64{0, 0} }},
		{"leading zero in den", func(m *Linear) { m.Den = []float64{0, 1} }},
		{"improper", func(m *Linear) { m.Num = []float64{1, 0, 0} }},
		{"NaN in num", func(m *Linear) { m.Num = []float64{math.NaN()} }},
		{"Inf in den", func(m *Linear) { m.Den = []float64{math.Inf(1), 1} }},
		{"negative dead time", func(m *Linear) { m.DeadTime = -1e-3 }},
		{"unknown unit", func(m *Linear) { m.InputUnit = "rpm" }},
		{"interval upside down", func(m *Linear) { m.CI95 = map[string][2]float64{"gain": {2, 1}} }},
		{"range upside down", func(m *Linear) { m.SpeedMin, m.SpeedMax = 5, 1 }},
	} {
		t.Run(c.name, func(t *testing.T) {
			m := good
			c.edit(&m)
			if err := m.Validate(); !errors.Is(err, ErrModel) {
				t.Errorf("got %v, want an error that wraps ErrModel", err)
			}
		})
	}
}

func TestDCGain(t *testing.T) {
	if g := FirstOrder(20, 0.05, 0).DCGain(); g != 20 {
		t.Errorf("first order: got %g, want 20", g)
	}
	if g := Integrating(-3, 0).DCGain(); !math.IsInf(g, -1) {
		t.Errorf("integrating with a negative slope: got %g, want -Inf", g)
	}
}

func TestTextKeepsEveryDigit(t *testing.T) {
	got := SecondOrder(20.1, 0.25, 0.5, 0.1).Text()
	if want := "num = [20.100000000000001]; den = [0.125, 0.75, 1]; delay = 0.10000000000000001;"; got != want {
		t.Errorf("got %s, want %s", got, want)
	}
}
