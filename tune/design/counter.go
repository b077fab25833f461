package design

import "math"

// counter turns the speed of the shaft into what the loop sees of it: whole
// counts, the rest carried as an encoder does. The zero value passes the speed on.
type counter struct {
	perSpeed float64 // counts a window per rad/s; 0: smooth
	angle    float64 // counts, or rad where there is a window

	// A true mean over whole loops.
	past  []float64 // rad, counted, at the last loops; a ring
	k     int
	unit  float64 // rad per count; 0: smooth
	h     float64 // s
	speed float64 // rad/s, at the sample before
}

// newCounter counts for a loop of period h. The shaft has run at its first speed
// for as long as the window is.
func newCounter(sc Scenario, h float64) *counter {
	c := &counter{}
	if sc.WindowLoops == 0 {
		if sc.RadPerCount > 0 && sc.Window > 0 {
			c.perSpeed = sc.Window / sc.RadPerCount
		}
		return c
	}
	c.past, c.unit, c.h, c.speed = make([]float64, sc.WindowLoops), sc.RadPerCount, h, sc.StartSpeed
	for i := range c.past {
		c.past[i] = c.counted(float64(i-sc.WindowLoops) * h * sc.StartSpeed)
	}
	c.angle = -h * sc.StartSpeed
	return c
}

func (c *counter) counted(angle float64) float64 {
	if c.unit == 0 {
		return angle
	}
	return math.Floor(angle/c.unit) * c.unit
}

func (c *counter) see(speed float64) float64 {
	if c.past != nil {
		c.angle += (c.speed + speed) / 2 * c.h
		c.speed = speed
		now, oldest := c.counted(c.angle), &c.past[c.k%len(c.past)]
		mean := (now - *oldest) / (float64(len(c.past)) * c.h)
		*oldest = now
		c.k++
		return mean
	}
	if c.perSpeed == 0 {
		return speed
	}
	before := math.Floor(c.angle)
	c.angle += speed * c.perSpeed
	return (math.Floor(c.angle) - before) / c.perSpeed
}
