package model

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"

	"gainwright/protocol/si"
)

// Kinds of model by their poles. The kind is a label for people and for fits;
// only Num, Den and DeadTime enter a calculation.
const (
	KindFirstOrder  = "first-order"
	KindSecondOrder = "second-order"
	KindIntegrating = "integrating"
	KindMotor       = "motor"
	KindOther       = "other"
)

// Input units of a drive.
const (
	InputVolts = "V" // the drive sets a voltage
	InputAmps  = "A" // the drive is in current mode
)

// ErrModel is what every refusal of an ill-formed model wraps.
var ErrModel = errors.New("model: not usable")

// Linear is the transfer function
//
//	G(s) = Num(s)/Den(s) · e^(−s·DeadTime)
//
// from the applied input to the reported speed, without the hold and without
// the compute delay of the loop that will use it.
type Linear struct {
	// Kind is one of the Kind constants, or empty.
	Kind string `json:"kind,omitempty"`
	// Num and Den are coefficients in descending powers of s, the output in
	// rad/s per unit of input. Both have at least one coefficient; the first
	// of Den is not zero, and Num has no higher degree than Den.
	Num []float64 `json:"num"`
	Den []float64 `json:"den"`
	// DeadTime is in s, ≥ 0.
	DeadTime float64 `json:"dead_time"`
	// InputUnit is "V" or "A". Decoding fills in "V" where the key is absent.
	InputUnit string `json:"input_unit,omitempty"`
	// CI95 gives, by parameter name (gain, tau, tau2, dead_time …), the 95 %
	// confidence interval {low, high}. It is nil where nothing was fitted.
	CI95 map[string][2]float64 `json:"ci95,omitempty"`
	// SpeedMin and SpeedMax bound the speeds in rad/s at which the model was
	// identified; both are 0 where that is not known.
	SpeedMin float64 `json:"speed_min,omitempty"`
	SpeedMax float64 `json:"speed_max,omitempty"`
}

// FirstOrder returns gain/(tau·s + 1)·e^(−s·deadTime) with a voltage input.
// gain is in rad/s per V, tau and deadTime are in s.
func FirstOrder(gain, tau, deadTime float64) Linear {
	return Linear{Kind: KindFirstOrder, Num: []float64{gain}, Den: []float64{tau, 1}, DeadTime: deadTime, InputUnit: InputVolts}
}

// SecondOrder returns gain/((tau1·s + 1)(tau2·s + 1))·e^(−s·deadTime) with a
// voltage input.
func SecondOrder(gain, tau1, tau2, deadTime float64) Linear {
	return Linear{
		Kind: KindSecondOrder, Num: []float64{gain}, Den: []float64{tau1 * tau2, tau1 + tau2, 1},
		DeadTime: deadTime, InputUnit: InputVolts,
	}
}

// Integrating returns slope/s·e^(−s·deadTime) with a voltage input; slope is in
// (rad/s)/s per V.
func Integrating(slope, deadTime float64) Linear {
	return Linear{Kind: KindIntegrating, Num: []float64{slope}, Den: []float64{1, 0}, DeadTime: deadTime, InputUnit: InputVolts}
}

// Validate reports the first reason why m cannot be used. The error wraps
// ErrModel and names the key at fault as it is spelt in JSON.
func (m Linear) Validate() error {
	if len(m.Num) == 0 {
		return m.bad("num is empty: give at least the gain")
	}
	if len(m.Den) == 0 {
		return m.bad("den is empty: give at least one coefficient")
	}
	for i, v := range m.Num {
		if !si.Finite(v) {
			return m.bad("num[%d] is not a finite number", i)
		}
	}
	for i, v := range m.Den {
		if !si.Finite(v) {
			return m.bad("den[%d] is not a finite number", i)
		}
	}
	if m.Den[0] == 0 {
		return m.bad("den[0] is 0: drop the leading zero or give the right coefficient")
	}
	if allZero(m.Num) {
		return m.bad("num is 0: a motor that does not answer cannot be controlled")
	}
	if len(trimZeros(m.Num)) > len(m.Den) {
		return m.bad("num has a higher degree (%d) than den (%d): no physical plant does", len(trimZeros(m.Num))-1, len(m.Den)-1)
	}
	if !si.Finite(m.DeadTime) || m.DeadTime < 0 {
		return m.bad("dead_time is %g s: it must be 0 or more", m.DeadTime)
	}
	switch m.InputUnit {
	case "", InputVolts, InputAmps:
	default:
		return m.bad("input_unit is %q: it must be \"V\" or \"A\"", m.InputUnit)
	}
	for name, ci := range m.CI95 {
		if !si.Finite(ci[0]) || !si.Finite(ci[1]) || ci[0] > ci[1] {
			return m.bad("ci95.%s is [%g, %g]: the low end comes first and both are finite", name, ci[0], ci[1])
		}
	}
	if !si.Finite(m.SpeedMin) || !si.Finite(m.SpeedMax) || m.SpeedMin > m.SpeedMax {
		return m.bad("speed_min %g and speed_max %g rad/s do not make a range", m.SpeedMin, m.SpeedMax)
	}
	return nil
}

func (m Linear) bad(format string, args ...any) error {
	return fmt.Errorf("%w: %s", ErrModel, fmt.Sprintf(format, args...))
}

// UnmarshalJSON decodes and validates m; an absent input_unit becomes "V".
// Keys that it does not know are ignored, since a fit writes its own beside
// these.
func (m *Linear) UnmarshalJSON(b []byte) error {
	type plain Linear // without methods, so that decoding does not come back here
	var p plain
	if err := json.Unmarshal(b, &p); err != nil {
		return err
	}
	if p.InputUnit == "" {
		p.InputUnit = InputVolts
	}
	*m = Linear(p)
	return m.Validate()
}

// Order returns the degree of the denominator.
func (m Linear) Order() int { return len(m.Den) - 1 }

// DCGain returns G(0) in output units per input unit: the steady speed per V.
// It is ±Inf for a model with a pole at the origin.
func (m Linear) DCGain() float64 {
	n, d := m.Num[len(m.Num)-1], m.Den[len(m.Den)-1]
	if d == 0 {
		return math.Inf(sign(n) * sign(m.Den[0]))
	}
	return n / d
}

// Scale returns m with its gain multiplied by k: the same motor seen through a
// different count, gear or supply.
func (m Linear) Scale(k float64) Linear {
	num := make([]float64, len(m.Num))
	for i, v := range m.Num {
		num[i] = k * v
	}
	m.Num = num
	return m
}

func sign(x float64) int {
	if x < 0 {
		return -1
	}
	return 1
}

func allZero(p []float64) bool { return len(trimZeros(p)) == 0 }

// trimZeros returns p without its leading zeros.
func trimZeros(p []float64) []float64 {
	for len(p) > 0 && p[0] == 0 {
		p = p[1:]
	}
	return p
}
