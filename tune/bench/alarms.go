package bench

import (
	"strings"
	"time"

	"gainwright/safety"
	"gainwright/tune/job"
)

// Alarms stand in the states of ISA-18.2 and IEC 62682. An alarm of the limiter's
// trip stays until the trip is reset; every other returns by itself when its
// condition is gone. Acknowledging changes a word on the screen and nothing else.

// alarmState makes the state from what was seen of an alarm.
func alarmState(active, acked bool) job.AlarmState {
	switch {
	case active && !acked:
		return job.Unacknowledged
	case active:
		return job.Acknowledged
	case !acked:
		return job.ReturnedUnacknowledged
	}
	return job.NormalAgain
}

// condition is something that the session watches and that is an alarm while it
// lasts. Latching ones are trips: they are not shelved.
type condition struct {
	id    string
	trip  bool
	cause safety.Cause
	on    bool
}

// What the watched conditions are called.
var causeLink, causeRecord, causeStale = func() (a, b, c safety.Cause) {
	all := safety.Codes()
	return all[safety.CodeLinkLost], all[safety.CodeTape], all[safety.CodeStale]
}()

// conditions lists what is an alarm now or may become one.
func (s *session) conditions() []condition {
	st, link := s.core.State(), s.core.Link()
	l := []condition{
		{id: "link", cause: causeLink, on: link.Lost},
		{id: "record", cause: causeRecord, on: st.RecordBad},
	}
	if limit := s.core.Envelope().TelemetryAgeMax; s.opened && !link.Lost && link.Seen && !s.cycling {
		l = append(l, condition{id: "stale", cause: causeStale, on: limit > 0 && link.Age > 5*limit})
	}
	if s.laptopWords != "" {
		l = append(l, condition{id: "battery", cause: safety.Cause{Words: s.laptopWords, Do: "plug it in"}, on: true})
	}
	if st.Phase == safety.Tripped {
		l = append(l, condition{id: "trip", trip: true, cause: st.Trip.Cause, on: true})
	}
	return l
}

// watchAlarms brings the list of alarms up to what is true now.
func (s *session) watchAlarms() {
	now := s.conditions()
	list, changed := s.view.Alarms, false
	edit := func(i int, f func(*job.AlarmView)) {
		if !changed {
			list, changed = append([]job.AlarmView(nil), list...), true
		}
		f(&list[i])
	}
	for i := range list {
		a := list[i]
		c, known := find(now, a.ID)
		on := known && c.on
		if a.Active && on && c.trip && a.Text != c.cause.String() { // the same trip, now with its name
			edit(i, func(a *job.AlarmView) {
				a.Code, a.Text, a.Cause, a.Do = c.cause.Code, c.cause.String(), c.cause.Words, c.cause.Do
			})
		}
		if a.Shelved > 0 && s.now >= a.ShelvedUntil && a.Shelved != job.OutOfService {
			edit(i, func(a *job.AlarmView) { a.Shelved = job.NotShelved })
		}
		if a.Active && !on {
			edit(i, func(a *job.AlarmView) {
				a.Active = false
				a.State = string(alarmState(false, a.Acked))
				a.Shelved = job.NotShelved
			})
		}
	}
	for _, c := range now {
		if !c.on || active(list, c.id) {
			continue
		}
		a := job.AlarmView{At: s.now, ID: c.id, Code: c.cause.Code, Text: c.cause.String(), Cause: c.cause.Words, Do: c.cause.Do, Active: true,
			MayShelve: !c.trip, State: string(job.Unacknowledged)}
		list, changed = append(list[:len(list):len(list)], a), true
	}
	if changed {
		s.view.Alarms = list
	}
}

func find(l []condition, id string) (condition, bool) {
	for _, c := range l {
		if c.id == id {
			return c, true
		}
	}
	return condition{}, false
}

func active(l []job.AlarmView, id string) bool {
	for i := range l {
		if l[i].ID == id && l[i].Active {
			return true
		}
	}
	return false
}

// acknowledged marks every alarm as seen. It changes nothing in the drive.
func (s *session) acknowledged() {
	alarms := append([]job.AlarmView(nil), s.view.Alarms...)
	for i := range alarms {
		alarms[i].Acked = true
		alarms[i].State = string(alarmState(alarms[i].Active, true))
	}
	s.view.Alarms = alarms
}

// shelfTime is how long an alarm stays shelved before it shows again (our choice).
const shelfTime = 15 * time.Minute

// shelve puts an alarm that is no trip aside, for a time or out of service, with a
// reason; the reason goes into the log and with it onto the tape.
func (s *session) shelve(i job.Shelve) {
	alarms := append([]job.AlarmView(nil), s.view.Alarms...)
	for k := range alarms {
		a := &alarms[k]
		if a.ID != i.ID || !a.Active {
			continue
		}
		if !a.MayShelve || strings.TrimSpace(i.Reason) == "" {
			s.say("not shelved: " + a.Text + "; a trip is never shelved, and anything else only with a typed reason")
			return
		}
		a.Shelved, a.ShelvedUntil, a.Why = job.ShelvedForATime, s.now+shelfTime, i.Reason
		if i.OutOfService {
			a.Shelved = job.OutOfService
		}
		s.say(a.Shelved.String() + ": " + a.Text + ": " + i.Reason)
	}
	s.view.Alarms = alarms
}
