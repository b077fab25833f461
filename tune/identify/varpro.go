package identify

import (
	"math"

	"gonum.org/v1/gonum/floats"
)

// offsets says how the constant part of the speed is treated.
type offsets int

const (
	offsetShared offsets = iota // one offset for all traces
	offsetOwn                   // one for each run of samples
	offsetNone                  // none: zero volts is zero speed
)

// projection is the reduced problem that is left when gain, offset, drift and
// initial states, in which the model is linear, are solved for at every value
// of the others (variable projection). Parameters are the kernel's shape, then
// the dead time in seconds.
//
// The Jacobian is Kaufman's: the full one, projected on what the linear columns
// cannot explain. Its gradient is exact.
//
// References: G. H. Golub, V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413;
// L. Kaufman, BIT 15 (1975) 49.
type projection struct {
	kern    kernel
	pieces  []*stretch
	offset  offsets
	drift   bool
	samples int

	cols  [][]float64 // scratch columns, each as long as the longest stretch
	q     queries
	tau   []float64
	grams []spanGram
	// linear is the gain, offset and drift of the last evaluation.
	linear []float64
}

// layout gives the position of each kind of column in a span's Gram matrix.
type layout struct {
	globals int // gain, shared offset, drift
	locals  int // own offset, position start, free states
	shapes  int // derivatives of the response by shape, then by time
	decay   int // derivatives of the free states by shape: frees × shapes
	frees   int
	freeAt  int // first free-state column among the locals
	held    int // offsets of runs in which the rounding of counts stands still, the last locals
	y       int
	total   int
}

// spanGram holds the inner products of a span's columns.
type spanGram struct {
	lay   layout
	g     []float64
	local []float64 // local coefficients of the last evaluation
}

func newProjection(kern kernel, pieces []*stretch, off offsets, drift bool) *projection {
	drift = drift && kern.shapes() > 0 // an integrator's offset is its drift
	p := &projection{kern: kern, pieces: pieces, offset: off, drift: drift}
	longest := 0
	for _, s := range pieces {
		longest = max(longest, len(s.y))
		for _, sp := range s.spans {
			p.samples += sp.used
			p.grams = append(p.grams, spanGram{lay: p.layout(s, sp)})
		}
	}
	widest := 0
	for i := range p.grams {
		w := p.grams[i].lay.total
		widest = max(widest, w)
		p.grams[i].g = make([]float64, w*w)
		p.grams[i].local = make([]float64, p.grams[i].lay.locals)
	}
	p.cols = make([][]float64, widest+4)
	for i := range p.cols {
		p.cols[i] = make([]float64, longest)
	}
	p.tau = make([]float64, longest)
	p.linear = make([]float64, p.globals())
	return p
}

func (p *projection) globals() int {
	n := 1
	if p.offset == offsetShared {
		n++
	}
	if p.drift {
		n++
	}
	return n
}

func (p *projection) layout(s *stretch, sp span) layout {
	l := layout{globals: p.globals(), shapes: p.kern.shapes() + 1}
	if p.offset == offsetOwn {
		l.locals++
	}
	if s.obs == position {
		l.locals++
	}
	l.freeAt = l.locals
	if !sp.steady {
		l.frees = p.kern.frees()
		l.locals += l.frees
	}
	l.held = len(s.heldIn(sp))
	l.locals += l.held
	l.decay = l.frees * p.kern.shapes()
	l.y = l.globals + l.locals + l.shapes + l.decay
	l.total = l.y + 1
	return l
}

// Dim is the number of nonlinear parameters, dead time included.
func (p *projection) Dim() int { return p.kern.shapes() + 1 }

// Evaluate implements Problem.
func (p *projection) Evaluate(params []float64, pt *Point) bool {
	p.inner(params, true)
	return p.reduce(pt)
}

// Cost is the sum of squares at params with the linear parameters at their best.
func (p *projection) Cost(params []float64) float64 {
	p.inner(params, false)
	cost, _ := p.solveLinear(false)
	return cost
}

// inner fills the Gram matrix of every span.
func (p *projection) inner(params []float64, derivatives bool) {
	p.each(params, derivatives, func(gm *spanGram, _ *stretch, _ span, cols [][]float64) {
		gm.fill(cols)
	})
}

// each calls do with the columns of every span in turn. The columns are scratch
// and valid only during the call.
func (p *projection) each(params []float64, derivatives bool, do func(*spanGram, *stretch, span, [][]float64)) {
	shapes := p.kern.shapes()
	at := 0
	for _, s := range p.pieces {
		p.kern.prepare(s.drive, params[:shapes], derivatives)
		main := p.responses(s, params[shapes], derivatives)
		for _, sp := range s.spans {
			gm := &p.grams[at]
			at++
			do(gm, s, sp, p.spanColumns(s, sp, gm.lay, main, derivatives))
		}
	}
}

// responses fills the response of a whole stretch and its derivatives by shape
// and by dead time, in p.cols from 0 on.
func (p *projection) responses(s *stretch, dead float64, derivatives bool) [][]float64 {
	n, shapes := len(s.y), p.kern.shapes()
	cut := func(i int) []float64 { return p.cols[i][:n] }
	main := make([][]float64, shapes+2)
	for i := range main {
		main[i] = cut(i)
	}
	var byShape [][]float64
	var byTime []float64
	if derivatives {
		byShape, byTime = main[1:1+shapes], main[1+shapes]
	}
	s.drive.look(dead, &p.q)
	p.kern.response(s.drive, &p.q, s.obs != instant, main[0], byShape, byTime)
	if s.obs == windowMean {
		old := make([][]float64, shapes+2)
		for i := range old {
			old[i] = cut(len(p.cols) - 1 - i)
		}
		if derivatives {
			byShape, byTime = old[1:1+shapes], old[1+shapes]
		}
		s.drive.look(dead+s.window, &p.q)
		p.kern.response(s.drive, &p.q, true, old[0], byShape, byTime)
		for i := range main {
			if i > 0 && !derivatives {
				break
			}
			floats.Sub(main[i], old[i])
			floats.Scale(1/s.window, main[i])
		}
	}
	if derivatives {
		floats.Scale(-1, main[1+shapes]) // by dead time, not by time
	}
	return main
}

// spanColumns gathers the columns of one span in the order of its layout.
// Columns that are not wanted are nil.
func (p *projection) spanColumns(s *stretch, sp span, l layout, main [][]float64, derivatives bool) [][]float64 {
	shapes := p.kern.shapes()
	next := len(main)
	fresh := func() []float64 { next++; return p.cols[next-1][sp.from:sp.to] }
	cols := make([][]float64, l.total)
	cols[0] = main[0][sp.from:sp.to]
	at := 1
	level := 0
	if shapes == 0 {
		level = 1 // a constant voltage is a constant acceleration to an integrator
	}
	if p.offset == offsetShared {
		cols[at] = fresh()
		s.constant(sp, cols[at], level)
		at++
	}
	if p.drift {
		cols[at] = fresh()
		s.constant(sp, cols[at], 1)
	}
	at = l.globals
	if p.offset == offsetOwn {
		cols[at] = fresh()
		s.constant(sp, cols[at], level)
		at++
	}
	if s.obs == position {
		cols[at] = fresh()
		for i := range cols[at] {
			cols[at][i] = 1
		}
	}
	base := l.globals + l.locals
	if derivatives {
		for m := 0; m < l.shapes; m++ {
			cols[base+m] = main[1+m][sp.from:sp.to]
		}
	}
	for k := 0; k < l.frees; k++ {
		value := fresh()
		cols[l.globals+l.freeAt+k] = value
		var by [][]float64
		if derivatives && shapes > 0 {
			by = cols[base+l.shapes+k*shapes:][:shapes]
			for m := range by {
				by[m] = fresh()
			}
		}
		p.decays(s, sp, k, value, by)
	}
	for k, h := range s.heldIn(sp) {
		cols[l.globals+l.locals-l.held+k] = h.column(sp, fresh())
	}
	cols[l.y] = s.y[sp.from:sp.to]
	if len(sp.skip) > 0 {
		cols[l.y] = fresh()
		copy(cols[l.y], s.y[sp.from:sp.to])
		sp.blank(cols)
	}
	return cols
}

// blank sets the samples that are not used to zero in every column.
func (sp span) blank(cols [][]float64) {
	for _, c := range cols {
		for _, i := range sp.skip {
			if c != nil {
				c[i-sp.from] = 0
			}
		}
	}
}

// column fills the indicator of the run within a span.
func (h heldRun) column(sp span, col []float64) []float64 {
	clear(col)
	for i := h.from; i < min(h.to, sp.to); i++ {
		col[i-sp.from] = 1
	}
	return col
}

// constant fills the column of a constant speed (power 0) or of one that grows
// with time (power 1), as it is observed.
func (s *stretch) constant(sp span, col []float64, power int) {
	for i := range col {
		t := s.drive.t[sp.from+i] + s.lag
		switch {
		case s.obs == position && power == 0:
			col[i] = t
		case s.obs == position:
			col[i] = t * t / 2
		case power == 0:
			col[i] = 1
		case s.obs == windowMean:
			col[i] = t - s.window/2
		default:
			col[i] = t
		}
	}
}

// decays fills the column of free state k and its derivatives by shape.
func (p *projection) decays(s *stretch, sp span, k int, value []float64, by [][]float64) {
	tau := p.tau[:sp.to-sp.from]
	start := s.drive.t[sp.from]
	for i := range tau {
		tau[i] = s.drive.t[sp.from+i] - start
	}
	p.kern.free(k, tau, s.obs != instant, value, by)
	if s.obs != windowMean {
		return
	}
	old := p.cols[len(p.cols)-1][:len(tau)]
	var oldBy [][]float64
	for m := range by {
		oldBy = append(oldBy, p.cols[len(p.cols)-2-m][:len(tau)])
	}
	for i := range tau {
		tau[i] = math.Max(tau[i]-s.window, 0)
	}
	p.kern.free(k, tau, true, old, oldBy)
	floats.Sub(value, old)
	floats.Scale(1/s.window, value)
	for m := range by {
		floats.Sub(by[m], oldBy[m])
		floats.Scale(1/s.window, by[m])
	}
}

// fill computes the span's Gram matrix. An offset of a held run is no more than
// rounding: it is held back by a variance equal to that of the single rounding
// errors, which adds one to its diagonal entry.
func (gm *spanGram) fill(cols [][]float64) {
	l := gm.lay
	gram(cols, gm.g, l.total)
	for k := l.globals + l.locals - l.held; k < l.globals+l.locals; k++ {
		gm.g[k*l.total+k]++
	}
}

// gram fills the upper triangle and its mirror with the inner products of cols;
// a nil column counts as zero.
func gram(cols [][]float64, g []float64, n int) {
	for i := 0; i < n; i++ {
		for j := i; j < n; j++ {
			v := 0.0
			if cols[i] != nil && cols[j] != nil {
				v = floats.Dot(cols[i], cols[j])
			}
			g[i*n+j], g[j*n+i] = v, v
		}
	}
}
