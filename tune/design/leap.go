package design

import "math"

// leaps goes on from the state z at the time now in steps of h far longer than
// the dead time, for loops that are slow against it: there the steps of one dead
// time would be millions. The drive over a step is the cubic through its values
// and slopes at both ends, and what reaches the motor is that cubic a dead time
// later; the far end follows by iteration, which converges quickly because the
// loop changes little in one step. It returns false, with nothing done, if the
// iteration does not converge, and the caller goes on in small steps.
func (s *delayedLoop) leaps(out *meter, z []float64, now, dead, h float64) bool {
	const (
		stepsMax = 2_000_000
		rounds   = 60
		close    = 1e-12
	)
	st := s.gridStep(h)
	shift := (h - dead) / h
	scratch, next := make([]float64, s.n), make([]float64, s.n)
	// What reaches the motor now is the drive of a dead time ago.
	reach, slope := s.history[0].v0, s.history[0].d0
	y0, yd0, u0, ud0 := s.outputs(z, scratch, reach+s.load, slope, 0)
	check, size := now*2, 0.0
	first := true
	for range stepsMax {
		u1, ud1 := u0+ud0*h, ud0
		var y1, yd1, v1, slope1 float64
		converged := false
		for range rounds {
			c := segment{h: h, y0: u0, y1: u1, d0: ud0, d1: ud1}.cubic()
			v1 = eval(c, shift)
			slope1 = (c[1] + shift*(2*c[2]+shift*3*c[3])) / h
			in := segment{h: h, y0: reach + s.load, y1: v1 + s.load, d0: slope, d1: slope1}.cubic()
			for r := range s.n {
				v := st.fixed[r] + st.in[0][r]*in[0] + st.in[1][r]*in[1] + st.in[2][r]*in[2] + st.in[3][r]*in[3]
				for j, e := range st.e[r*s.n : (r+1)*s.n] {
					v += e * z[j]
				}
				next[r] = z[r] + v
			}
			var nu, nud float64
			y1, yd1, nu, nud = s.outputs(next, scratch, v1+s.load, slope1, (2*in[2]+6*in[3])/(h*h))
			size = math.Max(size, math.Abs(nu))
			converged = math.Abs(nu-u1) <= close*size && math.Abs(nud-ud1)*h <= 1e-6*size
			u1, ud1 = nu, nud
			if converged {
				break
			}
		}
		if !converged {
			if !first {
				out.recent = math.Inf(1) // not settled, as far as is known
			}
			return !first
		}
		first = false
		out.add(segment{now, h, y0, y1, yd0, yd1})
		copy(z, next)
		y0, yd0, u0, ud0, reach, slope = y1, yd1, u1, ud1, v1, slope1
		now += h
		if now >= check {
			if out.recent < tailContinuous*out.size || s.g.Ki == 0 && math.Abs(yd0)*now < 1e-9*out.size {
				return true
			}
			check *= 2
			out.recent = 0
		}
	}
	out.recent = math.Inf(1)
	return true
}
