package model

import (
	"fmt"
	"math"

	"gainwright/protocol/si"
)

// Motor is a permanent-magnet DC motor with what it turns, all referred to the
// motor shaft:
//
//	L·di/dt = v − R·i − Ke·ω
//	J·dω/dt = Kt·i − T(ω) − T_load
//	T(ω)    = (Tc + (Ts − Tc)·e^(−(ω/ωs)²))·sgn ω + b·ω
//
// the textbook equations with Coulomb, viscous and Stribeck friction (Gaussian
// form; from memory). In SI units Ke and Kt are the same number for a motor
// without losses in the magnet circuit; they may be given apart.
type Motor struct {
	R  float64 // winding resistance in Ω, > 0
	L  float64 // winding inductance in H, ≥ 0; 0 gives a first-order model
	Ke float64 // V per rad/s, > 0
	Kt float64 // N·m/A, > 0
	J  float64 // inertia in kg·m², > 0

	Viscous          float64 // b in N·m per rad/s, ≥ 0
	CoulombForward   float64 // Tc for ω > 0 in N·m, ≥ 0
	CoulombReverse   float64 // Tc for ω < 0 in N·m, ≥ 0
	BreakawayForward float64 // Ts for ω > 0 in N·m, ≥ Tc; 0 means Tc
	BreakawayReverse float64 // Ts for ω < 0 in N·m, ≥ Tc; 0 means Tc
	StribeckSpeed    float64 // ωs in rad/s, ≥ 0; 0 means no Stribeck effect in motion
}

// Validate reports the first value of m that is out of its range.
func (m Motor) Validate() error {
	for _, c := range []struct {
		name     string
		value    float64
		positive bool
	}{
		{"R", m.R, true}, {"Ke", m.Ke, true}, {"Kt", m.Kt, true}, {"J", m.J, true},
		{"L", m.L, false}, {"viscous friction", m.Viscous, false},
		{"forward Coulomb friction", m.CoulombForward, false}, {"reverse Coulomb friction", m.CoulombReverse, false},
		{"forward breakaway torque", m.BreakawayForward, false}, {"reverse breakaway torque", m.BreakawayReverse, false},
		{"Stribeck speed", m.StribeckSpeed, false},
	} {
		if !si.Finite(c.value) || c.value < 0 || c.positive && c.value == 0 {
			return fmt.Errorf("%w: motor: %s is %g: it must be %s", ErrModel, c.name, c.value,
				map[bool]string{true: "above 0", false: "0 or more"}[c.positive])
		}
	}
	return nil
}

// Friction returns T(ω) in N·m, with the sign of ω; 0 at standstill, where the
// friction is whatever holds the shaft, up to Breakaway.
func (m Motor) Friction(w float64) float64 {
	switch {
	case w > 0:
		return m.dry(w, m.CoulombForward, m.BreakawayForward) + m.Viscous*w
	case w < 0:
		return -m.dry(-w, m.CoulombReverse, m.BreakawayReverse) + m.Viscous*w
	}
	return 0
}

func (m Motor) dry(w, coulomb, breakaway float64) float64 {
	if m.StribeckSpeed == 0 || breakaway <= coulomb {
		return coulomb
	}
	q := w / m.StribeckSpeed
	return coulomb + (breakaway-coulomb)*math.Exp(-q*q)
}

// FrictionSlope returns dT/dω at ω ≠ 0 in N·m per rad/s: the viscous friction
// that a small change about ω sees. It is negative in the Stribeck range.
func (m Motor) FrictionSlope(w float64) float64 {
	coulomb, breakaway := m.CoulombForward, m.BreakawayForward
	if w < 0 {
		coulomb, breakaway = m.CoulombReverse, m.BreakawayReverse
	}
	if m.StribeckSpeed == 0 || breakaway <= coulomb {
		return m.Viscous
	}
	q := math.Abs(w) / m.StribeckSpeed
	return m.Viscous - 2*(breakaway-coulomb)*q/m.StribeckSpeed*math.Exp(-q*q)
}

// Linearise returns the linear model from volts to speed about the speed w in
// rad/s, with the given dead time in s:
//
//	ω/v = Kt / (J·L·s² + (J·R + b·L)·s + (b·R + Kt·Ke)),  b = FrictionSlope(w)
//
// With L = 0 it is of first order. Below the speed at which b falls to
// −Kt·Ke/R the model is unstable: the motor stick-slips there under open loop.
func (m Motor) Linearise(w, deadTime float64) Linear {
	b := m.FrictionSlope(w)
	lin := Linear{
		Kind: KindMotor, Num: []float64{m.Kt},
		Den:      []float64{m.J * m.L, m.J*m.R + b*m.L, b*m.R + m.Kt*m.Ke},
		DeadTime: deadTime, InputUnit: InputVolts,
	}
	lin.Den = trimZeros(lin.Den)
	return lin
}

// SteadyVolts returns the voltage that holds the speed w in rad/s against
// friction and a load torque in N·m: R·(T(ω) + T_load)/Kt + Ke·ω.
func (m Motor) SteadyVolts(w, load float64) float64 {
	return m.R*(m.Friction(w)+load)/m.Kt + m.Ke*w
}

// SteadySpeed returns the speed in rad/s that a constant voltage settles at
// under a load torque in N·m, starting from speed; 0 if it does not break away.
func (m Motor) SteadySpeed(volts, load float64) float64 {
	dir := 1.0
	torque := m.Kt*volts/m.R - load
	if torque < 0 {
		dir = -1
	}
	coulomb := m.CoulombForward
	if dir < 0 {
		coulomb = m.CoulombReverse
	}
	if math.Abs(torque) <= coulomb {
		return 0
	}
	// Above the Stribeck range friction only grows with speed; without it the
	// balance is linear and gives an upper bound, from which we search down.
	hi := (math.Abs(torque) - coulomb) * m.R / (m.Viscous*m.R + m.Kt*m.Ke)
	excess := func(w float64) float64 {
		return math.Abs(torque) - m.Kt*m.Ke*w/m.R - dir*m.Friction(dir*w)
	}
	if excess(hi) >= 0 {
		return dir * hi
	}
	lo := hi
	for i := 0; i < 200 && excess(lo) < 0; i++ {
		lo *= 0.95
	}
	if excess(lo) < 0 {
		return 0
	}
	return dir * bisect(excess, lo, hi)
}

// SteadyCurrent returns the current in A at the speed w and a load torque.
func (m Motor) SteadyCurrent(w, load float64) float64 { return (m.Friction(w) + load) / m.Kt }

// StallCurrent returns the locked-rotor current in A at a voltage.
func (m Motor) StallCurrent(volts float64) float64 { return volts / m.R }

// BreakawayVolts returns the voltages, both positive, at which the shaft begins
// to turn forward and in reverse from standstill: R·Ts/Kt.
func (m Motor) BreakawayVolts() (forward, reverse float64) {
	return m.R * math.Max(m.BreakawayForward, m.CoulombForward) / m.Kt,
		m.R * math.Max(m.BreakawayReverse, m.CoulombReverse) / m.Kt
}

// TimeConstants returns the electrical time constant L/R and the mechanical one
// J·R/(Kt·Ke + b·R), both in s.
func (m Motor) TimeConstants() (electrical, mechanical float64) {
	return m.L / m.R, m.J * m.R / (m.Kt*m.Ke + m.Viscous*m.R)
}

// CopperPerKelvin is the rise of the resistance of copper per K of that at
// 20–25 °C.
const CopperPerKelvin = 0.00393

// Warm returns m at deltaK kelvin above the temperature it was measured at:
// resistance by CopperPerKelvin, flux by magnetPerKelvin (negative: ferrite
// about −0.002, neodymium about −0.001 per K).
func (m Motor) Warm(deltaK, magnetPerKelvin float64) Motor {
	m.R *= 1 + CopperPerKelvin*deltaK
	m.Ke *= 1 + magnetPerKelvin*deltaK
	m.Kt *= 1 + magnetPerKelvin*deltaK
	return m
}
