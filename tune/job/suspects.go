package job

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"gainwright/protocol"
)

// What no model here describes, and what the experiments show of it anyway: a
// load that pulls by the angle, and free play.

// Limits of the two (our choice).
const (
	turnShareRated   = 0.02 // of the rated volts
	turnShareSliding = 0.15 // of sliding friction
	turnSigmas       = 8.0  // of the amplitude's own ±
	playLeast        = 0.12 // rad of the motor shaft
	playSigmas       = 8.0
	playCounts       = 3.0
)

// onceATurn is the drive in volts that a load which pulls by the angle of the
// output shaft is worth, as an amplitude, and its standard deviation: the part of
// the speed on settled levels that goes with the sine of the angle, taken back
// through the model K/(1+τs). Levels of both directions and all speeds have to
// agree on one amplitude and one phase.
func (j *Job) onceATurn(runs []stairRun) (amplitude, sd float64) {
	gear, rad := math.Max(1, j.Rig.Encoder.GearRatio), j.ID.RadPerCount()
	var cc, cs, ss, cy, sy, yy float64
	n := 0
	var all [][]Sample
	for _, r := range runs {
		for _, st := range r.stairs {
			all = append(all, window(r.Result, st.From, st.To))
		}
	}
	for _, s := range all {
		if len(s) < 10 || rad == 0 {
			continue
		}
		w := 0.0
		for i := range s {
			w += float64(s[i].Speed) / float64(len(s))
		}
		omega := w / gear
		h := complex(j.Gain, 0) / complex(1, omega*j.Tau) * cmplx.Exp(complex(0, -omega*j.ID.Window().Seconds()/2))
		x, y := make([]complex128, len(s)), make([]float64, len(s))
		var mx complex128
		for i := range s {
			x[i] = h * cmplx.Exp(complex(0, float64(s[i].Counts)*rad/gear))
			y[i] = float64(s[i].Speed) - w
			mx += x[i] / complex(float64(len(s)), 0)
		}
		for i := range s {
			c, d := real(x[i]-mx), imag(x[i]-mx)
			cc, cs, ss = cc+c*c, cs+c*d, ss+d*d
			cy, sy, yy = cy+c*y[i], sy+d*y[i], yy+y[i]*y[i]
		}
		n += len(s)
	}
	det := cc*ss - cs*cs
	if n < 50 || !(det > 1e-6*cc*ss) {
		return 0, 0
	}
	a, b := (ss*cy-cs*sy)/det, (cc*sy-cs*cy)/det
	rest := math.Max(0, yy-a*cy-b*sy) / float64(n-2)
	return math.Hypot(a, b), math.Sqrt(rest * math.Max(cc, ss) / det)
}

// gravity refuses a load that pulls by the angle, where the rig file does not say
// that it does and that a brake holds it.
func (j *Job) gravity(runs []stairRun) error {
	if j.Rig.Load.Gravity && j.Rig.Load.HoldingBrake {
		return nil
	}
	a, sd := j.onceATurn(runs)
	if a < turnSigmas*sd || a < math.Max(turnShareRated*j.Rig.Motor.VoltageRated, turnShareSliding*j.slidingVolts()) {
		return nil
	}
	return refuse(728, "load refused", fmt.Sprintf("the load pulls by its angle, once a turn, as much as %.2g V of drive: gravity or something out of balance", a),
		"a load that gravity can turn needs a holding brake, said in the rig file (load.gravity, load.holding_brake); else balance it or take it off")
}

// play is the angle in rad that the motor turns before the encoder sees it when a
// ramp sets out against the last direction: back-EMF, as volts less R·I, that
// comes up before the first count. It needs the current and Ke.
func (j *Job) play(s []Sample) (rad, sd float64, ramps int) {
	e := j.electric
	if e == nil || e.Ke == 0 {
		return 0, 0, 0
	}
	var all []float64
	for i := 0; i < len(s); {
		if s[i].Volts == 0 {
			i++
			continue
		}
		dir := math.Copysign(1, float64(s[i].Volts))
		from, base := i, s[max(i-1, 0)].Counts
		for i < len(s) && float64(s[i].Volts)*dir > 0 && s[i].Counts == base {
			i++
		}
		if x, ok := flight(s[from:i], dir, e); ok {
			all = append(all, x)
		}
		for i < len(s) && float64(s[i].Volts)*dir > 0 {
			i++
		}
	}
	if len(all) < 3 {
		return 0, 0, len(all)
	}
	slices.Sort(all)
	return all[len(all)/2], spread(all) / math.Sqrt(float64(len(all))), len(all)
}

// flight is the back-EMF of the last samples before the first count over that of
// the ones before, summed to an angle.
func flight(s []Sample, dir float64, e *electrical) (rad float64, ok bool) {
	const last, before = 120e3, 350e3 // µs
	if len(s) < 30 {
		return 0, false
	}
	end := s[len(s)-1].BoardUS
	emf := func(x *Sample) float64 { return math.Abs(float64(x.Volts)) - e.R*float64(x.Current)*dir }
	ref, n := 0.0, 0
	for i := range s {
		if age := end - s[i].BoardUS; age > last && age <= before && s[i].Has&protocol.HasCurrent != 0 {
			ref, n = ref+emf(&s[i]), n+1
		}
	}
	if n < 10 {
		return 0, false
	}
	ref /= float64(n)
	for i := 1; i < len(s); i++ {
		if end-s[i].BoardUS <= last {
			rad += (emf(&s[i]) - ref) / e.Ke * float64(s[i].BoardUS-s[i-1].BoardUS) * 1e-6
		}
	}
	return rad, true
}

// lostMotion refuses free play between motor and encoder.
func (j *Job) lostMotion() error {
	x, sd, n := j.play(j.breakRun)
	if n == 0 || x < playLeast || x < playSigmas*sd || x < playCounts*j.ID.RadPerCount() {
		return nil
	}
	return refuse(729, "coupling refused", fmt.Sprintf("on turning round, the motor turns %.2g rad before the encoder sees it (back-EMF without counts, middle of %d ramps): lost motion", x, n),
		"look at coupling, keys and screws; a loop closed over free play hunts")
}
