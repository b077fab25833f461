package identify

import (
	"errors"
	"fmt"
	"math"
	"sort"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// ErrData is wrapped by every refusal to fit because of the record itself.
var ErrData = errors.New("identify: not enough to fit")

// estimate is a fit of one structure: parameters, their covariance and what is
// left over.
type estimate struct {
	kind   string
	proj   *projection
	params []float64 // kernel shape, dead time
	linear []float64 // gain, offset (shared), drift
	locals [][]float64
	cost   float64
	dof    int
	fixed  bool // dead time held at a bound
	evals  int

	cov      []float64   // over [linear…, params…], corrected for colour
	white    []float64   // the same under white residuals
	residual []float64   // used samples in order
	dead     *[2]float64 // 95 % interval of the dead time, where its profile was computed
	set      Settings
	findings []Finding
	measured []*trace.Trace // the traces, where counts were fitted
	noise    float64        // rad/s, what the residual's own past does not foretell
	inputP   float64        // see Fit.InputP
	inflated float64        // largest ratio of corrected to white standard deviation
}

// names of the numbers in the order of cov.
func (e *estimate) dim() int { return len(e.linear) + len(e.params) }

// newKernel returns the kernel of a model kind.
func newKernel(kind string) (kernel, error) {
	switch kind {
	case model.KindFirstOrder:
		return &firstOrder{}, nil
	case model.KindSecondOrder, model.KindMotor:
		return &secondOrder{}, nil
	case model.KindIntegrating:
		return integrating{}, nil
	}
	return nil, fmt.Errorf("identify: no model of kind %q: want %s, %s, %s, %s or auto", kind,
		model.KindFirstOrder, model.KindSecondOrder, model.KindIntegrating, model.KindMotor)
}

// problem is what one fit is asked to do.
type problem struct {
	traces  []*trace.Trace
	kind    string
	offset  offsets
	drift   bool
	steady  bool // the first run of samples of each trace starts at rest
	counts  bool // fit the counted position instead of the speed
	deadMax float64
	seed    *estimate // a simpler fit of the same data, to start from
}

// solve fits one structure from many starts.
func (pb problem) solve() (*estimate, error) {
	kern, err := newKernel(pb.kind)
	if err != nil {
		return nil, err
	}
	obs := windowMean
	if pb.counts {
		obs = position
	}
	var pieces []*stretch
	for i, tr := range pb.traces {
		steady := pb.steady && pb.kind != model.KindIntegrating
		pieces = append(pieces, stretches(tr, i, obs, steady)...)
	}
	off := pb.offset
	proj := newProjection(kern, pieces, off, pb.drift)
	need := proj.Dim() + proj.globals() + 5
	if proj.samples < need {
		return nil, fmt.Errorf("%w: %d usable samples, at least %d are needed", ErrData, proj.samples, need)
	}
	if !proj.excited() {
		return nil, fmt.Errorf("%w: the voltage does not change in the record: run a step or a PRBS", ErrData)
	}
	set := pb.settings(proj)
	var best *Solution
	evals := 0
	for _, x := range pb.starts(proj, set) {
		sol, err := Solve(proj, x, set)
		if err != nil {
			continue
		}
		evals += sol.Evaluations
		if best == nil || sol.Point.Cost < best.Point.Cost {
			best = &sol
		}
	}
	if best == nil {
		return nil, fmt.Errorf("%w: no start gave a model that can be computed", ErrData)
	}
	e := &estimate{kind: pb.kind, proj: proj, params: best.Params, evals: evals}
	e.finish(set)
	return e, nil
}

// excited reports whether any used stretch sees the voltage change.
func (p *projection) excited() bool {
	for _, s := range p.pieces {
		for _, u := range s.drive.u {
			if u != s.drive.u[0] || u != s.drive.before {
				return true
			}
		}
	}
	return false
}

// extent returns the shortest median interval and the longest stretch in seconds.
func (p *projection) extent() (h, long float64) {
	h = math.Inf(1)
	for _, s := range p.pieces {
		h = math.Min(h, s.drive.h)
		long = math.Max(long, s.drive.t[len(s.drive.t)-1])
	}
	return h, long
}

// deadShare is the share of the record up to which a dead time is looked for.
const deadShare = 0.4

func (pb problem) settings(proj *projection) Settings {
	h, long := proj.extent()
	dead := pb.deadMax
	if dead <= 0 {
		dead = deadShare * long
	}
	lowest, highest := math.Log(h/50), math.Log(50*long)
	set := Settings{StepMax: 60, CostTol: 1e-9, ParamTol: 1e-7}
	switch proj.kern.shapes() {
	case 1:
		set.Lower, set.Upper = []float64{lowest, 0}, []float64{highest, dead}
	case 2:
		set.Lower, set.Upper = []float64{lowest, 2*lowest - 2, 0}, []float64{highest, 2 * highest, dead}
	default:
		set.Lower, set.Upper = []float64{0}, []float64{dead}
	}
	return set
}

// startCount is how many of the grid's best points are followed to their end.
const startCount = 4

// starts ranks a coarse grid over shape and dead time by the sum of squares that
// is left with the linear parameters at their best.
func (pb problem) starts(proj *projection, set Settings) [][]float64 {
	h, long := proj.extent()
	shapes := proj.kern.shapes()
	deadMax := set.Upper[shapes]
	var deads []float64
	for d := h; d < deadMax; d *= 1.9 {
		deads = append(deads, d)
	}
	deads = append(deads, 0)
	type point struct {
		x    []float64
		cost float64
	}
	var grid []point
	try := func(shape []float64, deads []float64) {
		for _, d := range deads {
			x := append(append([]float64(nil), shape...), d)
			grid = append(grid, point{x, proj.Cost(x)})
		}
	}
	switch {
	case shapes == 0:
		try(nil, deads)
	case shapes == 1:
		for t := h; t < 2*long; t *= 2.6 {
			try([]float64{math.Log(t)}, deads)
		}
	case pb.seed != nil:
		t, d := math.Exp(pb.seed.params[0]), pb.seed.params[1]
		near := []float64{0, d / 2, d}
		for _, lag := range []float64{0.02, 0.1, 0.3, 0.8} {
			try([]float64{math.Log(t * (1 + lag)), math.Log(t * t * lag)}, near)
		}
		for _, zeta := range []float64{0.2, 0.5} {
			for _, f := range []float64{0.3, 1, 3} {
				w := f / (t + d + h)
				try([]float64{math.Log(2 * zeta / w), -2 * math.Log(w)}, near)
			}
		}
	}
	sort.SliceStable(grid, func(i, j int) bool { return grid[i].cost < grid[j].cost })
	var out [][]float64
	for i := 0; i < len(grid) && i < startCount; i++ {
		out = append(out, grid[i].x)
	}
	return out
}

// finish computes linear parameters, residuals and covariance at e.params.
func (e *estimate) finish(set Settings) {
	p := e.proj
	e.set, e.inputP, e.noise = set, math.NaN(), math.NaN()
	pt := NewPoint(p.Dim())
	p.Evaluate(e.params, pt)
	e.linear = append([]float64(nil), p.linear...)
	e.locals = nil
	locals := 0
	for i := range p.grams {
		e.locals = append(e.locals, append([]float64(nil), p.grams[i].local...))
		locals += len(p.grams[i].local)
	}
	shapes := p.kern.shapes()
	dead := e.params[shapes]
	e.fixed = dead <= set.Lower[shapes] || dead >= set.Upper[shapes]
	e.dof = p.samples - e.dim() - locals
	if e.fixed {
		e.dof++
	}
	e.residual = e.residuals()
	e.cost = 0
	for _, r := range e.residual {
		e.cost += r * r
	}
	e.covariance()
}

// residuals returns measured minus simulated at every used sample.
func (e *estimate) residuals() []float64 {
	p := e.proj
	out := make([]float64, 0, p.samples)
	at := 0
	p.each(e.params, false, func(gm *spanGram, s *stretch, sp span, cols [][]float64) {
		yh := combine(gm.lay, cols, e.linear, e.locals[at])
		at++
		skip := 0
		for i := sp.from; i < sp.to; i++ {
			if skip < len(sp.skip) && sp.skip[skip] == i {
				skip++
				continue
			}
			out = append(out, s.y[i]-yh[i-sp.from])
		}
	})
	return out
}

// combine returns the simulated output of a span.
func combine(l layout, cols [][]float64, linear, local []float64) []float64 {
	out := make([]float64, len(cols[0]))
	add := func(c []float64, by float64) {
		for i, v := range c {
			out[i] += by * v
		}
	}
	for c, b := range linear {
		add(cols[c], b)
	}
	for k, b := range local {
		add(cols[l.globals+k], b)
	}
	return out
}

// covariance inverts the normal matrix of [linear…, params…] with the local
// parameters eliminated, a dead time at its bound left out.
func (e *estimate) covariance() {
	g, m := e.proj.globals(), e.proj.Dim()
	dim := g + m + 1
	r := e.proj.factor()
	n := g + m
	if e.fixed {
		n--
	}
	f := make([]float64, n*n)
	for i := 0; i < n; i++ {
		copy(f[i*n:(i+1)*n], r[i*dim:i*dim+n])
	}
	inv := choleskyInverse(f, n)
	variance := e.cost / float64(max(e.dof, 1))
	full := e.dim()
	e.white = make([]float64, full*full)
	for i := 0; i < n; i++ {
		for j := 0; j < n; j++ {
			e.white[i*full+j] = inv[i*n+j] * variance
		}
	}
	e.cov = append([]float64(nil), e.white...)
	e.inflated = 1
}

// profileSamples is the length of record up to which the interval of the dead
// time comes from its profile; on longer ones the curvature serves as well.
const profileSamples = 20000

// sharpen corrects the covariance for coloured residuals and computes the
// interval of the dead time.
func (e *estimate) sharpen() {
	e.correct()
	if e.proj.samples > profileSamples {
		return
	}
	widening := 1.0
	if w := e.white[len(e.white)-1]; w > 0 {
		widening = e.cov[len(e.cov)-1] / w
	}
	if ci, ok := e.profileDeadTime(e.set, widening); ok {
		e.dead = &ci
	}
}
