package simrig

import "math"

// copperPerKelvin is the rise of copper's resistance per kelvin, from 25 °C on.
const copperPerKelvin = 0.00393

// side is the friction of one direction of rotation, in N·m and N·m·s/rad.
type side struct {
	coulomb, static, viscous float64
	stribeck                 float64 // rad/s at which exp(-1) of the static excess is left
}

// excess returns what static friction adds to Coulomb friction at |speed| w:
// (Ts - Tc)·exp(-(w/ws)²), the Gaussian form of the Stribeck curve
// (B. Armstrong-Hélouvry, Control of Machines with Friction, 1991; from memory).
func (f *side) excess(w float64) float64 {
	if w > 7*f.stribeck {
		return 0 // exp(-49) is below the rounding of any torque here
	}
	x := w / f.stribeck
	return (f.static - f.coulomb) * math.Exp(-x*x)
}

// slope returns dT/dw of the whole friction torque at speed w > 0.
func (f *side) slope(w float64) float64 {
	x := w / f.stribeck
	return f.viscous - (f.static-f.coulomb)*2*x/f.stribeck*math.Exp(-x*x)
}

// motor holds the constants of the electrical and mechanical equations
//
//	L di/dt = v - R i - K w
//	J dw/dt = K i - T_friction(w) - T_load - T_gravity·sin(theta·perTurn)
//
// K is the torque constant in N·m/A and the back-EMF constant in V·s/rad, one
// number in SI.
type motor struct {
	r, l, k, j float64
	fwd, rev   side
	load       float64 // N·m, active: it pulls towards negative angles
	gravity    float64 // N·m amplitude at the motor shaft
	gear       float64 // motor turns per output turn
}

func (m *motor) side(dir int) *side {
	if dir < 0 {
		return &m.rev
	}
	return &m.fwd
}

// pull is the torque of load and gravity at the angle th, in N·m.
func (m *motor) pull(th float64) float64 {
	if m.gravity == 0 {
		return m.load
	}
	return m.load + m.gravity*math.Sin(th/m.gear)
}

// propagator carries current and speed exactly over h seconds of one direction
// of rotation: x(h) = E·x + P·g with constant forcing g = (v/L, torque/J), and
// Q·(dg) for a forcing that changes linearly by dg over the step.
type propagator struct {
	h                  float64
	e11, e12, e21, e22 float64
	p11, p12, p21, p22 float64
	q12, q22           float64
	coast, coastP      float64 // the same for w alone with the winding open
	coastQ             float64
}

// propagate builds the propagator from the eigenvalues of
//
//	A = [ -R/L  -K/L ]
//	    [  K/J  -b/J ]
func (m *motor) propagate(h float64, dir int) propagator {
	b := m.side(dir).viscous
	a11, a12, a21, a22 := -m.r/m.l, -m.k/m.l, m.k/m.j, -b/m.j
	mean, diff := (a11+a22)/2, (a11-a22)/2
	c, s := cosSinExp(mean, diff*diff+a12*a21, h)
	p := propagator{h: h}
	p.e11, p.e12 = c+s*diff, s*a12
	p.e21, p.e22 = s*a21, c-s*diff
	// P = A⁻¹(E - I); A is regular because K > 0.
	det := a11*a22 - a12*a21
	i11, i12, i21, i22 := a22/det, -a12/det, -a21/det, a11/det
	p.p11, p.p12 = i11*(p.e11-1)+i12*p.e21, i11*p.e12+i12*(p.e22-1)
	p.p21, p.p22 = i21*(p.e11-1)+i22*p.e21, i21*p.e12+i22*(p.e22-1)
	// Q = A⁻¹(P - h·I)/h, needed for the torque's column only.
	p.q12 = (i11*p.p12 + i12*(p.p22-h)) / h
	p.q22 = (i21*p.p12 + i22*(p.p22-h)) / h

	x := -b * h / m.j
	p.coast = math.Exp(x)
	if x > -1e-4 {
		p.coastP, p.coastQ = h*(1+x/2+x*x/6), h*(0.5+x/6)
	} else {
		p.coastP = math.Expm1(x) / x * h
		p.coastQ = (p.coastP - h) / x
	}
	return p
}

// cosSinExp returns e^(mean·h)·cosh(q·h) and e^(mean·h)·sinh(q·h)/q for q² = qq,
// built from the two eigenvalues so that nothing overflows when one is fast.
func cosSinExp(mean, qq, h float64) (c, s float64) {
	switch q := math.Sqrt(math.Abs(qq)); {
	case q*h < 1e-6:
		e := math.Exp(mean * h)
		return e, e * h
	case qq > 0:
		slow, fast := math.Exp((mean+q)*h), math.Exp((mean-q)*h)
		return (slow + fast) / 2, (slow - fast) / (2 * q)
	default:
		e := math.Exp(mean * h)
		return e * math.Cos(q*h), e * math.Sin(q*h) / q
	}
}
