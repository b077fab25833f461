package identify

import (
	"math"
	"math/rand/v2"

	"gainwright/tune/trace"
)

// zooRig is a simulated motor under test: everything a record can suffer from,
// in small explicit steps, sharing no code with the fit.
type zooRig struct {
	gain, tau, tau2, dead float64
	noise                 float64 // rad/s
	quantum               float64 // rad/s, 0: none

	driftShare   float64                 // gain at the end is gain·(1 + driftShare)
	slipFrom     float64                 // share of the record behind which the encoder reads less
	slipShare    float64                 // by this share
	clip         float64                 // V: more does not arrive, 0: no limit
	curve        func(u float64) float64 // static nonlinearity of the drive, nil: none
	sag          float64                 // share of the bus lost under full acceleration
	modeW, modeZ float64                 // rad/s and damping of an extra mode, 0: none
	modeGain     float64
	coulomb      float64 // V, friction that stops the shaft
	backlash     float64 // rad of play between shaft and encoder
	asymmetry    float64 // time constant falling over rising
}

const zooBus = 24.0

// run applies the voltage u[i] from t[i-1] to t[i] and returns the record.
func (r zooRig) run(rng *rand.Rand, u []float64, h float64) *trace.Trace {
	const sub = 40
	dt := h / sub
	n := len(u)
	lag := int(math.Round(r.dead / dt))
	line := make([]float64, lag+1)
	for i := range line {
		line[i] = u[0]
	}
	x := r.gain * u[0]
	if r.coulomb > 0 {
		x = r.gain * math.Copysign(math.Max(math.Abs(u[0])-r.coulomb, 0), u[0])
	}
	x2, m1, m2 := x, 0.0, 0.0
	theta, seen := 0.0, 0.0
	tr := &trace.Trace{Name: "zoo"}
	var last float64
	at := 0
	for i := 0; i < n; i++ {
		share := float64(i) / float64(n)
		low := zooBus
		for k := 0; k < sub; k++ {
			v := line[at]
			line[at] = u[i]
			at = (at + 1) % len(line)
			g := r.gain * (1 + r.driftShare*share)
			if r.clip > 0 {
				v = math.Min(v, r.clip)
			}
			if r.curve != nil {
				v = r.curve(v)
			}
			bus := zooBus
			if r.sag > 0 {
				accel := math.Max(v-x/r.gain, 0)
				bus = zooBus * (1 - r.sag*math.Min(accel/1.0, 1))
				v *= bus / zooBus
			}
			low = math.Min(low, bus)
			tau := r.tau
			if r.asymmetry > 0 && g*v < x {
				tau *= r.asymmetry
			}
			drive := v
			if r.coulomb > 0 {
				switch {
				case x > 1e-9 || x == 0 && v > r.coulomb:
					drive = v - r.coulomb
				case x < -1e-9 || x == 0 && v < -r.coulomb:
					drive = v + r.coulomb
				default:
					drive = 0
				}
			}
			old := x
			x += dt / tau * (g*drive - x)
			if r.coulomb > 0 && old*x < 0 {
				x = 0
			}
			out := x
			if r.tau2 > 0 {
				x2 += dt / r.tau2 * (x - x2)
				out = x2
			}
			if r.modeW > 0 {
				m2 += dt * (r.modeW*r.modeW*(out-m1) - 2*r.modeZ*r.modeW*m2)
				m1 += dt * m2
				out += r.modeGain * (m1 - out)
			}
			theta += dt * out
			last = out
		}
		y := last
		if r.backlash > 0 {
			was := seen
			seen = math.Min(math.Max(seen, theta-r.backlash/2), theta+r.backlash/2)
			y = (seen - was) / h
		}
		if r.slipShare > 0 && share > r.slipFrom {
			y *= 1 - r.slipShare
		}
		y += r.noise * rng.NormFloat64()
		if r.quantum > 0 {
			y = r.quantum * math.Floor(y/r.quantum+rng.Float64())
		}
		tr.Time = append(tr.Time, float64(i)*h)
		tr.Voltage = append(tr.Voltage, u[i])
		tr.Speed = append(tr.Speed, y)
		if r.sag > 0 {
			tr.Bus = append(tr.Bus, low)
		}
	}
	return tr
}

// stepSet is n steps each way about an operating voltage.
func stepSet(centre, size float64, hold, n int) []float64 {
	var u []float64
	for k := 0; k < hold; k++ {
		u = append(u, centre)
	}
	for i := 0; i < n; i++ {
		for _, v := range []float64{centre + size, centre, centre - size, centre} {
			for k := 0; k < hold; k++ {
				u = append(u, v)
			}
		}
	}
	return u
}

// prbs is a maximum-length sequence of 2⁷ − 1 bits about a centre.
func prbs(centre, size float64, clock, n int) []float64 {
	reg := uint8(0x5a & 0x7f)
	var u []float64
	for k := 0; k < 4*clock; k++ {
		u = append(u, centre)
	}
	for len(u) < n {
		bit := (reg>>6 ^ reg>>5) & 1
		reg = (reg<<1 | bit) & 0x7f
		v := centre - size
		if bit == 1 {
			v = centre + size
		}
		for k := 0; k < clock; k++ {
			u = append(u, v)
		}
	}
	return u[:n]
}

func uniform(rng *rand.Rand, lo, hi float64) float64 { return lo + (hi-lo)*rng.Float64() }

// healthy draws a motor that one of the models describes, with its experiment.
func healthyZoo(rng *rand.Rand) (zooRig, []float64, float64) {
	r := zooRig{gain: math.Exp(uniform(rng, math.Log(5), math.Log(100))), tau: math.Exp(uniform(rng, math.Log(0.01), math.Log(0.3)))}
	h := r.tau / uniform(rng, 12, 40)
	r.dead = uniform(rng, 0, 4) * h
	if rng.IntN(3) == 0 {
		r.tau2 = uniform(rng, 0.05, 0.35) * r.tau
	}
	centre, size := uniform(rng, 6, 12), uniform(rng, 0.8, 2.5)
	r.noise = r.gain * size * uniform(rng, 0.003, 0.05)
	if rng.IntN(3) == 0 {
		r.quantum = r.noise * uniform(rng, 0.5, 2)
	}
	return r, zooDrive(rng, centre, size, r, h), h
}

func zooDrive(rng *rand.Rand, centre, size float64, r zooRig, h float64) []float64 {
	settle := int(6 * (r.tau + r.tau2 + r.dead) / h)
	if rng.IntN(2) == 0 {
		return stepSet(centre, size, settle, 6)
	}
	return prbs(centre, size, max(2, int(3*r.tau/7/h)), 2*127*max(2, int(3*r.tau/7/h)))
}

// sickZoo draws a record of the given class, with an effect well over 10 % on some
// parameter.
func sickZoo(class string, rng *rand.Rand) *trace.Trace {
	r, u, h := healthyZoo(rng)
	r.tau2 = 0
	lo, hi := u[0], u[0]
	for _, v := range u {
		lo, hi = math.Min(lo, v), math.Max(hi, v)
	}
	size := (hi - lo) / 2
	r.noise = math.Min(r.noise, 0.03*r.gain*size)
	switch class {
	case "wrong sign":
		r.gain = -r.gain
	case "noise":
		r.noise = math.Abs(r.gain) * size * uniform(rng, 0.05, 0.5)
		r.gain = 0
	case "drift":
		r.driftShare = uniform(rng, 0.2, 0.5)
		if rng.IntN(2) == 0 {
			r.driftShare = -r.driftShare
		}
	case "slip":
		r.slipFrom, r.slipShare = uniform(rng, 0.1, 0.45), uniform(rng, 0.12, 0.5)
	case "saturated":
		r.clip = hi - size*uniform(rng, 0.3, 0.8)
	case "sag":
		r.sag = uniform(rng, 0.12, 0.3)
	case "nonlinear":
		bend := uniform(rng, 0.25, 0.6)
		mid := (lo + hi) / 2
		r.curve = func(u float64) float64 { d := u - mid; return u - bend*d*d/(2*size) }
	case "resonance":
		r.modeW = uniform(rng, 4, 10) / r.tau
		r.modeZ, r.modeGain = uniform(rng, 0.01, 0.04), uniform(rng, 0.6, 1.2)
	case "backlash":
		for i := range u {
			u[i] -= (lo + hi) / 2
			u[i] *= 2
		}
		r.coulomb = 2 * size * uniform(rng, 0.15, 0.35)
		r.backlash = r.gain * size * r.tau * uniform(rng, 0.1, 0.5)
	case "asymmetry":
		r.asymmetry = uniform(rng, 1.3, 2.5)
	}
	return r.run(rng, u, h)
}
