package tui

import (
	"fmt"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"gainwright/protocol/si"
	"gainwright/tune/job"
)

// typedMax bounds what can be typed into a field, in bytes.
const typedMax = 400

// Update returns the screen after a key and the intents that the key means.
// Keys are named as the terminal library names them ("enter", "esc", "j").
//
// The stop key never makes an intent: it was taken from the input before this
// package saw it. In a field it is a blank as well. While Hot, only the mark
// key does anything here; the stop that every other key means went ahead too.
func (s Screen) Update(key string, v *job.View) (Screen, []job.Intent) {
	if v == nil {
		return s, nil
	}
	s = s.settle(v)
	if key == " " {
		if s.typing(v) {
			s = s.add(v, " ")
		}
		return s, nil
	}
	if !s.typing(v) {
		key = s.look.Hand.meant(key)
	}
	if inchRest(v) {
		return inchKey(s, v, key)
	}
	if Hot(v) {
		if key == "m" {
			return s, []job.Intent{job.SetMark{}}
		}
		return s, nil
	}
	s.notice = ""
	if s.typing(v) {
		return s.typeKey(key, v)
	}
	if utf8.RuneCountInString(key) == 1 {
		key = strings.ToLower(key) // a locked shift key changes nothing
	}
	for i := range bindings {
		b := &bindings[i]
		if b.act != nil && b.has(key) && b.when(s, v) {
			return b.act(s, v, key)
		}
	}
	return s, nil
}

// settle drops what belonged to a state that is gone: a local matter once the
// drive is no longer at rest, and typed text of a question that was answered.
func (s Screen) settle(v *job.View) Screen {
	if s.local != localNone && (Hot(v) || v.Drive.Phase == armed || v.Drive.Phase == arming) {
		s.local, s.typed = localNone, ""
	}
	if s.local == localNone {
		id := 0
		if v.Ask != nil {
			id = v.Ask.ID
		}
		if s.askID != id {
			s.askID, s.typed, s.left = id, "", 0
		}
	}
	return s
}

func (s Screen) add(v *job.View, text string) Screen {
	if len(s.typed)+len(text) <= typedMax {
		s.typed += text
	}
	return s
}

// typeKey is what a key means while a field is open.
func (s Screen) typeKey(key string, v *job.View) (Screen, []job.Intent) {
	switch key {
	case "enter":
		return s.give(v)
	case "esc":
		if s.local != localNone {
			s.local, s.typed, s.askID = localNone, "", 0
			return s.settle(v), nil
		}
		s.left = v.Ask.ID
		s.notice = "The field waits: enter goes back to it."
		return s, nil
	case "backspace", "ctrl+h":
		if s.typed != "" {
			_, n := utf8.DecodeLastRuneInString(s.typed)
			s.typed = s.typed[:len(s.typed)-n]
		}
		return s, nil
	case "ctrl+u":
		s.typed = ""
		return s, nil
	}
	if r, n := utf8.DecodeRuneInString(key); n == len(key) && n > 0 && r != utf8.RuneError && unicode.IsPrint(r) {
		s = s.add(v, key)
	}
	return s, nil
}

// give ends a field: the text goes where it belongs, or a notice says why not.
func (s Screen) give(v *job.View) (Screen, []job.Intent) {
	text := s.typed
	var in job.Intent
	switch s.local {
	case localShelve, localService:
		return s.giveShelf(v, text)
	case localRemark, localSkip:
		if strings.TrimSpace(text) == "" {
			s.notice = "Nothing is typed yet; esc leaves the field."
			return s, nil
		}
		in = job.AddRemark{Text: text}
		if s.local == localSkip {
			st := v.Steps[s.selected(PagePath, v)]
			in = job.SkipStep{Step: st.ID, Reason: text}
		}
		s.local, s.typed, s.askID = localNone, "", 0
		return s.settle(v), []job.Intent{in}
	}
	q := v.Ask
	if text == "" && q.Kind != job.AskWord {
		text = q.Default
	}
	switch q.Kind {
	case job.AskWord:
		if text != q.Want {
			s.notice = fmt.Sprintf("Typed %q, asked for %q: nothing was done.", text, q.Want)
			s.typed = ""
			return s, nil
		}
	case job.AskNumber:
		text = strings.TrimSpace(strings.Replace(text, ",", ".", 1))
		if x, err := strconv.ParseFloat(text, 64); (err != nil || !si.Finite(x)) && !(q.Blank && text == "") {
			s.notice = fmt.Sprintf("%q is not a number: use digits and a point, as in 24.0.", text)
			return s, nil
		}
	}
	s.typed = ""
	return s, []job.Intent{job.GiveAnswer{Answer: job.Answer{ID: q.ID, Yes: true, Text: text}}}
}

// giveShelf puts the newest alarm that may be aside, with the reason typed.
func (s Screen) giveShelf(v *job.View, reason string) (Screen, []job.Intent) {
	i := shelvable(v)
	if strings.TrimSpace(reason) == "" {
		s.notice = "Nothing is typed yet; esc leaves the field."
		return s, nil
	}
	service := s.local == localService
	s.local, s.typed, s.askID = localNone, "", 0
	if i < 0 {
		s.notice = "That alarm has returned by itself."
		return s.settle(v), nil
	}
	return s.settle(v), []job.Intent{job.Shelve{ID: v.Alarms[i].ID, Reason: reason, OutOfService: service}}
}

// show picks a page; PageNone follows the job again.
func (s Screen) show(p Page, v *job.View) Screen {
	auto, forced := follow(v)
	if forced {
		return s
	}
	if p == auto {
		p = PageNone
	}
	s.picked, s.over, s.why, s.local = p, auto, false, localNone
	s.rowPage = PageNone
	return s
}

// move steps the selected row of the page, the page menu, or the number whose
// reason is shown.
func (s Screen) move(v *job.View, by int) Screen {
	p := s.page(v)
	if s.why {
		n := len(facts(p, v))
		s.whyRow = max(0, min(s.whyRow+by, n-1))
		return s
	}
	s.row = max(0, s.selected(p, v)+by)
	s.rowPage = p
	s.row = s.selected(p, v)
	return s
}
