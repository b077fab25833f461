package tui

import (
	"testing"
	"time"

	"gainwright/tune/job"
)

// Between two inches g moves the next one, and every other key disarms, also while
// the shaft still runs on.
func TestAnyOtherKeyDisarmsBetweenInches(t *testing.T) {
	for _, moving := range []bool{false, true} {
		v := at(job.StepStep, true)
		v.Plan = stepPlan()
		v.Drive.Phase, v.Drive.Inch, v.Drive.Inches, v.Drive.Clear, v.Drive.Moving = armed, true, 1, true, moving
		for _, key := range []string{"y", "a", "enter", "x", "q", "?", "1", "m", "up"} {
			_, wants := New(Look{}).Update(key, v)
			if len(wants) != 1 || wants[0] != (job.Disarm{}) {
				t.Errorf("moving %v: %q means %#v", moving, key, wants)
			}
		}
		_, wants := New(Look{}).Update("g", v)
		if moving && len(wants) != 0 || !moving && (len(wants) != 1 || wants[0] != (job.Go{})) {
			t.Errorf("moving %v: g means %#v", moving, wants)
		}
		if _, wants := New(Look{}).Update(" ", v); len(wants) != 0 {
			t.Errorf("the stop key means %#v", wants)
		}
	}
}

// A question with a list of answers takes one key, and only one that is listed.
func TestAChoiceTakesOneKey(t *testing.T) {
	v := at(job.StepStep, true)
	v.Ask = &job.Question{ID: 4, Kind: job.AskChoice, Options: []string{"a", "b"}}
	_, wants := New(Look{}).Update("2", v)
	if len(wants) != 1 || wants[0] != (job.GiveAnswer{Answer: job.Answer{ID: 4, Yes: true, Text: "b"}}) {
		t.Errorf("2 means %#v", wants)
	}
	if _, wants := New(Look{}).Update("3", v); len(wants) != 0 {
		t.Errorf("3 of two answers means %#v", wants)
	}
}

// An alarm is put aside with a typed reason only, and a trip never is.
func TestShelvingNeedsAReason(t *testing.T) {
	v := at(job.StepStep, false)
	v.Alarms = []job.AlarmView{{ID: "trip", Active: true, State: string(job.Acknowledged)}}
	s, _ := New(Look{}).Update("f", v)
	if s, wants := s.Update("s", v); s.local != localNone || len(wants) != 0 {
		t.Errorf("a trip can be shelved: %v, %v", s.local, wants)
	}
	v.Alarms = append(v.Alarms, job.AlarmView{ID: "battery", Active: true, MayShelve: true, State: string(job.Unacknowledged)})
	for key, service := range map[string]bool{"s": false, "u": true} {
		s, _ := s.Update(key, v)
		s, wants := s.Update("enter", v)
		if len(wants) != 0 {
			t.Errorf("%s without a reason: %#v", key, wants)
		}
		for _, k := range []string{"o", "k", "enter"} {
			s, wants = s.Update(k, v)
		}
		if len(wants) != 1 || wants[0] != (job.Shelve{ID: "battery", Reason: "ok", OutOfService: service}) {
			t.Errorf("%s: %#v", key, wants)
		}
	}
}

// Only what is unacknowledged and not put aside flashes: the picture of half a
// second later is another one, or the same.
func TestOnlyTheUnacknowledgedFlashes(t *testing.T) {
	for _, c := range []struct {
		name    string
		change  func(*job.View)
		flashes bool
	}{
		{"unacknowledged", func(*job.View) {}, true},
		{"acknowledged", func(v *job.View) { v.Alarms[0].Acked, v.Alarms[0].State = true, string(job.Acknowledged) }, false},
		{"returned", func(v *job.View) {
			v.Link.State, v.Alarms[0].Active, v.Alarms[0].State = job.Fresh, false, string(job.ReturnedUnacknowledged)
		}, true},
		{"shelved", func(v *job.View) { v.Alarms[0].Shelved, v.Alarms[0].ShelvedUntil = job.OutOfService, time.Hour }, false},
	} {
		v := at(job.StepStep, false)
		v.Link.State, v.Link.Age = job.LinkLost, time.Second
		v.Alarms = []job.AlarmView{{ID: "link", Active: true, MayShelve: true, State: string(job.Unacknowledged), Text: "link lost"}}
		c.change(v)
		s, _ := New(Look{}).Update("f", v)
		v.Now = 0
		one := s.Draw(v, 80, 24)
		v.Now = 500 * time.Millisecond
		if two := s.Draw(v, 80, 24); one != two != c.flashes {
			t.Errorf("%s: flashes %v, want %v", c.name, one != two, c.flashes)
		}
	}
}
