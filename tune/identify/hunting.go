package identify

import (
	"fmt"
	"math"
)

// Loop is what is known of a closed loop that is looked at for hunting. Zero
// stands for not known, but for Speed.
type Loop struct {
	Speed          float64 // rad/s, the setpoint, which does not move
	SpeedStep      float64 // rad/s, one count over the window of the speed
	Noise          float64 // rad/s RMS that the speed has without a loop
	VoltsMax       float64 // V, where the drive ends
	PhaseCrossover float64 // rad/s, of the loop on its model
}

// Hunting is a sustained oscillation of a closed loop at a setpoint that does not
// move.
type Hunting struct {
	Frequency float64 // Hz
	Amplitude float64 // rad/s, of the fundamental
	Periods   float64 // in the record
	Cause     string  // the likely cause in words, with what tells it
	Remedy    string
}

// Bounds of hunting (our choice).
const (
	huntPeriods   = 3.0  // whole periods needed
	huntOne       = 0.6  // least correlation with itself one period on
	huntTwo       = 0.45 // and two periods on
	huntShare     = 0.01 // least amplitude as a share of the setpoint
	huntNoise     = 2.0  // and of the noise
	huntSaturated = 0.1  // share of the samples at the end of the drive
	huntStands    = 0.1  // share of the samples at rest
	huntTurn      = 0.03 // how near to a multiple of the shaft's turns
	huntMultiples = 6
	huntPhase     = 1.6 // how near to the phase crossover, as a factor
)

// FindHunting looks for a limit cycle in t (s, rising), speed (rad/s) and volts (V),
// all of one length, while the setpoint stands. It correlates the speed, less its
// straight line, with itself: what is periodic comes back after one period and
// after two, noise through a well-damped loop does not. The amplitude is that of
// the sine of that frequency fitted by least squares. It returns nil where nothing
// hunts, or where the record is too short to say.
func FindHunting(t, speed, volts []float64, loop Loop) *Hunting {
	n := len(t)
	if n < 12 || len(speed) != n || len(volts) != n || !(t[n-1] > t[0]) {
		return nil
	}
	step := (t[n-1] - t[0]) / float64(n-1)
	y := lessLine(t, speed)
	lag, ok := comesBack(y)
	if !ok || float64(n)/lag < huntPeriods {
		return nil
	}
	f, amp := nearestSine(t, y, 1/(lag*step))
	least := math.Max(huntShare*math.Abs(loop.Speed), math.Max(loop.SpeedStep/2, huntNoise*loop.Noise))
	if amp < least {
		return nil
	}
	h := &Hunting{Frequency: f, Amplitude: amp, Periods: float64(n) / lag}
	h.name(speed, volts, loop, 1/(t[n-1]-t[0]))
	return h
}

// String is one line for a person at the bench.
func (h *Hunting) String() string {
	return fmt.Sprintf("hunts at %.3g Hz, ± %.3g rpm: likely %s", h.Frequency, h.Amplitude*60/(2*math.Pi), h.Cause)
}

// lessLine is y less its straight line over t.
func lessLine(t, y []float64) []float64 {
	n := float64(len(y))
	var st, sy, stt, sty float64
	for i := range y {
		x := t[i] - t[0]
		st, sy, stt, sty = st+x, sy+y[i], stt+x*x, sty+x*y[i]
	}
	slope := (n*sty - st*sy) / (n*stt - st*st)
	out := make([]float64, len(y))
	for i := range y {
		out[i] = y[i] - sy/n - slope*(t[i]-t[0]-st/n)
	}
	return out
}

// comesBack is the period of y in samples: the first peak of its correlation with
// itself that is nearly as high as the highest, past the first negative value.
func comesBack(y []float64) (float64, bool) {
	most := int(float64(len(y))/huntPeriods*1.05) + 2
	r := make([]float64, 0, most)
	for k := 0; k < most && k < len(y)-4; k++ {
		r = append(r, correlation(y, k))
	}
	k := 0
	for k < len(r) && r[k] > 0 {
		k++
	}
	top := 0.0
	for i := k; i+1 < len(r); i++ {
		top = math.Max(top, r[i])
	}
	if top < huntOne {
		return 0, false
	}
	for i := max(k, 1); i+1 < len(r); i++ {
		if r[i] < 0.85*top || r[i] < r[i-1] || r[i] < r[i+1] {
			continue
		}
		two := 0.0
		for j := 2*i - 1; j <= 2*i+1; j++ {
			two = math.Max(two, correlation(y, j))
		}
		// The peak between samples, by the parabola through three.
		bend := r[i-1] - 2*r[i] + r[i+1]
		off := 0.0
		if bend < 0 {
			off = 0.5 * (r[i-1] - r[i+1]) / bend
		}
		return float64(i) + off, two >= huntTwo
	}
	return 0, false
}

// correlation is that of y with itself k samples on, each part by its own size.
func correlation(y []float64, k int) float64 {
	if k >= len(y)-2 {
		return 0
	}
	var ab, aa, bb float64
	for i := 0; i+k < len(y); i++ {
		ab, aa, bb = ab+y[i]*y[i+k], aa+y[i]*y[i], bb+y[i+k]*y[i+k]
	}
	if aa == 0 || bb == 0 {
		return 0
	}
	return ab / math.Sqrt(aa*bb)
}

// nearestSine is the frequency near f whose sine takes most of y, and its amplitude.
func nearestSine(t, y []float64, f float64) (freq, amp float64) {
	span := t[len(t)-1] - t[0]
	lo, hi := math.Max(f-0.5/span, f/2), f+0.5/span
	for range 40 { // golden section
		a, b := hi-0.618034*(hi-lo), lo+0.618034*(hi-lo)
		if sineSize(t, y, a) > sineSize(t, y, b) {
			hi = b
		} else {
			lo = a
		}
	}
	freq = (lo + hi) / 2
	return freq, sineSize(t, y, freq)
}

func sineSize(t, y []float64, f float64) float64 {
	var ss, cc, sc, sy, cy float64
	for i := range y {
		s, c := math.Sincos(2 * math.Pi * f * (t[i] - t[0]))
		ss, cc, sc, sy, cy = ss+s*s, cc+c*c, sc+s*c, sy+s*y[i], cy+c*y[i]
	}
	det := ss*cc - sc*sc
	if det <= 0 {
		return 0
	}
	return math.Hypot((cc*sy-sc*cy)/det, (ss*cy-sc*sy)/det)
}

// name says the likely cause, the one that leaves the plainest mark first.
// resolution is that of the frequency, in Hz.
func (h *Hunting) name(speed, volts []float64, loop Loop, resolution float64) {
	stands, limited := 0, 0
	for i := range speed {
		if math.Abs(speed[i]) <= loop.SpeedStep/2 {
			stands++
		}
		if loop.VoltsMax > 0 && math.Abs(volts[i]) >= 0.98*loop.VoltsMax {
			limited++
		}
	}
	n := float64(len(speed))
	turns := math.Abs(loop.Speed) / (2 * math.Pi)
	multiple := 0.0
	for k := 1.0; k <= huntMultiples && turns > 0; k++ {
		if math.Abs(h.Frequency-k*turns) <= math.Max(huntTurn*k*turns, resolution/4) && resolution < turns {
			multiple = k
			break
		}
	}
	turn := fmt.Sprintf("%.0f per turn of the shaft", multiple)
	near := loop.PhaseCrossover > 0 && ratioOf(2*math.Pi*h.Frequency, loop.PhaseCrossover) < huntPhase
	switch {
	case float64(stands) >= huntStands*n && loop.Speed != 0:
		h.Cause = fmt.Sprintf("sticking: the shaft stands %.0f %% of the time while the integral winds up to breakaway", 100*float64(stands)/n)
		h.Remedy = "a higher setpoint, less integral gain, or a look at what drags"
	case float64(limited) >= huntSaturated*n:
		h.Cause = fmt.Sprintf("the drive at its limit %.0f %% of the time: the loop asks for more than it can have", 100*float64(limited)/n)
		h.Remedy = "a slower design or a lower setpoint; see that the supply does not fold back"
	case multiple > 0 && near:
		h.Cause = turn + ", which lies near where the loop has no phase left: either may be it"
		h.Remedy = "another setpoint tells: what turns with the shaft moves with it, the loop stays"
	case multiple > 0:
		h.Cause = turn + ": runout, coupling or the magnets, not the gains"
		h.Remedy = "look at coupling and encoder disc; another setpoint moves it along"
	case near:
		h.Cause = "too little phase left: more gain or more dead time than the model has"
		h.Remedy = "a smaller Ms bound, or fit the model again at this speed"
	case loop.SpeedStep > 0 && h.Amplitude <= 1.5*loop.SpeedStep:
		h.Cause = fmt.Sprintf("steps of the counter: one is %.3g rpm", loop.SpeedStep*60/(2*math.Pi))
		h.Remedy = "a longer window of the speed, a finer encoder or a higher setpoint"
	default:
		h.Cause = "not told by its mark: lost motion, a load that swings, or a loop around this one"
		h.Remedy = "run open loop at this speed: if it stays it is not the gains; step reversal measures lost motion"
	}
}

func ratioOf(a, b float64) float64 { return math.Max(a/b, b/a) }
