package design

import "math"

// law runs the sampled controller, one sample after another, from rest.
type law struct {
	g          Gains // parallel
	integral   float64
	derivative float64
	lastErr    float64
	lastIn     float64 // what the derivative acted on
	lastP      float64
	lastU      float64
	low, high  float64 // V, limits of the drive
}

func newLaw(g Gains) *law {
	c := &law{g: g, low: math.Inf(-1), high: math.Inf(1)}
	if g.UMin != nil {
		c.low = *g.UMin
	}
	if g.UMax != nil {
		c.high = *g.UMax
	}
	return c
}

// next returns the drive for setpoint r and measured speed y, within limits.
// feed is the feed-forward in V.
func (c *law) next(r, y, feed float64) float64 {
	g, h := &c.g, c.g.SampleTime
	e := r - y
	in := -y
	if g.DerivativeOn == OnError {
		in = e
	}
	derivative := c.derivative
	if g.Kd != 0 {
		tf := g.DerivativeFilter
		switch g.Discretisation {
		case ForwardEuler:
			c.derivative = (1-h/tf)*c.derivative + g.Kd/tf*(in-c.lastIn)
		case Tustin:
			c.derivative = (2*tf-h)/(2*tf+h)*c.derivative + 2*g.Kd/(2*tf+h)*(in-c.lastIn)
		default:
			c.derivative = tf/(tf+h)*c.derivative + g.Kd/(tf+h)*(in-c.lastIn)
		}
	}
	add := g.Ki * h * e
	switch g.Discretisation {
	case ForwardEuler:
		add = g.Ki * h * c.lastErr
	case Tustin:
		add = g.Ki * h / 2 * (e + c.lastErr)
	}
	p := g.Kp*(g.SetpointWeight*r-y) + feed
	var u, limited float64
	if g.Discretisation == Incremental {
		u = c.lastU + p - c.lastP + add + c.derivative - derivative
		limited = math.Min(math.Max(u, c.low), c.high)
	} else {
		u = p + c.integral + add + c.derivative
		limited = math.Min(math.Max(u, c.low), c.high)
		c.integrate(add, u, limited)
	}
	c.lastErr, c.lastIn, c.lastP, c.lastU = e, in, p, limited
	return limited
}

// integrate applies the anti-windup of the board to the step add.
func (c *law) integrate(add, u, limited float64) {
	over := u - limited
	switch {
	case over == 0 || c.g.AntiWindup == AntiWindupNone || c.g.AntiWindup == "",
		c.g.AntiWindup == AntiWindupBackCalculation && c.g.TrackingTime == 0:
		c.integral += add
	case c.g.AntiWindup == AntiWindupBackCalculation:
		c.integral += add - over*math.Min(1, c.g.SampleTime/c.g.TrackingTime)
	case add*over < 0: // clamp: only a step that leads out of the limit counts
		c.integral += add
	}
}
