package bench

import (
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"gainwright/link"
	"gainwright/protocol"
	"gainwright/tune/job"
)

// A fault in any goroutine of ours puts the cut byte on the wire before anybody
// is told of it.
func TestAFaultCutsFirst(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		near, far := link.Pipe()
		var got strings.Builder
		go func() {
			buf := make([]byte, 256)
			for {
				n, err := far.Read(buf)
				got.Write(buf[:n])
				if err != nil {
					return
				}
			}
		}()
		told := ""
		l := NewLive(Options{
			Open:    func(string) (Opened, error) { return Opened{Port: near, Baud: 115200}, nil },
			OnPanic: func(v any, _ []byte) { synctest.Wait(); told = got.String() },
		})
		l.Connect("memory")
		time.Sleep(100 * time.Millisecond)
		if strings.IndexByte(got.String(), protocol.Cut) >= 0 {
			t.Fatalf("a stop without a reason: %q", got.String())
		}
		l.panicked("a fault", nil)
		if strings.IndexByte(told, protocol.Cut) < 0 {
			t.Errorf("when the fault was told the line had %q", told)
		}
		l.Post(job.Quit{})
		if _, err := l.Close(); err != nil {
			t.Error(err)
		}
		far.Close()
	})
}
