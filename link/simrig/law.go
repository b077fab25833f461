package simrig

// law is the speed control law, in binary32 as on a small chip:
//
//	u = kp·(b·r - y) + I + D + kv·r + ks·sgn(r)
type law struct {
	kp, ki, kd, tf, b, tt, kv, ks float32
	period                        float32 // s
	disc                          string
	windup                        string
	onError                       bool // the derivative acts on r - y

	i, d  float32
	lastE float32 // r - y of the period before
	lastP float32 // kp·(b·r - y) of the period before
	lastD float32 // input of the derivative of the period before
	lastU float32
}

// reset is what entering the closed loop does: a zero integral, and nothing
// before the first period, since an arm is only given at rest.
func (l *law) reset() {
	l.i, l.d, l.lastE, l.lastP, l.lastD, l.lastU = 0, 0, 0, 0, 0, 0
}

// step returns the output for setpoint r and speed y within [low, high], and
// whether it was clipped.
func (l *law) step(r, y, low, high float32) (u float32, clipped bool) {
	e := r - y
	p := l.kp * (l.b*r - y)
	in := -y
	if l.onError {
		in = e
	}
	ff := l.kv * r
	switch {
	case r > 0:
		ff += l.ks
	case r < 0:
		ff -= l.ks
	}
	dOld := l.d
	l.derivative(in)
	if l.disc == "incremental" {
		// Without an integral of its own the law cannot wind up: the output
		// itself is the sum, and it is held at the limits.
		u = l.lastU + (p - l.lastP) + l.ki*l.period*e + (l.d - dOld)
		u, clipped = clip(u, low-ff, high-ff)
		l.lastU, l.lastP, l.lastE, l.lastD = u, p, e, in
		return u + ff, clipped
	}
	before := l.i
	use := l.integrate(e)
	raw := p + use + l.d + ff
	u, clipped = clip(raw, low, high)
	switch {
	case l.windup == "back-calculation" && l.tt > 0:
		l.i += l.period / l.tt * (u - raw)
	case l.windup == "clamp" && clipped && (raw > u) == (l.ki*e > 0) && e != 0:
		l.i = before
		if l.disc != "forward-euler" {
			u, _ = clip(p+before+l.d+ff, low, high)
		}
	}
	l.lastE, l.lastD = e, in
	return u, clipped
}

// integrate moves the integral by this period's error and returns the value that
// the output uses.
func (l *law) integrate(e float32) float32 {
	switch l.disc {
	case "forward-euler":
		use := l.i
		l.i += l.ki * l.period * e
		return use
	case "tustin":
		l.i += l.ki * l.period / 2 * (e + l.lastE)
	default:
		l.i += l.ki * l.period * e
	}
	return l.i
}

// derivative moves the filtered derivative kd·s/(1 + tf·s) of in.
func (l *law) derivative(in float32) {
	if l.kd == 0 {
		l.d = 0
		return
	}
	dx, h := in-l.lastD, l.period
	switch l.disc {
	case "forward-euler":
		if l.tf < h {
			l.d = l.kd * dx / h // the filter is faster than the loop: none
			return
		}
		l.d += (l.kd*dx - h*l.d) / l.tf
	case "tustin":
		l.d = ((2*l.tf-h)*l.d + 2*l.kd*dx) / (2*l.tf + h)
	default:
		l.d = (l.tf*l.d + l.kd*dx) / (l.tf + h)
	}
}

func clip(u, low, high float32) (float32, bool) {
	switch {
	case u > high:
		return high, true
	case u < low:
		return low, true
	}
	return u, false
}
