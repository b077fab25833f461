package protocol

import (
	"bytes"
	"testing"
	"time"
)

// benchLines is a recording of n fast lines.
func benchLines(n int) []byte {
	var b []byte
	for i := range n {
		b = AppendFast(b, RawFast{Seq: uint8(i), TimeUS: uint32(i*1000) & 0xFFFFFF, State: 3, Speed: int16(i * 7), Volts: int16(i * 3)})
	}
	return b
}

type benchSink struct{ sum float64 }

func (s *benchSink) Sample(x Sample)       { s.sum += float64(x.Speed) + float64(x.Volts) }
func (s *benchSink) Line([]byte)           {}
func (s *benchSink) Bad(_ []byte, e error) { panic(e) }

// handSample is what the decoder by hand makes of a line: the same values.
type handSample struct {
	seq                uint8
	us                 uint64
	state              uint8
	saturated, tripped bool
	speed, volts       float64
}

// byHand decodes such lines and nothing else: every line is 24 bytes, in order,
// of one kind, without options, slow values or a handler. It is what cannot be
// left out: the digits, the same CRC, the sequence, the scales.
func byHand(b []byte, lsb float64) (sum float64, lost int) {
	var digit [256]uint8
	for i, c := range []byte("0123456789ABCDEF") {
		digit[c] = uint8(i)
	}
	hex := func(p []byte) (v uint32) {
		for _, c := range p {
			v = v<<4 | uint32(digit[c])
		}
		return v
	}
	var last, now handSample
	for first := true; len(b) >= HexLine; b = b[HexLine:] {
		line := b[:HexLine-1]
		if uint16(hex(line[19:23])) != CRC16(line[:19]) {
			lost++
			continue
		}
		us, flags := hex(line[3:9]), hex(line[9:11])
		now = handSample{seq: uint8(hex(line[1:3])), us: last.us + uint64((us-uint32(last.us))&0xFFFFFF),
			state: uint8(flags & 7), saturated: flags&8 != 0, tripped: flags&16 != 0,
			speed: float64(int16(hex(line[11:15]))) * lsb, volts: float64(int16(hex(line[15:19]))) * lsb}
		if !first && now.seq-last.seq != 1 {
			lost++
		}
		first, last = false, now
		sum += now.speed + now.volts
	}
	return sum, lost
}

// BenchmarkDecode is the whole way of a telemetry line in memory, against the
// decoder by hand in the same run. Wanted: ratio 1.5 at most, no allocation.
func BenchmarkDecode(b *testing.B) {
	const lines = 5120
	data := benchLines(lines)
	var f Framer
	var sink benchSink
	f.Feed(data, &sink)
	if sum, lost := byHand(data, 1); lost != 0 || sum != sink.sum || f.Stats.Samples != lines {
		b.Fatalf("the two disagree: %v and %v, lost %d", sum, sink.sum, lost)
	}
	b.ReportAllocs()
	b.SetBytes(int64(len(data)))
	var mine, hand time.Duration
	for range b.N {
		t0 := time.Now()
		for c := data; len(c) > 0; { // in reads of 4096 bytes, cut anywhere
			n := min(4096, len(c))
			f.Feed(c[:n], &sink)
			c = c[n:]
		}
		t1 := time.Now()
		byHand(data, 1)
		mine += t1.Sub(t0)
		hand += time.Since(t1)
	}
	b.ReportMetric(float64(mine.Nanoseconds())/float64(b.N)/lines, "ns/line")
	b.ReportMetric(float64(hand.Nanoseconds())/float64(b.N)/lines, "ns/line-by-hand")
	b.ReportMetric(float64(mine)/float64(hand), "ratio")
}

// The two of the benchmark agree, and the framer's way allocates nothing.
func TestDecoderByHandAgrees(t *testing.T) {
	data := benchLines(1000)
	var f Framer
	var sink benchSink
	f.Feed(data, &sink)
	sum, lost := byHand(data, 1)
	if sum != sink.sum || lost != 0 {
		t.Errorf("by hand %v with %d lost, framer %v", sum, lost, sink.sum)
	}
	if n := testing.AllocsPerRun(10, func() { f.Feed(data, &sink) }); n != 0 {
		t.Errorf("%v allocations for 1000 lines", n)
	}
	if !bytes.Equal(data[:HexLine], benchLines(1)) {
		t.Error("the recording is not what it says")
	}
}

// Eight digits at once are what one digit after another says, for every byte in
// every place; lower case and everything else is refused.
func TestHexInOneWord(t *testing.T) {
	for at := range 8 {
		for c := range 256 {
			p := []byte("90AF5B3C")
			p[at] = byte(c)
			want, ok := parseHex(p)
			got, bad := hex8(p)
			if (bad == 0) != ok || ok && uint64(got) != uint64(want) {
				t.Errorf("%q: %x, bad %x; one by one %x, %v", p, got, bad, want, ok)
			}
		}
	}
}
