package identify

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"

	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// KindAuto asks for every structure and the choice among them.
const KindAuto = "auto"

// Options of an identification. The zero value fits every structure on the whole
// record, with nothing held out.
type Options struct {
	Kind        string  // a model kind, KindAuto or empty
	Holdout     float64 // share (0 to 0.9) of the samples, at the end, or of the traces, that is kept for judging
	DeadTimeMax float64 // s; 0 means 0.4 of the longest gap-free piece
	Drift       bool    // let the offset drift with time
	NoOffset    bool    // zero volts is zero speed: do not fit an offset
	FreeStart   bool    // never assume that the record starts at rest
	RawMask     bool    // use the trace's own masks only, look for no gaps, saturation, sag or stall
}

// Run fits models to one trace and judges them. The error wraps ErrData where
// the record does not allow any fit, trace.ErrInvalid where it is malformed.
func Run(tr *trace.Trace, opt Options) (Result, error) {
	return RunJoint([]*trace.Trace{tr}, opt)
}

// RunJoint fits one model to several traces, each with its own offset and
// initial state. With a hold-out share the last traces are kept for judging, at
// least one; a single trace is cut in time instead.
func RunJoint(traces []*trace.Trace, opt Options) (Result, error) {
	if len(traces) == 0 {
		return Result{}, fmt.Errorf("%w: no trace", ErrData)
	}
	if !(opt.Holdout >= 0 && opt.Holdout <= 0.9) {
		return Result{}, fmt.Errorf("identify: hold-out %g: want a share from 0 to 0.9", opt.Holdout)
	}
	job := &run{opt: opt, masked: map[string]int{}}
	for i, tr := range traces {
		if err := tr.Validate(); err != nil {
			return Result{}, fmt.Errorf("trace %d %s: %w", i+1, tr.Name, err)
		}
		c := *tr
		c.Mask = append([]trace.Mask(nil), tr.Mask...)
		if len(tr.Mask) == 0 {
			c.Mask = nil
		}
		if !opt.RawMask {
			c.MarkGaps()
			c.MarkDrive()
		}
		for reason, n := range c.Masked() {
			job.masked[reason] += n
		}
		job.whole = append(job.whole, &c)
	}
	job.divide()
	return job.do()
}

// run is one identification under way.
type run struct {
	opt    Options
	whole  []*trace.Trace // everything, masked
	fit    []*trace.Trace // the part that is fitted
	held   []*trace.Trace // traces kept whole for judging
	split  int            // single trace: first sample kept for judging
	masked map[string]int

	decided bool // whether to fit counts, once for all structures
	counts  bool
}

func (r *run) divide() {
	n := len(r.whole)
	switch {
	case r.opt.Holdout == 0:
		r.fit = r.whole
	case n == 1:
		first, _ := r.whole[0].SplitFraction(r.opt.Holdout)
		r.fit, r.split = []*trace.Trace{first}, first.Len()
	default:
		k := min(max(1, int(math.Round(r.opt.Holdout*float64(n)))), n-1)
		r.fit, r.held = r.whole[:n-k], r.whole[n-k:]
	}
}

func (r *run) do() (Result, error) {
	kinds := []string{r.opt.Kind}
	if r.opt.Kind == "" || r.opt.Kind == KindAuto {
		kinds = []string{model.KindFirstOrder, model.KindSecondOrder}
	}
	if _, err := newKernel(kinds[0]); err != nil {
		return Result{}, err
	}
	var seed *estimate
	if kinds[0] == model.KindSecondOrder || kinds[0] == model.KindMotor {
		first, err := r.estimate(model.KindFirstOrder, nil)
		if err != nil {
			return Result{}, err
		}
		seed = first
	}
	res := Result{Masked: r.masked}
	for i := 0; i < len(kinds); i++ {
		est, err := r.estimate(kinds[i], seed)
		if err != nil {
			return Result{}, err
		}
		if kinds[i] == model.KindFirstOrder {
			seed = est
			if r.opt.Kind != model.KindFirstOrder && math.Exp(est.params[0]) > integratingTau*r.fit[0].Duration() {
				kinds = append(kinds, model.KindIntegrating)
			}
		}
		res.Models = append(res.Models, r.judged(est))
		res.Used = max(res.Used, est.proj.samples)
	}
	compare(res.Models)
	res.Chosen = choose(res.Models)
	return res, nil
}

// integratingTau is the time constant, in record lengths, beyond which a motor
// only integrates as far as the record can tell.
const integratingTau = 1.0

// restLevel is the probability below which a record counts as not having started
// at rest.
const restLevel = 1e-6

// estimate fits one structure: on the assumption that the record starts at rest,
// and without it where the data say that it does not.
func (r *run) estimate(kind string, seed *estimate) (*estimate, error) {
	pb := problem{
		traces: r.fit, kind: kind, drift: r.opt.Drift, deadMax: r.opt.DeadTimeMax, seed: seed,
		steady: !r.opt.FreeStart,
	}
	switch {
	case r.opt.NoOffset:
		pb.offset = offsetNone
	case len(r.fit) > 1:
		pb.offset = offsetOwn
	}
	est, err := pb.solve()
	if err != nil {
		return nil, err
	}
	if pb.steady && kind != model.KindIntegrating {
		est = pb.tryFree(est)
	}
	est.findings = est.examine()
	if counted := r.tryCounts(pb, est); counted != nil {
		counted.findings, counted.noise, counted.inputP = est.findings, est.noise, est.inputP
		est = counted
	}
	est.sharpen()
	return est, nil
}

// tryFree frees the initial states and keeps that only if it is worth it.
func (pb problem) tryFree(rest *estimate) *estimate {
	pb.steady = false
	pb.seed = rest
	free, err := pb.follow(rest.params)
	if err != nil || free.dof < 5 {
		return rest
	}
	extra := float64(rest.dof - free.dof)
	f := (rest.cost - free.cost) / extra / (free.cost / float64(free.dof))
	f /= free.inflated * free.inflated
	if extra > 0 && f > 0 && (distuv.F{D1: extra, D2: float64(free.dof)}).Survival(f) < restLevel {
		return free
	}
	return rest
}

// follow fits from one start only.
func (pb problem) follow(start []float64) (*estimate, error) {
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
		pieces = append(pieces, stretches(tr, i, obs, pb.steady)...)
	}
	proj := newProjection(kern, pieces, pb.offset, pb.drift)
	if proj.samples == 0 {
		return nil, ErrData
	}
	set := pb.settings(proj)
	sol, err := Solve(proj, start, set)
	if err != nil {
		return nil, err
	}
	e := &estimate{kind: pb.kind, proj: proj, params: sol.Params, evals: sol.Evaluations}
	e.finish(set)
	return e, nil
}
