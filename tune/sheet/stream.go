package sheet

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	gohash "hash"
	"slices"
	"sync"
	"time"

	"gainwright/tune/sheet/plain"
)

// syncEvery bounds what a power cut can take from a stream; half of the second
// that is promised, so that a late timer still keeps it.
const syncEvery = 500 * time.Millisecond

// Stream is a file of the sheet that grows through the job: the tape. What was
// written is entered in the index by Mark and by Close, with the hash of all of
// it so far. It may be written from one goroutine while others make entries.
type Stream struct {
	s      *Sheet
	kind   Kind
	name   string
	mu     sync.Mutex // held for the file, never while taking the sheet's
	file   diskFile
	sum    gohash.Hash
	size   int64
	dirty  bool
	closed bool
}

// Stream begins a file kind-name.extension that grows.
func (s *Sheet) Stream(kind Kind, name, extension string) (*Stream, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if err := s.ready(kind); err != nil {
		return nil, err
	}
	file := fmt.Sprintf("%s-%s.%s", kind, plain.FileName(name, nameMax), plain.FileName(extension, 8))
	if slices.ContainsFunc(s.streams, func(st *Stream) bool { return st.name == file }) {
		return nil, fmt.Errorf("sheet: %s is being written already", file)
	}
	f, err := s.disk.create(file)
	if err != nil {
		return nil, s.fail(file, err)
	}
	if s.durable {
		if err := s.disk.syncNames(); err != nil {
			return nil, s.fail(file, err)
		}
	}
	st := &Stream{s: s, kind: kind, name: file, file: f, sum: sha256.New()}
	s.streams = append(s.streams, st)
	return st, nil
}

// Write appends to the file. A failure is latched by the sheet.
func (st *Stream) Write(p []byte) (int, error) {
	st.mu.Lock()
	if st.closed {
		st.mu.Unlock()
		return 0, ErrClosed
	}
	n, err := st.file.Write(p)
	st.sum.Write(p[:n])
	st.size += int64(n)
	st.dirty = true
	st.mu.Unlock()
	if err != nil {
		return n, st.s.failNow(st.name, err)
	}
	return n, nil
}

// Mark enters what was written so far in the index.
func (st *Stream) Mark() error {
	size, sum, err := st.flush(false)
	if err != nil {
		return st.s.failNow(st.name, err)
	}
	return st.note(size, sum)
}

// Close enters the whole file in the index and closes it. Closing twice does
// nothing.
func (st *Stream) Close() error {
	st.mu.Lock()
	done := st.closed
	st.closed = true
	st.mu.Unlock()
	if done {
		return nil
	}
	size, sum, err := st.flush(true)
	if closeErr := st.file.Close(); err == nil {
		err = closeErr
	}
	if err != nil {
		return st.s.failNow(st.name, err)
	}
	return st.note(size, sum)
}

func (st *Stream) note(size int64, sum string) error {
	st.s.mu.Lock()
	defer st.s.mu.Unlock()
	if err := st.s.ready(st.kind); err != nil {
		return err
	}
	_, err := st.s.appendLine(st.kind, st.name, size, sum)
	return err
}

// flush returns the length and hash of what is written, and on the disk where
// the sheet is durable or the stream ends.
func (st *Stream) flush(end bool) (int64, string, error) {
	st.mu.Lock()
	defer st.mu.Unlock()
	if st.dirty && (st.s.durable || end) {
		if err := st.file.Sync(); err != nil {
			return 0, "", err
		}
		st.dirty = false
	}
	return st.size, hex.EncodeToString(st.sum.Sum(nil)), nil
}

// syncStreams runs until the sheet is closed and keeps streams at most
// syncEvery behind on the disk.
func (s *Sheet) syncStreams() {
	tick := time.NewTicker(syncEvery)
	defer tick.Stop()
	for {
		select {
		case <-s.done:
			return
		case <-tick.C:
		}
		s.mu.Lock()
		streams := slices.Clone(s.streams)
		s.mu.Unlock()
		for _, st := range streams {
			st.mu.Lock()
			var err error
			if st.dirty && !st.closed {
				err = st.file.Sync()
				st.dirty = false
			}
			st.mu.Unlock()
			if err != nil {
				_ = s.failNow(st.name, err)
			}
		}
	}
}

func (s *Sheet) failNow(file string, err error) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.fail(file, err)
}
