package identify

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// colourLevel is the probability below which residuals count as coloured and the
// covariance is corrected.
const colourLevel = 0.01

// colourOrder is the highest order of the noise model.
const colourOrder = 20

// jacobian returns the columns [linear…, nonlinear…] over the used samples, what
// the local columns explain taken out, and the samples at which spans begin.
func (e *estimate) jacobian() (cols [][]float64, begins []int) {
	p := e.proj
	dim := e.dim()
	cols = make([][]float64, dim)
	at := 0
	p.each(e.params, true, func(gm *spanGram, s *stretch, sp span, c [][]float64) {
		begins = append(begins, len(cols[0]))
		gm.fill(c)
		gm.local = append(gm.local[:0], e.locals[at]...)
		at++
		local, deriv := gm.split(c, e.linear, p.Dim())
		for j := 0; j < dim; j++ {
			var col []float64
			if j < gm.lay.globals {
				col = append([]float64(nil), c[j]...)
			} else {
				col = deriv[j-gm.lay.globals]
			}
			gm.project(local, col)
			cols[j] = append(cols[j], pick(col, sp)...)
		}
	})
	return cols, begins
}

// pick drops the skipped samples of a span's column.
func pick(col []float64, sp span) []float64 {
	if len(sp.skip) == 0 {
		return col
	}
	out := make([]float64, 0, sp.used)
	skip := 0
	for i := range col {
		if skip < len(sp.skip) && sp.skip[skip] == sp.from+i {
			skip++
			continue
		}
		out = append(out, col[i])
	}
	return out
}

// split returns the local columns and the derivative by each nonlinear parameter.
func (gm *spanGram) split(c [][]float64, linear []float64, m int) (local, deriv [][]float64) {
	l := gm.lay
	local = c[l.globals : l.globals+l.locals]
	head := l.globals + l.locals
	for d := 0; d < m; d++ {
		col := append([]float64(nil), c[head+d]...)
		floats.Scale(linear[0], col)
		for k := 0; k < l.frees && d < m-1; k++ {
			floats.AddScaled(col, gm.local[l.freeAt+k], c[head+l.shapes+k*(m-1)+d])
		}
		deriv = append(deriv, col)
	}
	return local, deriv
}

// project takes out of col what the local columns explain.
func (gm *spanGram) project(local [][]float64, col []float64) {
	if len(local) == 0 {
		return
	}
	b := make([]float64, len(local))
	for k := range local {
		b[k] = floats.Dot(local[k], col)
	}
	choleskySolve(gm.localFactor(), len(local), b)
	for k := range local {
		floats.AddScaled(col, -b[k], local[k])
	}
}

// correct replaces the covariance by one that holds for coloured residuals:
// (JᵀJ)⁻¹·JᵀΓJ·(JᵀJ)⁻¹ with Γ from an autoregression fitted to the residuals.
// It only ever widens: a colour that would narrow an interval is not trusted.
func (e *estimate) correct() {
	defer e.addRounding()
	n := len(e.residual)
	if n < 40 || !(ljungBox(e.residual, 0) < colourLevel) {
		return
	}
	cols, begins := e.jacobian()
	ar := fitColour(e.residual, orthonormal(cols), min(colourOrder, n/10))
	if len(ar.coef) == 0 {
		return
	}
	dim := e.dim()
	variance := e.cost / float64(max(e.dof, 1))
	for _, col := range cols {
		for k, from := range begins {
			to := n
			if k+1 < len(begins) {
				to = begins[k+1]
			}
			ar.backColour(col[from:to])
		}
	}
	meat := make([]float64, dim*dim)
	for i := range cols {
		for j := range cols {
			meat[i*dim+j] = floats.Dot(cols[i], cols[j]) * ar.variance * float64(n) / float64(max(e.dof, 1))
		}
	}
	// white = (JᵀJ)⁻¹·variance
	cov := sandwich(e.white, meat, dim, 1/(variance*variance))
	for i := 0; i < dim; i++ {
		w, c := e.white[i*dim+i], cov[i*dim+i]
		if !(w > 0) || !finite(c) {
			continue
		}
		e.inflated = math.Max(e.inflated, math.Sqrt(c/w))
	}
	e.cov = cov
	for i := 0; i < dim; i++ {
		if f := e.white[i*dim+i] / cov[i*dim+i]; f > 1 && finite(f) {
			root := math.Sqrt(f)
			for j := 0; j < dim; j++ {
				e.cov[i*dim+j] *= root
				e.cov[j*dim+i] *= root
			}
		}
	}
}

// sandwich returns a·m·a·scale for symmetric n×n matrices.
func sandwich(a, m []float64, n int, scale float64) []float64 {
	am := make([]float64, n*n)
	out := make([]float64, n*n)
	for i := 0; i < n; i++ {
		for j := 0; j < n; j++ {
			for k := 0; k < n; k++ {
				am[i*n+j] += a[i*n+k] * m[k*n+j]
			}
		}
	}
	for i := 0; i < n; i++ {
		for j := 0; j < n; j++ {
			for k := 0; k < n; k++ {
				out[i*n+j] += scale * am[i*n+k] * a[k*n+j]
			}
		}
	}
	return out
}

// orthonormal returns an orthonormal basis of the columns by modified
// Gram–Schmidt, each column cleaned twice against rounding. Columns that the
// others span are left out.
func orthonormal(cols [][]float64) [][]float64 {
	var out [][]float64
	for _, col := range cols {
		c := append([]float64(nil), col...)
		size := floats.Norm(c, 2)
		for range 2 {
			for _, q := range out {
				floats.AddScaled(c, -floats.Dot(q, c), q)
			}
		}
		if n := floats.Norm(c, 2); n > 1e-9*size && n > 0 {
			floats.Scale(1/n, c)
			out = append(out, c)
		}
	}
	return out
}
