package bench

import (
	"gainwright/safety"
	"gainwright/tune/job"
)

// Post does what a person asks for. It never blocks.
func (l *Live) Post(i job.Intent) {
	switch i := i.(type) {
	case job.PickPort:
		l.step(func(j *job.Job) { l.pick(i.Path) })
	case job.LookAgain:
		if l.opt.Ports != nil {
			l.step(func(*job.Job) { ports := l.opt.Ports(); l.do(func(s *session) { s.view.Ports = ports }) })
		}
	case job.DoStep:
		l.step(func(j *job.Job) { l.doStep(j, i.Step) })
	case job.SkipStep:
		l.step(func(j *job.Job) { j.Skip(i.Step, i.Reason) })
	case job.Revert:
		l.step(func(j *job.Job) { _ = j.Revert() })
	case job.AddRemark:
		l.step(func(j *job.Job) { j.Remark(i.Text) })
	case job.Nudge:
		l.step(func(j *job.Job) { j.Nudge(i.By) })
	case job.TurnHand:
		if l.opt.Hand != nil {
			l.opt.Hand()
		}
	case job.CyclePower:
		if l.opt.Cycle != nil {
			l.opt.Cycle()
		}
	case job.Quit:
		l.Stop(safety.ByQuit)
	default:
		l.post(func(s *session) { s.intent(i) })
	}
}

// doStep begins a step. The step "port" is a port's opening: with one port there
// is nothing to choose.
func (l *Live) doStep(j *job.Job, id job.StepID) {
	if id != job.StepPort || l.line.Load() != nil {
		_ = j.Do(id)
		return
	}
	ports := l.View().Ports
	if len(ports) == 1 && ports[0].Path != "" {
		l.pick(ports[0].Path)
		return
	}
	l.do(func(s *session) { s.say("choose a port on the ports page") })
}

// pick opens a port and asks the board what it is.
func (l *Live) pick(path string) {
	if l.line.Load() != nil {
		l.do(func(s *session) { s.say("a port is open already: " + l.path) })
		return
	}
	o, err := l.opt.Open(path)
	if err != nil {
		l.do(func(s *session) {
			s.say(err.Error())
			s.view.Refusal = &job.RefusalView{Number: 750, What: "port not opened", Cause: err.Error(), Remedy: "mend that, or choose another port"}
		})
		return
	}
	l.connect(o, path)
	if l.job.Do(job.StepPort) == nil {
		_ = l.job.Do(job.StepIdentity)
	}
}

// Connect opens a port from the command line, as a person's pick would.
func (l *Live) Connect(path string) { l.step(func(*job.Job) { l.pick(path) }) }
