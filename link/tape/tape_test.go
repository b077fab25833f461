package tape_test

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"testing/synctest"
	"time"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"gainwright/link/tape"
)

var start = time.Date(2026, 2, 3, 4, 5, 6, 0, time.UTC)

// record writes records to a tape in memory.
func record(t interface{ Fatal(...any) }, records []tape.Record) []byte {
	var out bytes.Buffer
	w := tape.NewWriter(&out, tape.Config{Start: start})
	for _, r := range records {
		w.Record(r.Time, r.Dir, r.Bytes)
	}
	if err := w.Close(context.Background()); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

func read(t interface{ Fatal(...any) }, text []byte) ([]tape.Record, bool) {
	r, err := tape.NewReader(bytes.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	records, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return records, r.Cut()
}

var sample = []tape.Record{
	{Time: 1204 * time.Microsecond, Dir: tape.FromBoard, Bytes: []byte("t 17 1200 d 0 0;5A3C\r\n")},
	{Time: 1530 * time.Microsecond, Dir: tape.ToBoard, Bytes: []byte("id 1;09F2\n\x18")},
	{Time: 2100 * time.Microsecond, Dir: tape.Remark, Bytes: []byte("back\\slash\tand \xff\x00\x7f")},
	{Time: time.Hour, Dir: tape.FromBoard, Bytes: []byte{}},
}

// The text is fixed: tapes of today must be readable in ten years.
func TestTextOfATape(t *testing.T) {
	want := `gainwright tape 1 2026-02-03T04:05:06Z
1204 < t 17 1200 d 0 0;5A3C\r\n
1530 > id 1;09F2\n\x18
2100 # back\\slash\tand \xFF\x00\x7F
3600000000 < 
`
	if diff := cmp.Diff(want, string(record(t, sample))); diff != "" {
		t.Error(diff)
	}
}

func TestWhatIsWrittenIsReadBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		records := rapid.SliceOf(rapid.Custom(func(t *rapid.T) tape.Record {
			return tape.Record{
				Time:  time.Duration(rapid.Int64Range(0, 1<<50).Draw(t, "µs")) * time.Microsecond,
				Dir:   rapid.SampledFrom([]tape.Dir{tape.FromBoard, tape.ToBoard, tape.Loss, tape.Remark}).Draw(t, "dir"),
				Bytes: rapid.SliceOf(rapid.Byte()).Draw(t, "bytes"),
			}
		})).Draw(t, "records")
		got, cut := read(t, record(t, records))
		if len(got) != len(records) || cut {
			t.Fatalf("%d records read, cut %v, want %d", len(got), cut, len(records))
		}
		for i, r := range records {
			if got[i].Time != r.Time || got[i].Dir != r.Dir || !bytes.Equal(got[i].Bytes, r.Bytes) {
				t.Fatalf("record %d is %+v, want %+v", i, got[i], r)
			}
		}
	})
}

func all(records []tape.Record) string {
	var s strings.Builder
	for _, r := range records {
		s.WriteByte(byte(r.Dir))
		s.Write(r.Bytes)
	}
	return s.String()
}

// A machine may be switched off at any byte. What stood before is read, as a
// beginning of what was recorded, and the cut is reported.
func TestATapeMayBeCutAtAnyByte(t *testing.T) {
	text := record(t, sample)
	whole := all(sample)
	for n := range len(text) {
		got, cut := read(t, text[:n])
		if !strings.HasPrefix(whole, all(got)) {
			t.Fatalf("cut at %d: %q is no beginning of %q", n, all(got), whole)
		}
		atLineEnd := n > 0 && text[n-1] == '\n'
		if cut == atLineEnd {
			t.Errorf("cut at %d reported as %v", n, cut)
		}
		if complete := bytes.Count(text[:n], []byte("\n")) - 1; len(got) < complete {
			t.Errorf("cut at %d: %d records read of %d complete ones", n, len(got), complete)
		}
	}
	if got, _ := read(t, text[:bytes.Index(text, []byte("1200"))+3]); string(got[0].Bytes) != "t 17 120" {
		t.Errorf("cut in the middle of a record gives %q, want the bytes before it", got[0].Bytes)
	}
}

func TestErrorsCarryTheirPlace(t *testing.T) {
	const head = "gainwright tape 1 2026-02-03T04:05:06Z\n"
	for _, c := range []struct {
		text         string
		line, column int
		want         error
	}{
		{"hello\n", 1, 1, tape.ErrHeader},
		{"hello", 1, 1, tape.ErrHeader},
		{"gainwright tape 2 2026-02-03T04:05:06Z\n", 1, 1, tape.ErrHeader},
		{"gainwright tape 1 yesterday\n", 1, 1, tape.ErrHeader},
		{head + "x < a\n", 2, 1, tape.ErrTime},
		{head + "-1 < a\n", 2, 1, tape.ErrTime},
		{head + "99999999999999999999 < a\n", 2, 1, tape.ErrTime},
		{head + "1\n", 2, 3, tape.ErrDirection},
		{head + "1 < a\n12 = a\n", 3, 4, tape.ErrDirection},
		{head + "12 <\n", 2, 4, tape.ErrDirection},
		{head + "12 < ab\\q\n", 2, 8, tape.ErrEscape},
		{head + "12 < ab\\x1g\n", 2, 8, tape.ErrEscape},
		{head + "12 < ab\\\n", 2, 8, tape.ErrEscape},
		{head + "12 < \xc3\xa9\n", 2, 6, tape.ErrByte},
	} {
		r, err := tape.NewReader(strings.NewReader(c.text))
		if err == nil {
			_, err = r.ReadAll()
		}
		var pe *tape.ParseError
		if !errors.As(err, &pe) || !errors.Is(err, c.want) || pe.Line != c.line || pe.Column != c.column {
			t.Errorf("%q gives %v, want %d:%d: %v", c.text, err, c.line, c.column, c.want)
		}
	}
}

func TestABadLineLosesOnlyItself(t *testing.T) {
	text := "gainwright tape 1 2026-02-03T04:05:06Z\n1 < a\n2 < \\q\n3 < c\n"
	r, err := tape.NewReader(strings.NewReader(text))
	if err != nil || !r.Start.Equal(start) {
		t.Fatalf("start %v, %v", r.Start, err)
	}
	got, err := r.ReadAll()
	if all(got) != "<a<c" || !errors.Is(err, tape.ErrEscape) {
		t.Errorf("read %q, %v; want both good records and the error", all(got), err)
	}
}

// disk is a file that can be slow and full, in virtual time.
type disk struct {
	bytes.Buffer
	slow  time.Duration
	full  bool
	syncs int
}

func (d *disk) Write(p []byte) (int, error) {
	time.Sleep(d.slow)
	if d.full {
		n, _ := d.Buffer.Write(p[:len(p)/2])
		return n, syscall.ENOSPC
	}
	return d.Buffer.Write(p)
}

func (d *disk) Sync() error { d.syncs++; return nil }

func TestAtMostASecondIsLostByAKill(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		d := &disk{}
		w := tape.NewWriter(d, tape.Config{Start: start})
		begin := time.Now()
		for i := range 3000 { // a line every millisecond
			w.Record(time.Since(begin), tape.FromBoard, []byte("t\n"))
			time.Sleep(time.Millisecond)
			if i%100 != 99 {
				continue
			}
			synctest.Wait()
			got, _ := read(t, d.Bytes())
			if i > 1000 && (len(got) == 0 || time.Since(begin)-got[len(got)-1].Time > time.Second) {
				t.Fatalf("at %v %d records are on the disk", time.Since(begin), len(got))
			}
		}
		if d.syncs < 3 {
			t.Errorf("%d syncs in 3 s", d.syncs)
		}
		if err := w.Close(t.Context()); err != nil {
			t.Error(err)
		}
		if got, _ := read(t, d.Bytes()); len(got) != 3000 || w.Stats().Flushed != uint64(d.Len()) {
			t.Errorf("%d records after close, stats %+v", len(got), w.Stats())
		}
	})
}

// A disk that hangs costs records, never time, and the tape says where and how
// many.
func TestASlowDiskCostsRecordsAndSaysSo(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		d := &disk{slow: 10 * time.Second}
		w := tape.NewWriter(d, tape.Config{Start: start})
		time.Sleep(time.Second) // the header hangs on the disk now
		chunk := bytes.Repeat([]byte("x"), 1000)
		begin := time.Now()
		for i := range 2000 {
			w.Record(time.Duration(i), tape.FromBoard, chunk)
		}
		if time.Since(begin) != 0 {
			t.Fatalf("the callers waited %v", time.Since(begin))
		}
		s := w.Stats()
		w.Record(1999, tape.FromBoard, []byte("!")) // would fit, but not in its place
		if now := w.Stats(); now.Records != s.Records {
			t.Fatal("a record was taken after a lost one: the place of the loss is no longer known")
		}
		s = w.Stats()
		if s.Records+s.LostChunks != 2001 || s.LostBytes != 1000*(s.LostChunks-1)+1 || s.Records < 1000 || s.LostChunks < 900 {
			t.Fatalf("stats %+v", s)
		}
		time.Sleep(30 * time.Second)
		w.Record(time.Hour, tape.FromBoard, []byte("after"))
		if err := w.Close(t.Context()); err != nil {
			t.Fatal(err)
		}
		got, _ := read(t, d.Bytes())
		if len(got) != int(s.Records)+2 {
			t.Fatalf("%d records on the tape, want %d, a loss and one after it", len(got), s.Records)
		}
		loss, last := got[s.Records], got[s.Records+1]
		want := fmt.Sprintf("lost %d chunks %d bytes", s.LostChunks, s.LostBytes)
		if loss.Dir != tape.Loss || string(loss.Bytes) != want || string(last.Bytes) != "after" {
			t.Errorf("the tape says %q then %q, want %q then after", loss.Bytes, last.Bytes, want)
		}
	})
}

func TestAFullDiskIsReportedOnce(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		d := &disk{}
		var reported []error
		w := tape.NewWriter(d, tape.Config{Start: start, OnError: func(err error) { reported = append(reported, err) }})
		w.Record(0, tape.FromBoard, []byte("before"))
		time.Sleep(time.Second)
		synctest.Wait()
		d.full = true
		w.Record(1, tape.FromBoard, []byte("never whole"))
		time.Sleep(5 * time.Second)
		w.Record(2, tape.FromBoard, []byte("lost"))
		synctest.Wait()
		if len(reported) != 1 || !errors.Is(reported[0], syscall.ENOSPC) {
			t.Errorf("reported %v, want one disk-full", reported)
		}
		if err := w.Close(t.Context()); !errors.Is(err, syscall.ENOSPC) {
			t.Errorf("close gives %v", err)
		}
		if s := w.Stats(); s.LostChunks != 1 || s.LostBytes != 4 {
			t.Errorf("stats %+v, want the record after the failure counted", s)
		}
		if got, cut := read(t, d.Bytes()); !cut || string(got[0].Bytes) != "before" {
			t.Errorf("tape holds %q, cut %v", all(got), cut)
		}
	})
}

func TestCloseGivesUpOnADiskThatHangs(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		w := tape.NewWriter(&disk{slow: time.Hour}, tape.Config{Start: start})
		ctx, cancel := context.WithTimeout(t.Context(), time.Second)
		defer cancel()
		begin := time.Now()
		if err := w.Close(ctx); !errors.Is(err, context.DeadlineExceeded) || time.Since(begin) != time.Second {
			t.Errorf("close gives %v after %v", err, time.Since(begin))
		}
		time.Sleep(2 * time.Hour) // the disk comes back, the Writer ends
	})
}

func TestTapeOnAFile(t *testing.T) {
	path := filepath.Join(t.TempDir(), "tape")
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	w := tape.NewWriter(f, tape.Config{Start: start})
	w.Remark(time.Second, "stop key")
	if err := w.Close(t.Context()); err != nil {
		t.Error(err)
	}
	f.Close()
	text, _ := os.ReadFile(path)
	if got, _ := read(t, text); len(got) != 1 || all(got) != "#stop key" {
		t.Errorf("file holds %q", text)
	}
}

func TestRecordingAllocatesNothing(t *testing.T) {
	w := tape.NewWriter(io.Discard, tape.Config{})
	defer w.Close(t.Context())
	line := []byte("t 17 1200 d 0 0;5A3C\n")
	for range 30000 { // grow both queues
		w.Record(0, tape.FromBoard, line)
	}
	if n := testing.AllocsPerRun(1000, func() { w.Record(0, tape.FromBoard, line) }); n != 0 {
		t.Errorf("%v allocations a record, want 0", n)
	}
}
