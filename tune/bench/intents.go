package bench

import (
	"errors"

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
		l.post(func(s *session) {
			if !s.resize(i.By) {
				l.step(func(j *job.Job) { j.Nudge(i.By) })
			}
		})
	case job.PickGain:
		l.step(func(j *job.Job) { j.PickGain(i.By) })
	case job.TurnGain:
		l.step(func(j *job.Job) { j.TurnGain(i.By) })
	case job.TakeOld:
		l.step(func(j *job.Job) { j.TakeOld() })
	case job.TakeBack:
		l.step(func(j *job.Job) { j.TakeBack() })
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
	if l.job.Do(job.StepPort) != nil {
		return
	}
	err = l.job.Do(job.StepIdentity)
	if l.unreadable(err) && l.opt.OpenAt != nil {
		l.do(func(*session) { l.shut() })
		rate := l.search(path, o.Baud)
		if rate == 0 {
			rate = o.Baud
		}
		if o, err = l.opt.OpenAt(path, rate); err != nil {
			return
		}
		l.connect(o, path)
		_ = l.job.Do(job.StepIdentity) // what came of it is on the step
	}
	if id := l.job.ID.Board; id != "" && l.opt.Seen != nil {
		l.opt.Seen(path, id)
	}
}

// unreadable says that a board did not answer in a way that can be read, which
// another line rate may mend.
func (l *Live) unreadable(err error) bool {
	r, ok := errors.AsType[*job.RefusedError](err)
	return ok && (r.Number == 702 || r.Number == 761 || r.Number == 763)
}

// shut gives the line back without a word of a lost link.
func (l *Live) shut() {
	if line := l.line.Swap(nil); line != nil {
		line.cancel()
		line.port.Close()
	}
	l.s.opened = false
}

// Connect opens a port from the command line, as a person's pick would.
func (l *Live) Connect(path string) { l.step(func(*job.Job) { l.pick(path) }) }
