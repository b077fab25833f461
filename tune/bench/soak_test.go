package bench

import (
	"context"
	"io"
	"os"
	"runtime"
	"sync/atomic"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link/tape"
	"gainwright/protocol"
	"gainwright/safety/supervisor"
)

// soaked is how long the soaks last, in virtual time: as long as is asked of them
// with GAINWRIGHT_LONG=1, else a part of it.
func soaked(long, short time.Duration) time.Duration {
	if os.Getenv("GAINWRIGHT_LONG") != "" {
		return long
	}
	return short
}

func heap() uint64 {
	var m runtime.MemStats
	runtime.GC()
	runtime.ReadMemStats(&m)
	return m.HeapAlloc
}

// Eight hours of telemetry at 1 kHz, in virtual time, with views taken thirty times
// a second: nothing is lost, and after the first minute nothing grows.
func TestSoakAtOneKilohertz(t *testing.T) {
	s := &session{opened: true}
	s.core = supervisor.NewCore(&virtualWire{baud: 921600, now: func() time.Duration { return s.now }}, s, 1)
	s.core.Streaming(0, true)
	length := soaked(8*time.Hour, 20*time.Minute)
	var chunk []byte
	var first uint64
	seq, us := 0, 0
	for s.now < length {
		chunk = chunk[:0]
		for range 10 {
			seq, us = seq+1, us+1000
			chunk = protocol.AppendFast(chunk, protocol.RawFast{Seq: uint8(seq), TimeUS: uint32(us) & 0xFFFFFF, Speed: int16(seq & 63)})
		}
		s.now += 10 * time.Millisecond
		s.core.Bytes(s.now, chunk)
		s.core.Tick(s.now)
		if seq%330 == 0 {
			_ = s.snapshot()
		}
		if s.now == time.Minute {
			first = heap()
		}
	}
	l := s.core.Link()
	if l.Lost || l.Stats.Samples != uint64(seq) || l.Stats.Lost+l.Stats.Stale+l.Stats.BadLines != 0 {
		t.Errorf("after %v: %d of %d samples, %+v", length, l.Stats.Samples, seq, l.Stats)
	}
	if last := heap(); last > first+1<<20 {
		t.Errorf("%d kB after a minute, %d kB after %v", first>>10, last>>10, length)
	} else {
		t.Logf("%d samples; %d kB after a minute, %d kB after %v", seq, first>>10, last>>10, length)
	}
}

// counter is a disk that only counts.
type counter struct{ lines atomic.Int64 }

func (c *counter) Write(b []byte) (int, error) {
	for _, x := range b {
		if x == '\n' {
			c.lines.Add(1)
		}
	}
	return len(b), nil
}

// A day of tape at 100 chunks a second, in virtual time, without a loss.
func TestTapeOfADay(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		disk := &counter{}
		w := tape.NewWriter(struct{ io.Writer }{disk}, tape.Config{Start: time.Unix(0, 0)})
		chunk := []byte("T0102030405060708090A0B\nT0202030405060708090A0B\n")
		n := int64(0)
		for at := time.Duration(0); at < soaked(24*time.Hour, 20*time.Minute); at += 10 * time.Millisecond {
			w.Record(at, tape.FromBoard, chunk)
			n++
			time.Sleep(10 * time.Millisecond)
		}
		if err := w.Close(context.Background()); err != nil {
			t.Fatal(err)
		}
		if got := disk.lines.Load(); got < n || got > n+20 {
			t.Errorf("%d lines for %d chunks", got, n)
		}
		if lost := w.Stats().LostChunks; lost != 0 {
			t.Errorf("%d are lost", lost)
		}
	})
}
