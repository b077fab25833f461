package bench

import (
	"fmt"
	"sync"

	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// lateFile is the tape's file before there is a folder to put it in: it keeps
// what is written until it is given its place.
type lateFile struct {
	mu   sync.Mutex
	held []byte
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
	if len(f.held)+len(b) > heldMax {
		return 0, fmt.Errorf("the tape waits for a record that was never opened, and %d MiB are full", heldMax>>20)
	}
	f.held = append(f.held, b...)
	return len(b), nil
}

// place gives the tape its file.
func (f *lateFile) place(out *sheet.Stream) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	held := f.held
	f.held, f.out = nil, out
	_, err := out.Write(held)
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
