package job

import (
	"fmt"
	"math"

	"gainwright/protocol"
	"gainwright/tune/identify"
	"gainwright/tune/sheet"
)

// electrical is what a measured current tells of a motor.
type electrical struct {
	R, RSD float64  // ohm, from terminal to terminal: winding, leads and driver
	Temp   *float64 // degC, as the board reports it at that time
	N      int      // samples behind R

	Ke, KeSD float64 // V·s/rad; 0 before the staircase
	Idle     float64 // A, at the fastest forward level
	Coulomb  float64 // N·m, forward and reverse together
}

// standstillLeast is the least number of samples that a resistance is taken from.
const standstillLeast = 60

// standstill takes the resistance from ramps before the shaft first moves: with
// no speed there is no back-EMF, and the slope of volts over current is the
// resistance. The lower part of a ramp is left out, where a driver's dead band
// may be all there is. nil where the current is not measured or says too little.
func standstill(s []Sample) *electrical {
	var volts, amps []float64
	e := &electrical{}
	for i := 0; i < len(s); {
		if s[i].Volts == 0 {
			i++
			continue
		}
		dir := math.Copysign(1, float64(s[i].Volts))
		base, from := s[max(i-1, 0)].Counts, i
		for i < len(s) && float64(s[i].Volts)*dir > 0 && s[i].Counts == base {
			i++
		}
		top := math.Abs(float64(s[max(i-1, from)].Volts))
		for _, x := range s[from:i] {
			if v := math.Abs(float64(x.Volts)); v > 0.4*top && x.Has&protocol.HasCurrent != 0 {
				volts, amps = append(volts, v), append(amps, float64(x.Current)*dir)
			}
			if x.Slow.HasTmp {
				t := float64(x.Slow.Temp)
				e.Temp = &t
			}
		}
		for i < len(s) && float64(s[i].Volts)*dir > 0 {
			i++
		}
	}
	if e.N = len(volts); e.N < standstillLeast {
		return nil
	}
	// Current is the noisy one: it is fitted on the volts, which are known.
	slope, sd := line(volts, amps)
	if !(slope > 4*sd) {
		return nil
	}
	e.R, e.RSD = 1/slope, sd/(slope*slope)
	return e
}

// line fits y = a + b·x and returns b with its standard deviation.
func line(x, y []float64) (b, sd float64) {
	mx, my, n := mean(x), mean(y), float64(len(x))
	var xx, xy float64
	for i := range x {
		xx += (x[i] - mx) * (x[i] - mx)
		xy += (x[i] - mx) * (y[i] - my)
	}
	b = xy / xx
	rss := 0.0
	for i := range x {
		e := y[i] - my - b*(x[i]-mx)
		rss += e * e
	}
	return b, math.Sqrt(rss / (n - 2) / xx)
}

// running takes Ke and friction from settled levels, with the resistance known:
// V − R·I = Ke·ω + V0·sgn ω, and the torque Ke·I over speed down to zero. In SI
// units the torque constant is Ke. The ± of the resistance is in that of Ke.
func (e *electrical) running(levels []identify.Level) {
	var speed, emf, amps []float64
	fast := 0.0
	for _, l := range levels {
		if l.Current*l.Volts > 0 && l.Speed*l.Volts > 0 {
			w := math.Abs(l.Speed)
			i := math.Abs(l.Current)
			speed, amps = append(speed, w), append(amps, i)
			emf = append(emf, math.Abs(l.Volts)-e.R*i)
			if l.Volts > 0 && w > fast {
				fast, e.Idle = w, i
			}
		}
	}
	if len(speed) < 4 {
		return
	}
	ke, sd := line(speed, emf)
	drag, _ := line(speed, amps)
	if !(ke > 4*sd) {
		return
	}
	e.Ke, e.KeSD = ke, math.Hypot(sd, e.RSD*math.Abs(drag))
	e.Coulomb = math.Max(0, ke*(mean(amps)-drag*mean(speed)))
}

func (e *electrical) resistance(file string) sheet.Quantity {
	return sheet.Quantity{Name: "resistance, winding with leads and driver", Value: sheet.Known(e.R), Unit: "ohm", PlusMinus: sheet.Known(1.96 * e.RSD),
		Why: fmt.Sprintf("slope of current over volts before the first motion, %d samples of %s; at the temperature of that moment", e.N, file)}
}

func (e *electrical) quantities(file string) []sheet.Quantity {
	if e == nil || e.Ke == 0 {
		return nil
	}
	return []sheet.Quantity{{Name: "Ke", Value: sheet.Known(e.Ke), Unit: "V s/rad", PlusMinus: sheet.Known(1.96 * e.KeSD), Why: "V − R·I over speed on the levels of " + file},
		{Name: "Coulomb friction", Value: sheet.Known(e.Coulomb), Unit: "N m", Why: "Ke·I of the levels, drawn down to speed 0; " + file}}
}

// MotorConstants are the constants of the motor equations that a measured current
// gives, with standard deviations; 0 where they are not identifiable.
type MotorConstants struct {
	R, RSD   float64 // Ω
	Ke, KeSD float64 // V·s/rad
	J        float64 // kg·m², at the motor shaft
	Viscous  float64 // N·m·s/rad
}

// Motor returns the constants. Without a measured current only what the model has
// is identifiable: gain, time constants, dead time, and friction in volts. The
// gain is then Ke/(bR + Ke²) and the time constant JR/(bR + Ke²), and any R goes
// with some Ke, J and b.
func (j *Job) Motor() (m MotorConstants, ok bool) {
	e := j.electric
	if e == nil || e.Ke == 0 {
		return m, false
	}
	m = MotorConstants{R: e.R, RSD: e.RSD, Ke: e.Ke, KeSD: e.KeSD}
	if j.Fit == nil || j.Fit.Best() == nil {
		return m, true
	}
	gain, _, _ := j.Fit.Best().Value("gain")
	tau, _, okTau := j.Fit.Best().Value("tau")
	if tau2, _, two := j.Fit.Best().Value("tau2"); two {
		tau += tau2 // the s term of the denominator is their sum, and L/R·bR/(bR+Ke²) is small
	}
	if gain > 0 && okTau {
		m.J = tau * e.Ke / (gain * e.R)
		m.Viscous = math.Max(0, (e.Ke/gain-e.Ke*e.Ke)/e.R)
	}
	return m, true
}

// motor fills in what the current tells. gain and tau are those of the model, 0
// where there is none: with the inductance left out, J = tau·Ke/(gain·R).
func (e *electrical) motor(m *sheet.MotorRecord, gain, tau float64) {
	if e == nil {
		return
	}
	m.ROhm, m.RDegC = sheet.Known(e.R), e.Temp
	if e.Ke == 0 {
		return
	}
	m.KeVsPerRad, m.CoulombNm = sheet.Known(e.Ke), sheet.Known(e.Coulomb)
	if m.LoadState != "loaded" {
		m.NoLoadCurrentA = sheet.Known(e.Idle)
	}
	if gain > 0 && tau > 0 { // tau2 is in tau: see Motor
		m.JKgM2 = sheet.Known(tau * e.Ke / (gain * e.R))
	}
}
