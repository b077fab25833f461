package supervisor

import (
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
)

type benchWire struct{}

func (benchWire) Stop([]byte) uint64   { return 0 }
func (benchWire) Motion([]byte) error  { return nil }
func (benchWire) Request([]byte) error { return nil }

type benchSink struct{ n int }

func (s *benchSink) Sample(time.Duration, protocol.Sample) { s.n++ }
func (s *benchSink) Effect(time.Duration, safety.Effect)   {}
func (s *benchSink) Event(time.Duration, string)           {}
func (s *benchSink) BoardStop(time.Duration, LogEntry)     {}
func (s *benchSink) Restarted(time.Duration, int, string)  {}
func (s *benchSink) Stopped(StopTimes)                     {}

// BenchmarkSample is a telemetry line on its way through framer and limiter.
func BenchmarkSample(b *testing.B) {
	sink := &benchSink{}
	c := NewCore(benchWire{}, sink, 1)
	c.Streaming(0, true)
	var text []byte
	const lines = 256
	now, us := time.Duration(0), 0
	b.ReportAllocs()
	for range b.N {
		text = text[:0]
		for i := range lines {
			us += 1000
			text = protocol.AppendFast(text, protocol.RawFast{Seq: uint8(i), TimeUS: uint32(us) & 0xFFFFFF})
		}
		b.StopTimer()
		b.StartTimer()
		now += lines * time.Millisecond
		c.Bytes(now, text)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/lines, "ns/line")
	if sink.n != b.N*lines {
		b.Fatalf("%d of %d samples", sink.n, b.N*lines)
	}
}
