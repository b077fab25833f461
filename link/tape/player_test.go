package tape_test

import (
	"errors"
	"io"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/link/tape"
)

func TestReplayKeepsTimeAndDirection(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := tape.NewPlayer([]tape.Record{
			{Time: 10 * time.Millisecond, Dir: tape.ToBoard, Bytes: []byte("id 1\n")},
			{Time: 2 * time.Second, Dir: tape.FromBoard, Bytes: []byte("ok 1\n")},
			{Time: 2 * time.Second, Dir: tape.Remark, Bytes: []byte("not the board")},
			{Time: 3 * time.Second, Dir: tape.FromBoard, Bytes: []byte("t 1\n")},
		})
		begin := time.Now()
		var got string
		var times []time.Duration
		r := link.NewReader(p, link.ReaderConfig{OnBytes: func(_ time.Duration, b []byte) {
			got += string(b)
			times = append(times, time.Since(begin))
		}})
		if err := r.Run(t.Context()); !errors.Is(err, io.EOF) {
			t.Errorf("Run gives %v, want EOF at the end of the tape", err)
		}
		if got != "ok 1\nt 1\n" || len(times) != 2 || times[0] != 2*time.Second || times[1] != 3*time.Second {
			t.Errorf("got %q at %v", got, times)
		}
		p.Write([]byte("go"))
		if string(p.Sent()) != "go" {
			t.Errorf("sent %q", p.Sent())
		}
	})
}

func TestFastReplayDoesNotWaitAndSplitsByTheReader(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		p := tape.NewPlayer([]tape.Record{{Time: time.Hour, Dir: tape.FromBoard, Bytes: []byte("abc")}})
		p.Fast = true
		begin := time.Now()
		buf := make([]byte, 2)
		n1, _ := p.Read(buf)
		n2, _ := p.Read(buf)
		if n1 != 2 || n2 != 1 || buf[0] != 'c' || time.Since(begin) != 0 {
			t.Errorf("read %d then %d, last %q, after %v", n1, n2, buf[0], time.Since(begin))
		}
		p.Close()
		if _, err := p.Write(nil); err == nil {
			t.Error("write after close succeeds")
		}
		if _, err := p.Read(buf); !errors.Is(err, io.ErrClosedPipe) {
			t.Errorf("read after close gives %v", err)
		}
	})
}
