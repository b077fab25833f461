package design

import (
	"fmt"
	"math"
	"math/cmplx"

	"gainwright/tune/model"
)

// delayedLoop is a continuous loop with dead time, solved by the method of
// steps: over one dead time the drive that reaches the motor is already known,
// so the motor and the controller are a linear system under a known input. That
// input is carried as the cubic through its values and slopes at the grid
// points, and the linear system is propagated exactly.
//
// The grid is the same in every dead time and lies denser after each multiple of
// it, because that is where what jumps at the start jumps again.
type delayedLoop struct {
	ss      model.StateSpace
	g       Gains // parallel
	n       int   // states: motor, then integral, then derivative filter
	steps   []gridStep
	history []cubicEnds // the drive over the last dead time, by grid step
	r, load float64
}

// cubicEnds is a function over one grid step: values and slopes at its ends.
type cubicEnds struct{ v0, v1, d0, d1 float64 }

// gridStep propagates the state over one step of the grid.
type gridStep struct {
	h     float64
	e     []float64    // e^(A·h) − I
	in    [4][]float64 // gains for the ascending coefficients of the input in t/h
	fixed []float64    // gain of the constant 1
}

func delayedResponses(m model.Linear, g Gains) (Step, LoadStep, error) {
	dead := m.DeadTime + g.ComputeDelay
	grid, leap, err := delayGrid(m, g, dead)
	if err != nil {
		return Step{}, LoadStep{}, err
	}
	y := newMeter(1)
	kick := 0.0
	if g.DerivativeOn == OnError && g.DerivativeFilter == 0 {
		kick = g.Kd
	}
	step := Step{Unknown, Unknown, Unknown, Unknown}
	if sys := newDelayedLoop(m, g, grid, 1, 0); kick == 0 || sys.directSlope() == 0 {
		sys.run(y, dead, leap, kick)
		step = y.step()
	}
	z := newMeter(0)
	newDelayedLoop(m, g, grid, 0, 1).run(z, dead, leap, 0)
	return step, z.load(), nil
}

// delayGrid chooses the step sizes within one dead time, and the length of the
// leaps that may follow once the start is over; 0 where no leap would be longer
// than the dead time.
func delayGrid(m model.Linear, g Gains, dead float64) (grid []float64, leap float64, err error) {
	l, err := newLoop(m, g)
	if err != nil {
		return nil, 0, err
	}
	margins, err := l.margins()
	if err != nil {
		return nil, 0, err
	}
	largest := 0.16 * dead
	limit := func(w, part float64) {
		if w > 0 && !math.IsInf(w, 0) {
			largest = math.Min(largest, part/w)
		}
	}
	slow := math.Inf(1) // if all is slow against the dead time, one step a dead time is enough
	busy := margins.Crossovers
	if margins.Ms > 1.05 {
		busy = append(busy, float64(margins.MsAt))
	}
	for _, w := range busy {
		slow = math.Min(slow, 0.05/w)
	}
	if slow > dead {
		largest = dead
	}
	if slow > 20*dead {
		leap = slow
	}
	for _, w := range margins.Crossovers {
		limit(w, 0.08)
	}
	fastest := 0.0
	for _, p := range m.Poles() {
		if imag(p) != 0 {
			limit(cmplx.Abs(p), 0.1)
			leap = math.Min(leap, 0.05/cmplx.Abs(p))
		}
		fastest = math.Max(fastest, cmplx.Abs(p))
	}
	if g.Kd != 0 && g.DerivativeFilter > 0 {
		fastest = math.Max(fastest, 1/g.DerivativeFilter)
	}
	smallest := largest
	if fastest > 0 {
		smallest = math.Min(largest, 0.05/fastest)
	}
	for t := 0.0; t < dead*(1-1e-12); {
		h := math.Min(largest, math.Max(smallest, 0.04*t))
		if rest := dead - t; rest < 1.5*h {
			h = rest
		}
		grid = append(grid, h)
		t += h
	}
	if len(grid) > 20000 {
		return nil, 0, fmt.Errorf("design: the dead time of %g s is too long against the fastest time constant to be simulated", dead)
	}
	return grid, leap, nil
}

func newDelayedLoop(m model.Linear, g Gains, grid []float64, r, load float64) *delayedLoop {
	s := &delayedLoop{ss: m.StateSpace(), g: g, r: r, load: load, history: make([]cubicEnds, len(grid))}
	s.n = s.ss.N + 2
	made := map[float64]gridStep{}
	for _, h := range grid {
		st, ok := made[h]
		if !ok {
			st = s.gridStep(h)
			made[h] = st
		}
		s.steps = append(s.steps, st)
	}
	return s
}

// directSlope is how much the slope of the speed jumps with the drive.
func (s *delayedLoop) directSlope() float64 {
	var v float64
	for i, c := range s.ss.C {
		v += c * s.ss.B[i]
	}
	return v + math.Abs(s.ss.D)
}

// system returns the matrix of the states [motor, integral, filter], the gain of
// the input v and the constant part.
func (s *delayedLoop) system() (a, b, fixed []float64) {
	n, k := s.n, s.ss.N
	a, b, fixed = make([]float64, n*n), make([]float64, n), make([]float64, n)
	for i := range k {
		copy(a[i*n:i*n+k], s.ss.A[i*k:(i+1)*k])
		b[i] = s.ss.B[i]
	}
	for j, c := range s.ss.C { // integral' = ki·(r − y)
		a[k*n+j] = -s.g.Ki * c
	}
	b[k], fixed[k] = -s.g.Ki*s.ss.D, s.g.Ki*s.r
	if tf := s.g.DerivativeFilter; s.g.Kd != 0 && tf > 0 { // q' = (input − q)/tf
		for j, c := range s.ss.C {
			a[(k+1)*n+j] = -c / tf
		}
		a[(k+1)*n+k+1] = -1 / tf
		b[k+1] = -s.ss.D / tf
		if s.g.DerivativeOn == OnError {
			fixed[k+1] = s.r / tf
		}
	}
	return a, b, fixed
}

func (s *delayedLoop) gridStep(h float64) gridStep {
	a, b, fixed := s.system()
	n := s.n
	w := n + 5 // states, v, h·v', h²·v'', h³·v''', 1
	aug := make([]float64, w*w)
	for i := range n {
		for j := range n {
			aug[i*w+j] = a[i*n+j] * h
		}
		aug[i*w+n] = b[i] * h
		aug[i*w+n+4] = fixed[i] * h
	}
	for j := range 3 {
		aug[(n+j)*w+n+j+1] = 1
	}
	x := model.Expm1(aug, w)
	st := gridStep{h: h, e: make([]float64, n*n), fixed: make([]float64, n)}
	factor := [4]float64{1, 1, 2, 6} // hᵏ·v⁽ᵏ⁾ at the left end, per coefficient
	for j := range 4 {
		st.in[j] = make([]float64, n)
	}
	for i := range n {
		copy(st.e[i*n:(i+1)*n], x[i*w:i*w+n])
		for j := range 4 {
			st.in[j][i] = x[i*w+n+j] * factor[j]
		}
		st.fixed[i] = x[i*w+n+4]
	}
	return st
}

// outputs returns speed and drive and their slopes for the state z while the
// drive that reaches the motor is v with slopes v1 and v2.
func (s *delayedLoop) outputs(z, scratch []float64, v, v1, v2 float64) (y, yd, u, ud float64) {
	k, n := s.ss.N, s.n
	var ydd float64
	rate := scratch[:k]
	for i := range k {
		r := s.ss.B[i] * v
		for j, a := range s.ss.A[i*k : (i+1)*k] {
			r += a * z[j]
		}
		rate[i] = r
	}
	y, yd, ydd = s.ss.D*v, s.ss.D*v1, s.ss.D*v2
	for i, c := range s.ss.C {
		y += c * z[i]
		yd += c * rate[i]
		if s.g.Kd != 0 && s.g.DerivativeFilter == 0 {
			second := s.ss.B[i] * v1
			for j, a := range s.ss.A[i*k : (i+1)*k] {
				second += a * rate[j]
			}
			ydd += c * second
		}
	}
	u = s.g.Kp*(s.g.SetpointWeight*s.r-y) + z[n-2]
	ud = -s.g.Kp*yd + s.g.Ki*(s.r-y)
	if s.g.Kd != 0 {
		if tf := s.g.DerivativeFilter; tf > 0 {
			in := -y
			if s.g.DerivativeOn == OnError {
				in += s.r
			}
			flow := (in - z[n-1]) / tf
			u += s.g.Kd * flow
			ud += s.g.Kd * (-yd - flow) / tf
		} else {
			u -= s.g.Kd * yd
			ud -= s.g.Kd * ydd
		}
	}
	return y, yd, u, ud
}

// run simulates until the response has come to rest and feeds it to the meter.
// A load acts on the motor from the start: when it arrives shifts the answer but
// changes neither its peak nor its area. kick is the area of an impulse in the
// drive at the start. It tells whether the end was done in leaps.
func (s *delayedLoop) run(out *meter, dead, leap, kick float64) (leapt bool) {
	const stepsMax = 5_000_000
	z, next, scratch := make([]float64, s.n), make([]float64, s.n), make([]float64, s.n)
	check, taken := 16*dead, 0
	for period := 0; taken < stepsMax; period++ {
		if period == 1 && kick != 0 {
			for i, b := range s.ss.B {
				z[i] += b * kick
			}
		}
		now := float64(period) * dead
		for i := range s.steps {
			st := &s.steps[i]
			in := s.history[i]
			in.v0 += s.load
			in.v1 += s.load
			c := segment{h: st.h, y0: in.v0, y1: in.v1, d0: in.d0, d1: in.d1}.cubic()
			h2 := st.h * st.h
			y0, yd0, u0, ud0 := s.outputs(z, scratch, c[0], c[1]/st.h, 2*c[2]/h2)
			for r := range s.n {
				v := st.fixed[r] + st.in[0][r]*c[0] + st.in[1][r]*c[1] + st.in[2][r]*c[2] + st.in[3][r]*c[3]
				for j, e := range st.e[r*s.n : (r+1)*s.n] {
					v += e * z[j]
				}
				next[r] = v
			}
			for r := range z {
				z[r] += next[r]
			}
			y1, yd1, u1, ud1 := s.outputs(z, scratch, in.v1, in.d1, (2*c[2]+6*c[3])/h2)
			s.history[i] = cubicEnds{u0, u1, ud0, ud1}
			out.add(segment{now, st.h, y0, y1, yd0, yd1})
			now += st.h
		}
		taken += len(s.steps)
		if leap > 2*dead && now > 64*dead {
			if s.leaps(out, z, now, dead, leap) {
				return true
			}
			leap = 0 // it does not converge: small steps to the end
		}
		if now >= check {
			if out.recent < tailContinuous*out.size || s.standsStill(out, z, next) {
				return false
			}
			check *= 2
			out.recent = 0
		}
	}
	out.recent = math.Inf(1) // not settled, as far as is known
	return false
}

// standsStill recognises a response that has come to rest away from its target,
// as without integral action.
func (s *delayedLoop) standsStill(out *meter, z, last []float64) bool {
	if s.g.Ki != 0 {
		return false
	}
	for i := range z {
		if math.Abs(last[i]) > 1e-9*(math.Abs(z[i])+1e-12) {
			return false
		}
	}
	return true
}
