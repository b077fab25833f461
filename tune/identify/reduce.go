package identify

import "math"

// solveLinear finds the linear parameters from the Gram matrices: the local ones
// are eliminated span by span (Schur complement), then the global ones solved.
// It returns the sum of squares.
func (p *projection) solveLinear(keep bool) (cost float64, ok bool) {
	g := p.globals()
	dim := g + 1
	sum := make([]float64, dim*dim)
	for i := range p.grams {
		gm := &p.grams[i]
		pick := make([]int, 0, dim)
		for c := 0; c < g; c++ {
			pick = append(pick, c)
		}
		gm.eliminate(append(pick, gm.lay.y), sum)
	}
	cholesky(sum, dim)
	last := sum[dim*dim-1]
	if math.IsInf(last, 0) {
		last = 0
	}
	if !keep {
		return last * last, true
	}
	b := p.linear
	for c := 0; c < g; c++ {
		b[c] = sum[c*dim+g]
	}
	for i := g - 1; i >= 0; i-- {
		for j := i + 1; j < g; j++ {
			b[i] -= sum[i*dim+j] * b[j]
		}
		b[i] /= sum[i*dim+i]
	}
	for i := range p.grams {
		p.grams[i].solveLocals(b)
	}
	return last * last, finite(last)
}

// eliminate adds to sum the inner products of the picked columns after removing
// from each what the span's local columns explain.
func (gm *spanGram) eliminate(pick []int, sum []float64) {
	l, n := gm.lay.locals, gm.lay.total
	dim := len(pick)
	for a, i := range pick {
		for b, j := range pick {
			sum[a*dim+b] += gm.g[i*n+j]
		}
	}
	if l == 0 {
		return
	}
	r, z := gm.localFactor(), make([]float64, dim*l)
	for a, i := range pick {
		for k := 0; k < l; k++ {
			z[a*l+k] = gm.g[(gm.lay.globals+k)*n+i]
		}
		forwardSolve(r, l, z[a*l:(a+1)*l])
	}
	for a := range pick {
		for b := range pick {
			for k := 0; k < l; k++ {
				sum[a*dim+b] -= z[a*l+k] * z[b*l+k]
			}
		}
	}
}

// localFactor returns the Cholesky factor of the local columns' Gram matrix.
func (gm *spanGram) localFactor() []float64 {
	l, n, at := gm.lay.locals, gm.lay.total, gm.lay.globals
	r := make([]float64, l*l)
	for i := 0; i < l; i++ {
		for j := 0; j < l; j++ {
			r[i*l+j] = gm.g[(at+i)*n+at+j]
		}
	}
	cholesky(r, l)
	return r
}

// solveLocals finds the local parameters for given global ones.
func (gm *spanGram) solveLocals(global []float64) {
	l, n, at := gm.lay.locals, gm.lay.total, gm.lay.globals
	if l == 0 {
		return
	}
	for k := 0; k < l; k++ {
		v := gm.g[(at+k)*n+gm.lay.y]
		for c, b := range global {
			v -= gm.g[(at+k)*n+c] * b
		}
		gm.local[k] = v
	}
	choleskySolve(gm.localFactor(), l, gm.local)
}

// reduce compresses the problem at the last inner call to a Point: the QR factor
// of [linear columns, derivatives, y] from its Gram matrix, of which the block
// behind the linear columns is the reduced Jacobian.
func (p *projection) reduce(pt *Point) bool {
	if _, ok := p.solveLinear(true); !ok {
		return false
	}
	g, m := p.globals(), p.Dim()
	r := p.factor()
	dim := g + m + 1
	rest := r[dim*dim-1]
	if math.IsInf(rest, 0) {
		rest = 0
	}
	pt.Cost = rest * rest
	for i := 0; i < m; i++ {
		row := (g + i) * dim
		for j := 0; j < m; j++ {
			pt.R[i*m+j] = 0
			if j >= i {
				pt.R[i*m+j] = r[row+g+j]
			}
		}
		pt.Qtr[i] = -r[row+dim-1]
		if math.IsInf(pt.R[i*m+i], 0) { // a derivative that nothing in the data shows
			clear(pt.R[i*m : (i+1)*m])
			pt.Qtr[i] = 0
		}
		pt.Cost += pt.Qtr[i] * pt.Qtr[i]
	}
	return finite(pt.Cost)
}

// factor returns the upper triangular factor of [global columns, derivative by
// each nonlinear parameter at the fitted linear ones, y], locals eliminated.
func (p *projection) factor() []float64 {
	g, m := p.globals(), p.Dim()
	dim := g + m + 1
	sum := make([]float64, dim*dim)
	for i := range p.grams {
		p.grams[i].combined(p.linear, m).eliminateInto(g, dim, sum)
	}
	cholesky(sum, dim)
	return sum
}

// combined maps the span's columns to [globals, locals, derivatives, y], where
// derivative m is gain × ∂response/∂m + Σ local_k × ∂free_k/∂m.
func (gm *spanGram) combined(linear []float64, m int) *spanGram {
	l, n := gm.lay, gm.lay.total
	head := l.globals + l.locals
	out := &spanGram{lay: layout{globals: l.globals, locals: l.locals, shapes: m, y: head + m, total: head + m + 1}}
	w := out.lay.total
	type term struct {
		col int
		by  float64
	}
	terms := make([][]term, w)
	for c := 0; c < head; c++ {
		terms[c] = []term{{c, 1}}
	}
	for d := 0; d < m; d++ {
		terms[head+d] = []term{{head + d, linear[0]}}
		for k := 0; k < l.frees && d < m-1; k++ {
			terms[head+d] = append(terms[head+d], term{head + l.shapes + k*(m-1) + d, gm.local[l.freeAt+k]})
		}
	}
	terms[w-1] = []term{{l.y, 1}}
	out.g = make([]float64, w*w)
	for i := 0; i < w; i++ {
		for j := i; j < w; j++ {
			v := 0.0
			for _, a := range terms[i] {
				for _, b := range terms[j] {
					v += a.by * b.by * gm.g[a.col*n+b.col]
				}
			}
			out.g[i*w+j], out.g[j*w+i] = v, v
		}
	}
	return out
}

func (gm *spanGram) eliminateInto(g, dim int, sum []float64) {
	pick := make([]int, 0, dim)
	for c := 0; c < g; c++ {
		pick = append(pick, c)
	}
	for c := g + gm.lay.locals; c < gm.lay.total; c++ {
		pick = append(pick, c)
	}
	gm.eliminate(pick, sum)
}
