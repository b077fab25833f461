package sheet

import (
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"sync"
	"time"

	"gainwright/tune/sheet/plain"
)

// What Create and the writers refuse.
var (
	ErrNotEmpty = errors.New("the folder is not empty; a sheet never shares or overwrites one: name a new folder")
	ErrClosed   = errors.New("the sheet is closed; its record is complete: start a new job in a new folder")
	ErrKind     = errors.New("no such kind of entry")
	ErrHeader   = errors.New("the header is not complete")
)

// Header says whose record a sheet is. It is the first entry.
type Header struct {
	Rig       string `json:"rig"`
	BoardID   string `json:"board_id"`
	Program   string `json:"program"`  // name and version
	Operator  string `json:"operator"` // empty where it was not given
	Seed      uint64 `json:"seed,string"`
	Start     string `json:"start"` // wall time, RFC 3339
	Simulated bool   `json:"simulated"`
}

// DiskError is a write that failed. It is returned by the call that met it and
// by every call after: what comes after a gap is not a record.
type DiskError struct {
	File string
	Err  error
}

func (e *DiskError) Error() string {
	return fmt.Sprintf("the record cannot be written (%s: %v): stop the job, free the disk, start a new job in a new folder", e.File, e.Err)
}

func (e *DiskError) Unwrap() error { return e.Err }

// Sheet is a record being written. It may be used from several goroutines. Each
// entry is on the disk when its call returns; for a simulated rig, whose record
// can be made again, when it gets there is left to the operating system.
type Sheet struct {
	mu      sync.Mutex
	dir     string
	disk    disk
	index   diskFile
	clock   func() time.Duration
	start   time.Time
	durable bool
	next    int
	chain   string
	err     error
	closed  bool
	streams []*Stream
	done    chan struct{}
}

// Option changes how a sheet is made.
type Option func(*Sheet)

// WithClock sets the time since the header's start. Without it the monotonic
// clock of the machine runs from Create.
func WithClock(since func() time.Duration) Option {
	return func(s *Sheet) { s.clock = since }
}

func withDisk(d disk) Option {
	return func(s *Sheet) { s.disk = d }
}

// Create begins a sheet in dir, which is made if it is not there and must be
// empty if it is (ErrNotEmpty).
func Create(dir string, h Header, options ...Option) (*Sheet, error) {
	start, err := time.Parse(time.RFC3339Nano, h.Start)
	if err != nil {
		return nil, fmt.Errorf("%w: start %q is no RFC 3339 time", ErrHeader, plain.Visible(h.Start, 40))
	}
	if h.Rig == "" || h.Program == "" {
		return nil, fmt.Errorf("%w: rig and program must be named", ErrHeader)
	}
	if err := emptyFolder(dir); err != nil {
		return nil, err
	}
	began := time.Now()
	s := &Sheet{
		dir: dir, disk: folder(dir), start: start, durable: !h.Simulated, next: 1, chain: genesis(preamble),
		clock: func() time.Duration { return time.Since(began) }, done: make(chan struct{}),
	}
	for _, o := range options {
		o(s)
	}
	if s.index, err = s.disk.create(indexName); err != nil {
		return nil, s.fail(indexName, err)
	}
	if err := s.writeIndex(preamble); err != nil {
		return nil, err
	}
	if _, err := s.Entry(KindHeader, "job", h); err != nil {
		return nil, err
	}
	if s.durable {
		go s.syncStreams()
	}
	return s, nil
}

func emptyFolder(dir string) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return fmt.Errorf("the record's folder cannot be made: %w", err)
	}
	found, err := os.ReadDir(dir)
	if err != nil {
		return fmt.Errorf("the record's folder cannot be read: %w", err)
	}
	if len(found) > 0 {
		return fmt.Errorf("%s: %w", plain.Visible(dir, 200), ErrNotEmpty)
	}
	return nil
}

// Dir returns the folder.
func (s *Sheet) Dir() string { return s.dir }

// Err returns the first disk error, nil as long as everything was kept.
func (s *Sheet) Err() error {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.err
}

// Chain returns the chain after the newest entry: what a card prints.
func (s *Sheet) Chain() string {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.chain
}

// Entry records v as JSON with sorted or declared keys, two blanks of indent
// and every float64 such that it reads back bit for bit. A NaN or an infinity
// is an error and leaves the sheet as it was: an unknown value is null, for
// which Known helps.
func (s *Sheet) Entry(kind Kind, name string, v any) (Line, error) {
	content, err := encode(v)
	if err != nil {
		return Line{}, fmt.Errorf("sheet: %s %s: %w", kind, plain.Visible(name, 40), err)
	}
	return s.enter(kind, name, "json", content)
}

// Text records a text. One that holds characters that do not print is kept
// with these written as escapes, and its name then ends in "-escaped".
func (s *Sheet) Text(kind Kind, name, text string) (Line, error) {
	extension := "txt"
	if kind == KindRig {
		extension = "toml"
	}
	if !plain.Clean(text) {
		text, name = plain.Block(text), plain.FileName(name, nameMax-8)+"-escaped"
	}
	return s.enter(kind, name, extension, []byte(text))
}

// Remark records what the operator has to say.
func (s *Sheet) Remark(text string) (Line, error) {
	return s.Text(KindRemark, "operator", text+"\n")
}

// Closing is the last entry of a sheet that was finished.
type Closing struct {
	Outcome string `json:"outcome"` // accepted, no-adjustment, refused, tripped or failed
	Reason  string `json:"reason"`
	Entries int    `json:"entries"` // this one included
}

// Close ends the streams, records the outcome and closes the sheet. Nothing can
// be recorded after it. Closing twice does nothing.
func (s *Sheet) Close(outcome, reason string) error {
	s.mu.Lock()
	if s.closed {
		s.mu.Unlock()
		return s.err
	}
	streams := s.streams
	s.mu.Unlock()
	for _, st := range streams {
		if err := st.Close(); err != nil {
			break // latched; the index is still closed below
		}
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return s.err
	}
	content, err := encode(Closing{Outcome: outcome, Reason: reason, Entries: s.next})
	if err != nil {
		return err
	}
	_, _ = s.enterLocked(KindClose, outcome, "json", content)
	s.closed = true
	close(s.done)
	if err := s.index.Close(); err != nil && s.err == nil {
		s.err = &DiskError{indexName, err}
	}
	return s.err
}

func (s *Sheet) enter(kind Kind, name, extension string, content []byte) (Line, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.enterLocked(kind, name, extension, content)
}

// enterLocked writes the file, then its line. The order is the promise: a line
// stands only for a file that is complete.
func (s *Sheet) enterLocked(kind Kind, name, extension string, content []byte) (Line, error) {
	if err := s.ready(kind); err != nil {
		return Line{}, err
	}
	file := fmt.Sprintf("%04d-%s-%s.%s", s.next, kind, plain.FileName(name, nameMax), extension)
	f, err := s.disk.create(file)
	if err != nil {
		return Line{}, s.fail(file, err)
	}
	_, err = f.Write(content)
	if err == nil && s.durable {
		err = f.Sync()
	}
	if closeErr := f.Close(); err == nil {
		err = closeErr
	}
	if err == nil && s.durable {
		err = s.disk.syncNames()
	}
	if err != nil {
		return Line{}, s.fail(file, err)
	}
	return s.appendLine(kind, file, int64(len(content)), hash(content))
}

func (s *Sheet) ready(kind Kind) error {
	switch {
	case s.err != nil:
		return s.err
	case s.closed:
		return ErrClosed
	case !kinds[kind]:
		return fmt.Errorf("%w: %q", ErrKind, plain.Visible(string(kind), 40))
	}
	return nil
}

func (s *Sheet) appendLine(kind Kind, file string, size int64, sum string) (Line, error) {
	l := Line{
		Number: s.next, Time: s.start.Add(s.clock()), Kind: kind, File: file, Bytes: size, SHA256: sum,
	}
	l.Time = l.Time.Truncate(time.Millisecond)
	body := l.body()
	l.Chain = link(s.chain, body)
	if err := s.writeIndex(body + " " + l.Chain + "\n"); err != nil {
		return Line{}, err
	}
	s.next, s.chain = s.next+1, l.Chain
	return l, nil
}

func (s *Sheet) writeIndex(text string) error {
	if _, err := s.index.Write([]byte(text)); err != nil {
		return s.fail(indexName, err)
	}
	if s.durable {
		if err := s.index.Sync(); err != nil {
			return s.fail(indexName, err)
		}
	}
	return nil
}

func (s *Sheet) fail(file string, err error) error {
	if s.err == nil {
		s.err = &DiskError{file, err}
	}
	return s.err
}

// Raw returns v as JSON for a field that keeps another package's own form. It
// returns nil, which is written as null, for what cannot be encoded.
func Raw(v any) json.RawMessage {
	b, err := json.Marshal(v)
	if err != nil {
		return nil
	}
	return b
}
