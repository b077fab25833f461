package bench

import (
	"bytes"
	"errors"
	"fmt"
	"sync"

	"gainwright/safety"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// lateFile is the tape's file before there is a folder to put it in: it keeps
// what is written until it is given its place.
type lateFile struct {
	mu   sync.Mutex
	held [][]byte // pieces: one slice would be copied again and again
	size int
	out  *sheet.Stream
}

// heldMax bounds what waits for a folder: half an hour of a busy line. What
// comes after is an error, which the tape reports.
const heldMax = 16 << 20

// Write keeps or writes b.
func (f *lateFile) Write(b []byte) (int, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.out != nil {
		return f.out.Write(b)
	}
	if f.size+len(b) > heldMax {
		return 0, fmt.Errorf("the tape waits for a record that was never opened, and %d MiB are full", heldMax>>20)
	}
	f.held = append(f.held, bytes.Clone(b))
	f.size += len(b)
	return len(b), nil
}

// place gives the tape its file.
func (f *lateFile) place(out *sheet.Stream) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	held := f.held
	f.held, f.size, f.out = nil, 0, out
	_, err := out.Write(bytes.Join(held, nil))
	return err
}

// record returns the sheet, and opens it when the first entry is kept: by then
// the board is known.
func (h *hands) record() (*sheet.Sheet, error) {
	if h.sheet != nil || h.open == nil {
		return h.sheet, nil
	}
	board := ""
	h.do(func(s *session) { board = s.core.Identity().Board })
	sh, err := h.open(board)
	if err != nil {
		return nil, err
	}
	h.sheet = sh
	if h.late != nil {
		st, err := sh.Stream(sheet.KindTape, "session", "txt")
		if err != nil {
			return nil, err
		}
		if err := h.late.place(st); err != nil {
			return nil, err
		}
	}
	h.do(func(s *session) { s.view.Sheet = sh.Dir() })
	return sh, nil
}

// closeRecord ends the record.
func (h *hands) closeRecord(tape error) (string, error) {
	if h.sheet == nil {
		return "", tape
	}
	if h.atClose != nil {
		if name, v := h.atClose(); name != "" {
			if _, err := h.sheet.Entry(sheet.KindEvent, name, v); err != nil {
				return h.sheet.Dir(), err
			}
		}
	}
	outcome, reason := h.outcome, h.reason
	if outcome == "" {
		outcome, reason = "ended", "the session was left"
	}
	if err := h.sheet.Close(outcome, reason); err != nil {
		return h.sheet.Dir(), err
	}
	return h.sheet.Dir(), tape
}

// Outcome says what the job came to; the record closes with it.
func (h *hands) Outcome(outcome, reason string) { h.outcome, h.reason = outcome, reason }

var _ job.Hands = (*hands)(nil)

func (h *hands) Keep(kind, name string, v any) error {
	_, err := h.KeepFile(kind, name, v)
	return err
}

func (h *hands) KeepFile(kind, name string, v any) (string, error) {
	sh, err := h.record()
	var l sheet.Line
	if sh != nil {
		l, err = sh.Entry(sheet.Kind(kind), name, v)
	}
	return l.File, h.wrote(err)
}

func (h *hands) KeepText(kind, name, text string) error {
	sh, err := h.record()
	if sh != nil {
		_, err = sh.Text(sheet.Kind(kind), name, text)
	}
	return h.wrote(err)
}

func (h *hands) KeepTrace(name string, tr *trace.Trace, meta ...string) (string, error) {
	sh, err := h.record()
	var l sheet.Line
	if sh != nil {
		l, err = sh.Trace(name, tr, meta...)
	}
	return l.File, h.wrote(err)
}

func (h *hands) Card() (card, sticker string, err error) {
	if h.sheet == nil {
		return "", "", errors.New("there is no record to make a card from: give a folder for it")
	}
	r, problems := sheet.Open(h.sheet.Dir())
	if r == nil {
		return "", "", fmt.Errorf("the record cannot be read: %v", problems)
	}
	d := sheet.CardOf(r)
	return sheet.Card(d), sheet.Sticker(d), nil
}

// wrote tells the limiter when the record cannot be written: the job stops, the
// motor's limits do not depend on it.
func (h *hands) wrote(err error) error {
	if err != nil {
		h.do(func(s *session) { s.core.Do(safety.TapeFailed{At: s.now, Why: err.Error()}) })
	}
	return err
}
