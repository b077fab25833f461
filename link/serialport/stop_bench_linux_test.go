package serialport

import (
	"context"
	"io"
	"os"
	"slices"
	"syscall"
	"testing"
	"time"

	"gainwright/link"
	"gainwright/link/ptyport"
)

// Stop to stop byte at the far end of a pseudo-terminal: the floor is a bare
// write to the device, the rest goes through Writer and Port. Compare the two
// within one run; single figures depend on the machine.
//
//	go test -run xxx -bench StopToWire ./link/serialport
func BenchmarkStopToWire(b *testing.B) {
	b.Run("floor", func(b *testing.B) {
		m, path := benchPTY(b)
		f, err := os.OpenFile(path, os.O_RDWR|syscall.O_NOCTTY, 0)
		if err != nil {
			b.Fatal(err)
		}
		defer f.Close()
		measureStop(b, m, func() { f.Write([]byte{0x18}) })
	})
	b.Run("writer", func(b *testing.B) {
		m, path := benchPTY(b)
		p, err := Open(path, 115200)
		if err != nil {
			b.Fatal(err)
		}
		defer p.Close()
		w := link.NewWriter(p, link.Config{Baud: 115200})
		ctx, cancel := context.WithCancel(b.Context())
		defer cancel()
		go w.Run(ctx)
		measureStop(b, m, func() { w.Stop([]byte{0x18}) })
	})
}

func benchPTY(b *testing.B) (io.Reader, string) {
	m, path, err := ptyport.Open()
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() { m.Close() })
	return m, path
}

func measureStop(b *testing.B, far io.Reader, stop func()) {
	var one [1]byte
	times := make([]time.Duration, 0, 1<<16)
	for b.Loop() {
		began := time.Now()
		stop()
		if _, err := io.ReadFull(far, one[:]); err != nil {
			b.Fatal(err)
		}
		times = append(times, time.Since(began))
	}
	slices.Sort(times)
	b.ReportMetric(float64(times[len(times)/2])/1e3, "µs-p50")
	b.ReportMetric(float64(times[len(times)*99/100])/1e3, "µs-p99")
}
