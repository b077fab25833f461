package identify

import (
	"errors"
	"math"
)

// Point is a least-squares problem seen from one set of parameters: the sum of
// squares there, and the linearised residual r + J·s compressed by an
// orthogonal factorisation to p rows, R·s + Qtr. It is all the solver ever asks
// for, so that a caller may eliminate linear parameters or millions of samples
// first.
type Point struct {
	Cost float64   // sum of squared residuals
	R    []float64 // p×p, row by row, upper triangular
	Qtr  []float64 // p
}

// NewPoint returns a point for p parameters.
func NewPoint(p int) *Point {
	return &Point{R: make([]float64, p*p), Qtr: make([]float64, p)}
}

// Problem is a nonlinear least-squares problem with Dim parameters. Evaluate
// fills pt at the given parameters; it returns false where the model cannot be
// computed (the solver then shortens its step).
type Problem interface {
	Dim() int
	Evaluate(params []float64, pt *Point) bool
}

// Settings bound the solver. The zero value means defaults.
type Settings struct {
	StepMax  int       // evaluations, default 200
	CostTol  float64   // relative fall of the cost that is no longer worth a step, default 1e-10
	ParamTol float64   // relative change of the scaled parameters, default 1e-9
	Lower    []float64 // nil or one per parameter
	Upper    []float64
	Damping  float64 // at the start, in units of the squared column norms, default 1e-3
	Rescale  bool    // scale by the Jacobian at hand, not by the largest seen so far
	Thorough bool    // try bold and timid first steps and both scalings, keep the best end
}

// Solution is what Solve found.
type Solution struct {
	Params      []float64
	Point       *Point
	Evaluations int
	Converged   bool
}

// ErrStart is returned when the problem cannot be evaluated at its start.
var ErrStart = errors.New("identify: the model cannot be computed at the starting values")

// Solve minimises the sum of squares by the Levenberg–Marquardt method: steps of
// the linearised problem, held back by a multiple of the column norms. The
// damping follows the ratio of real to predicted fall. Bounds are kept by
// projection; a parameter whose gradient points out of its bound is frozen.
//
// References: D. W. Marquardt, J. SIAM 11 (1963) 431; J. J. Moré, LNM
// 630 (Springer 1978) 105 (scaling by column norms); H. B. Nielsen, Damping
// parameter in Marquardt's method, IMM-REP-1999-05 (update of the damping).
func Solve(prob Problem, start []float64, set Settings) (Solution, error) {
	set = set.withDefaults()
	if set.Thorough {
		return solveThorough(prob, start, set)
	}
	lm := &marquardt{set: set, n: prob.Dim()}
	lm.init()
	x := append([]float64(nil), start...)
	lm.clamp(x)
	cur, next := NewPoint(lm.n), NewPoint(lm.n)
	if !prob.Evaluate(x, cur) || !finite(cur.Cost) {
		return Solution{}, ErrStart
	}
	sol := Solution{Params: x, Evaluations: 1}
	lambda, grow := set.Damping, 2.0
	lm.scale(cur)
	for sol.Evaluations < set.StepMax {
		predicted, free := lm.step(x, cur, lambda)
		if !free {
			sol.Converged = true
			break
		}
		if predicted <= 0 {
			if lm.smallStep(x) || lambda > 1e30 {
				sol.Converged = true
				break
			}
			lambda *= grow
			grow *= 2
			continue
		}
		ok := prob.Evaluate(lm.trial, next) && finite(next.Cost)
		sol.Evaluations++
		actual := cur.Cost - next.Cost
		small := lm.smallStep(x)
		if ok && actual >= 0 {
			ratio := actual / predicted
			copy(x, lm.trial)
			cur, next = next, cur
			lm.scale(cur)
			t := 2*ratio - 1
			lambda = math.Max(lambda*math.Max(1.0/9, 1-t*t*t), 1e-20)
			grow = 2
			base := cur.Cost + actual
			if actual <= set.CostTol*base && predicted <= set.CostTol*base && ratio <= 2 || small {
				sol.Converged = true
				break
			}
			continue
		}
		if ok && (small || predicted <= set.CostTol*cur.Cost) {
			sol.Converged = true
			break
		}
		lambda *= grow
		grow *= 2
		if lambda > 1e30 {
			break
		}
	}
	sol.Point = cur
	return sol, nil
}

// solveThorough runs the solver with several first dampings, from bold to timid,
// under both scalings, and returns the end with the least sum of squares. A bold
// first step may leave for a plateau that a timid one never sees.
func solveThorough(prob Problem, start []float64, set Settings) (Solution, error) {
	set.Thorough = false
	var best Solution
	found := false
	evaluations := 0
	for _, set.Rescale = range []bool{false, true} {
		for _, set.Damping = range []float64{1e-3, 1, 1e3} {
			sol, err := Solve(prob, start, set)
			if err != nil {
				return sol, err
			}
			evaluations += sol.Evaluations
			if !found || sol.Point.Cost < best.Point.Cost {
				best, found = sol, true
			}
		}
	}
	best.Evaluations = evaluations
	return best, nil
}

func (s Settings) withDefaults() Settings {
	if s.StepMax == 0 {
		s.StepMax = 200
	}
	if s.CostTol == 0 {
		s.CostTol = 1e-10
	}
	if s.ParamTol == 0 {
		s.ParamTol = 1e-9
	}
	if s.Damping == 0 {
		s.Damping = 1e-3
	}
	return s
}

// marquardt is the workspace of one Solve.
type marquardt struct {
	set   Settings
	n     int
	diag  []float64 // scale of each parameter: column norm of the Jacobian
	trial []float64
	delta []float64
	free  []int
	aug   []float64 // (n+k)×k, the damped problem
	rhs   []float64
}

func (m *marquardt) init() {
	m.diag = make([]float64, m.n)
	m.trial = make([]float64, m.n)
	m.delta = make([]float64, m.n)
	m.aug = make([]float64, 2*m.n*m.n)
	m.rhs = make([]float64, 2*m.n)
}

func (m *marquardt) clamp(x []float64) {
	for i := range x {
		if m.set.Lower != nil {
			x[i] = math.Max(x[i], m.set.Lower[i])
		}
		if m.set.Upper != nil {
			x[i] = math.Min(x[i], m.set.Upper[i])
		}
	}
}

func (m *marquardt) scale(pt *Point) {
	for j := range m.diag {
		s := 0.0
		for i := 0; i <= j; i++ {
			s += pt.R[i*m.n+j] * pt.R[i*m.n+j]
		}
		s = math.Sqrt(s)
		if m.set.Rescale {
			m.diag[j] = s
		} else {
			m.diag[j] = math.Max(m.diag[j], s)
		}
		if m.diag[j] == 0 {
			m.diag[j] = 1
		}
	}
}

// step fills trial with the damped step from x and returns the fall of the cost
// that the linearised problem predicts, which need not be positive where bounds
// cut the step short. It returns false when no parameter is free to move.
func (m *marquardt) step(x []float64, pt *Point, lambda float64) (predicted float64, ok bool) {
	m.release(x, pt)
	if len(m.free) == 0 {
		return 0, false
	}
	copy(m.trial, x)
	// Each round solves for the free parameters; those that leave their bounds
	// are set on them, and the rest is solved again.
	for len(m.free) > 0 && m.solveFree(x, pt, lambda) {
		kept := m.free[:0]
		for c, j := range m.free {
			v := x[j] + m.delta[c]
			if m.set.Lower != nil && v < m.set.Lower[j] {
				m.trial[j] = m.set.Lower[j]
			} else if m.set.Upper != nil && v > m.set.Upper[j] {
				m.trial[j] = m.set.Upper[j]
			} else {
				m.trial[j] = v
				kept = append(kept, j)
			}
		}
		if len(kept) == len(m.free) {
			break
		}
		m.free = kept
	}
	return m.predict(x, pt), true
}

// release lists the parameters that may move: those at a bound out of which the
// gradient does not point.
func (m *marquardt) release(x []float64, pt *Point) {
	m.free = m.free[:0]
	for j := 0; j < m.n; j++ {
		g := 0.0
		for i := 0; i <= j; i++ {
			g += pt.R[i*m.n+j] * pt.Qtr[i]
		}
		atLow := m.set.Lower != nil && x[j] <= m.set.Lower[j] && g >= 0
		atHigh := m.set.Upper != nil && x[j] >= m.set.Upper[j] && g <= 0
		if !atLow && !atHigh {
			m.free = append(m.free, j)
		}
	}
}

// solveFree fills delta with the damped step of the free parameters, the others
// being moved to where trial has them.
func (m *marquardt) solveFree(x []float64, pt *Point, lambda float64) bool {
	n, k := m.n, len(m.free)
	rows := n + k
	root := math.Sqrt(lambda)
	aug, rhs := m.aug[:rows*k], m.rhs[:rows]
	clear(aug)
	clear(rhs)
	for c, j := range m.free {
		m.trial[j] = x[j]
		for i := 0; i <= j; i++ {
			aug[i*k+c] = pt.R[i*n+j]
		}
		aug[(n+c)*k+c] = root * m.diag[j]
	}
	for i := 0; i < n; i++ {
		rhs[i] = -pt.Qtr[i]
		for j := i; j < n; j++ {
			rhs[i] -= pt.R[i*n+j] * (m.trial[j] - x[j])
		}
	}
	triangularise(aug, rows, k, rhs)
	return backSubstitute(aug, k, k, rhs, m.delta[:k])
}

// predict returns ‖Qtr‖² − ‖Qtr + R·(trial − x)‖².
func (m *marquardt) predict(x []float64, pt *Point) float64 {
	n := m.n
	fall := 0.0
	for i := 0; i < n; i++ {
		v := 0.0
		for j := i; j < n; j++ {
			v += pt.R[i*n+j] * (m.trial[j] - x[j])
		}
		fall -= v * (2*pt.Qtr[i] + v)
	}
	return fall
}

func (m *marquardt) smallStep(x []float64) bool {
	var ds, xs float64
	for j := range x {
		d := m.diag[j] * (m.trial[j] - x[j])
		v := m.diag[j] * x[j]
		ds += d * d
		xs += v * v
	}
	return math.Sqrt(ds) <= m.set.ParamTol*math.Sqrt(xs)
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

// Compress fills pt from a full Jacobian (rows×p, row by row) and residuals of a
// problem that is small enough to be written out. It overwrites both.
func Compress(jac []float64, p int, residual []float64, pt *Point) {
	rows := len(residual)
	pt.Cost = 0
	for _, r := range residual {
		pt.Cost += r * r
	}
	triangularise(jac, rows, p, residual)
	clear(pt.R)
	clear(pt.Qtr)
	for i := 0; i < p && i < rows; i++ {
		copy(pt.R[i*p+i:(i+1)*p], jac[i*p+i:(i+1)*p])
		pt.Qtr[i] = residual[i]
	}
}

// Covariance returns (RᵀR)⁻¹, p×p, row by row: the covariance of the parameters
// in units of the residuals' variance. Rows of parameters that the data do not
// show are +Inf.
func (pt *Point) Covariance() []float64 {
	p := len(pt.Qtr)
	inv := make([]float64, p*p) // R⁻¹, column by column
	for j := 0; j < p; j++ {
		e := make([]float64, p)
		e[j] = 1
		x := make([]float64, p)
		if !backSubstitute(pt.R, p, p, e, x) {
			for i := range x {
				x[i] = math.Inf(1)
			}
		}
		copy(inv[j*p:], x)
	}
	cov := make([]float64, p*p)
	for a := 0; a < p; a++ {
		for b := 0; b < p; b++ {
			for k := max(a, b); k < p; k++ {
				cov[a*p+b] += inv[k*p+a] * inv[k*p+b]
			}
		}
	}
	return cov
}

// dependent reports whether, within rounding, a column is a combination of those
// before it.
func (pt *Point) dependent() bool {
	p := len(pt.Qtr)
	for j := 0; j < p; j++ {
		size := 0.0
		for i := 0; i <= j; i++ {
			size = math.Hypot(size, pt.R[i*p+j])
		}
		if math.Abs(pt.R[j*p+j]) <= 1e-10*size {
			return true
		}
	}
	return false
}
