package link_test

import (
	"io"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/link/linktest"
)

func TestPipeKeepsTheContract(t *testing.T) {
	if err := linktest.CheckPort(func() (link.Port, link.Port, error) {
		a, b := link.Pipe()
		return a, b, nil
	}); err != nil {
		t.Error(err)
	}
}

func TestPipeTimes(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		a, b := link.Pipe()
		start := time.Now()
		if n, err := a.Read(make([]byte, 1)); n != 0 || err != nil || time.Since(start) != link.PipeTimeout {
			t.Errorf("idle read gives %d, %v after %v, want 0, nil after %v", n, err, time.Since(start), link.PipeTimeout)
		}
		wrote := make(chan int, 1)
		go func() {
			n, _ := a.Write(make([]byte, link.PipeSize+1))
			wrote <- n
		}()
		synctest.Wait()
		if len(wrote) != 0 {
			t.Error("write of more than the pipe holds did not block")
		}
		b.Read(make([]byte, 1))
		if n := <-wrote; n != link.PipeSize+1 {
			t.Errorf("write gives %d", n)
		}
		b.Close()
		if n, err := io.ReadAll(b); len(n) != link.PipeSize || err != nil {
			t.Errorf("after close %d bytes, %v; want the %d that were under way", len(n), err, link.PipeSize)
		}
	})
}

// LineTime against the figures of the trade: 8N1 at 9600 baud carries 960
// bytes a second, at 115200 11 520, so a 4096-byte buffer takes 356 ms.
func TestLineTime(t *testing.T) {
	for _, c := range []struct {
		n, baud int
		want    time.Duration
	}{
		{960, 9600, time.Second},
		{11520, 115200, time.Second},
		{4096, 115200, 355555555 * time.Nanosecond},
		{1, 0, 0},
		{0, 9600, 0},
	} {
		if got := link.LineTime(c.n, c.baud); got != c.want {
			t.Errorf("LineTime(%d, %d) = %v, want %v", c.n, c.baud, got, c.want)
		}
	}
}
