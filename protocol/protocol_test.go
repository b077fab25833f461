package protocol

import (
	"bytes"
	"fmt"
	"math/rand/v2"
	"testing"
	"time"
)

// The check value of CRC-16/CCITT-FALSE is that of the catalogue of parametrised
// CRC algorithms (from memory): 29B1 over "123456789".
func TestCRCCheckValue(t *testing.T) {
	if got := CRC16([]byte("123456789")); got != 0x29B1 {
		t.Fatalf("CRC16 = %04X, want 29B1", got)
	}
	bit := func(b []byte) uint16 { // the definition, bit by bit
		r := uint16(0xFFFF)
		for _, c := range b {
			for i := 7; i >= 0; i-- {
				top := r >> 15 & 1
				r <<= 1
				if uint16(c>>i&1) != top {
					r ^= 0x1021
				}
			}
		}
		return r
	}
	rng := rand.New(rand.NewPCG(1, 2))
	for n := range 300 {
		b := make([]byte, n)
		for i := range b {
			b[i] = byte(rng.Uint32())
		}
		if CRC16(b) != bit(b) {
			t.Fatalf("length %d: %04X, bit by bit %04X", n, CRC16(b), bit(b))
		}
	}
}

type seen struct {
	samples []Sample
	lines   []string
	bad     []string
}

func (s *seen) Sample(x Sample)           { s.samples = append(s.samples, x) }
func (s *seen) Line(b []byte)             { s.lines = append(s.lines, string(b)) }
func (s *seen) Bad(raw []byte, err error) { s.bad = append(s.bad, fmt.Sprintf("%q %v", raw, err)) }

func stream(rng *rand.Rand) []byte {
	var b []byte
	for i := range 300 {
		if i%3 == 0 {
			b = AppendExtra(b, RawExtra{Seq: uint8(i), Current: int16(i), Bus: 2400, Setpoint: 7, Counts: uint16(i * 700)})
		}
		if i%50 == 0 {
			b = AppendSlow(b, RawSlow{Seq: uint8(i), Temp: TempUnknown, Boots: 4, Heat: 255})
		}
		b = AppendFast(b, RawFast{Seq: uint8(i), TimeUS: uint32(i*5000) & 0xFFFFFF, State: Driving, Speed: int16(rng.Uint32()), Volts: -1234})
		switch rng.IntN(12) {
		case 0:
			b = AppendLine(b, []byte("ev off 1 12345"))
		case 1:
			b = append(b, "garbage\r\n"...)
		case 2:
			b = append(b, 0x80, 0x07, '\n')
		case 3:
			b = append(b, bytes.Repeat([]byte{'x'}, 300)...)
			b = append(b, '\n')
		case 4:
			b = append(b, '\r', '\n')
		}
	}
	return b
}

func TestEveryCutGivesTheSameFrames(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	b := stream(rng)
	var whole seen
	var f Framer
	f.Feed(b, &whole)
	if f.Stats.Samples != 300 || len(whole.bad) == 0 || len(whole.lines) == 0 {
		t.Fatalf("stats %+v, %d bad, %d lines", f.Stats, len(whole.bad), len(whole.lines))
	}
	want := fmt.Sprint(whole)
	for try := range 200 {
		var got seen
		var f Framer
		rest := b
		for len(rest) > 0 {
			n := 1 + rng.IntN(1+try)
			n = min(n, len(rest))
			f.Feed(rest[:n], &got)
			rest = rest[n:]
		}
		if fmt.Sprint(got) != want {
			t.Fatalf("chunks of up to %d bytes give other frames", 1+try)
		}
	}
}

func TestCorruptionNeverBecomesASample(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	good := AppendFast(nil, RawFast{Seq: 9, TimeUS: 77, State: Looping, Speed: 300, Volts: 500})
	for i := range good[:HexLine-1] {
		for range 20 {
			b := bytes.Clone(good)
			b[i] ^= byte(1 + rng.IntN(255))
			var s seen
			var f Framer
			f.Feed(b, &s)
			f.Feed([]byte("\n"), &s)
			if len(s.samples) != 0 {
				t.Fatalf("byte %d of %q changed and still a sample: %q", i, good, b)
			}
		}
	}
}

func TestSequence(t *testing.T) {
	var s seen
	var f Framer
	for _, n := range []uint8{250, 251, 251, 253, 252, 2, 1, 3} {
		f.Feed(AppendFast(nil, RawFast{Seq: n, TimeUS: uint32(n) * 1000}), &s)
	}
	if f.Stats.Samples != 5 || f.Stats.Stale != 3 || f.Stats.Lost != 1+4 {
		t.Fatalf("%+v: want 5 samples, 3 stale, 5 lost", f.Stats)
	}
}

func TestTimeAndCountsUnwrap(t *testing.T) {
	var s seen
	var f Framer
	var us uint64 = 0xFFFF00
	for i := range 3000 {
		f.Feed(AppendExtra(nil, RawExtra{Seq: uint8(i), Counts: uint16(40000 - 9000*i)}), &s)
		f.Feed(AppendFast(nil, RawFast{Seq: uint8(i), TimeUS: uint32(us) & 0xFFFFFF}), &s)
		us += 20_000
	}
	a, b := s.samples[0], s.samples[2999]
	if got := b.BoardUS - a.BoardUS; got != 2999*20_000 {
		t.Errorf("board time ran %d µs, want %d", got, 2999*20_000)
	}
	if got := b.Counts - a.Counts; got != -9000*2999 {
		t.Errorf("counts ran %d, want %d", got, -9000*2999)
	}
}

func TestBothFormsAgree(t *testing.T) {
	sc := Scales{SpeedLSB: 0.05, VoltsLSB: 0.001, CurrentLSB: 0.002, BusLSB: 0.01}
	fast := RawFast{Seq: 3, TimeUS: 123456, State: Driving, Saturated: true, Speed: -2345, Volts: 6001}
	extra := RawExtra{Seq: 3, Current: -120, Bus: 2412, Setpoint: 900, Counts: 17}
	var a, b seen
	fa, fb := Framer{Scales: sc}, Framer{Scales: sc}
	fa.Feed(AppendFast(AppendExtra(nil, extra), fast), &a)
	text := AppendFastText(AppendExtraText(nil, extra, sc), fast, sc)
	fb.Feed(text, &b)
	if len(a.samples) != 1 || len(b.samples) != 1 || a.samples[0] != b.samples[0] {
		t.Fatalf("hex %+v\ntext %+v (%v)", a.samples, b.samples, b.bad)
	}
	for _, l := range bytes.SplitAfter(AppendFastText(nil, RawFast{Seq: 255, TimeUS: 1<<24 - 1, State: Looping, Speed: -32767, Volts: -32767}, Scales{SpeedLSB: 1, VoltsLSB: 0.01}), []byte("\n")) {
		if len(l) > 64 {
			t.Errorf("decimal line of %d bytes: %q", len(l), l)
		}
	}
	if n := len(AppendFast(nil, fast)); n != HexLine {
		t.Errorf("hex line of %d bytes", n)
	}
}

func TestFramerAllocatesNothing(t *testing.T) {
	b := AppendFast(AppendExtra(nil, RawExtra{}), RawFast{})
	var f Framer
	h := &countHandler{}
	if n := testing.AllocsPerRun(1000, func() { f.Feed(b, h) }); n != 0 {
		t.Errorf("%v allocations a sample", n)
	}
}

type countHandler struct{ n int }

func (c *countHandler) Sample(Sample)         { c.n++ }
func (c *countHandler) Line([]byte)           {}
func (c *countHandler) Bad(_ []byte, _ error) {}

func FuzzFramer(f *testing.F) {
	f.Add(stream(rand.New(rand.NewPCG(7, 8))), uint8(3))
	f.Fuzz(func(t *testing.T, b []byte, cut uint8) {
		var x, y seen
		var fx, fy Framer
		fx.Feed(b, &x)
		n := int(cut) % (len(b) + 1)
		fy.Feed(b[:n], &y)
		fy.Feed(b[n:], &y)
		if fmt.Sprint(x) != fmt.Sprint(y) || fx.Stats != fy.Stats {
			t.Fatal("a cut changes the frames")
		}
	})
}

func TestExchangeRepeatsAndMatches(t *testing.T) {
	x := NewExchange(65535)
	if err := x.Offer(Request{Verb: "nonce"}); err != nil {
		t.Fatal(err)
	}
	if err := x.Offer(Request{Verb: "lim", Args: "crc"}); err != nil {
		t.Fatal(err)
	}
	first, _ := x.Tick(0)
	if again, _ := x.Tick(100 * time.Millisecond); again != nil {
		t.Fatalf("repeated after 100 ms: %q", again)
	}
	second, _ := x.Tick(250 * time.Millisecond)
	if !bytes.Equal(first, second) {
		t.Fatalf("the repeat %q differs from %q", second, first)
	}
	if a, _ := x.Line(0, []byte("ok 65534 11")); a != nil {
		t.Fatal("an answer to another number was taken")
	}
	a, known := x.Line(300*time.Millisecond, []byte("ok 65535 0A0B0C0D"))
	if a == nil || !known || a.Field(0) != "0A0B0C0D" || a.Tries != 2 {
		t.Fatalf("answer %+v", a)
	}
	next, _ := x.Tick(301 * time.Millisecond)
	if !bytes.HasPrefix(next, []byte("lim 1 crc;")) {
		t.Fatalf("next request %q: numbers go from 65535 to 1", next)
	}
	for at := 301 * time.Millisecond; ; at += 10 * time.Millisecond {
		if _, done := x.Tick(at); done != nil {
			if done.Err != ErrNoAnswer || done.Tries != 4 {
				t.Fatalf("%+v", done)
			}
			break
		}
	}
}

func TestExchangeAsksAgainForLostIdentityLines(t *testing.T) {
	x := NewExchange(7)
	x.Offer(Request{Verb: VerbID})
	x.Tick(0)
	x.Line(1, []byte("id proto 1.0"))
	if a, _ := x.Line(2, []byte("ok 7 2")); a != nil {
		t.Fatal("took an identity with a line missing")
	}
	if l, _ := x.Tick(time.Second); l == nil {
		t.Fatal("did not ask again")
	}
	x.Line(1001, []byte("id proto 1.0"))
	x.Line(1002, []byte("id board AB12"))
	a, _ := x.Line(1003, []byte("ok 7 2"))
	if a == nil || len(a.Lines) != 2 {
		t.Fatalf("%+v", a)
	}
	id, err := ParseIdentity(a.Lines)
	if err != nil || id.Board != "AB12" || id.ProtoMajor != 1 {
		t.Fatalf("%+v %v", id, err)
	}
}

func TestIdentityNamesTheBadLine(t *testing.T) {
	_, err := ParseIdentity([]string{"proto 1.0", "loop 1000", "scale 3F800000 xyz 0 0"})
	if err == nil || err.(*IdentityError).Line != "scale 3F800000 xyz 0 0" {
		t.Fatalf("%v", err)
	}
	id, err := ParseIdentity([]string{"proto 2.0", "colour blue"})
	if err != nil || id.LookOnly() == "" || len(id.UnknownID) != 1 {
		t.Fatalf("%+v %v", id, err)
	}
}

func TestDriveRoundsTowardsZero(t *testing.T) {
	for _, c := range []struct {
		v    float64
		want string
	}{{6, "dv 5 00AB 6000"}, {1.9999, "dv 5 00AB 1999"}, {-1.9999, "dv 5 00AB -1999"}, {0.29, "dv 5 00AB 290"}, {-0.0004, "dv 5 00AB 0"}} {
		if got := AppendDriveVolts(nil, 5, 0xAB, c.v); !bytes.HasPrefix(got, []byte(c.want+";")) {
			t.Errorf("%v V: %q, want %q", c.v, got, c.want)
		}
	}
}

func TestNewer(t *testing.T) {
	for _, c := range []struct {
		k, last uint16
		want    bool
	}{{1, 0, true}, {0, 65535, true}, {5, 5, false}, {4, 5, false}, {40000, 1, false}, {32768, 1, true}} {
		if Newer(c.k, c.last) != c.want {
			t.Errorf("Newer(%d, %d) = %v", c.k, c.last, !c.want)
		}
	}
}

// Integer gains need the unit of each; without it such a board is look-only.
func TestIntegerGainsNeedTheirUnits(t *testing.T) {
	lines := []string{"proto 1.0", "board b", "boot 1 power", "loop 1000", "num int", "gains kp ki", "limits vmax wmax beat",
		"scale 3F800000 3F800000 00000000 00000000"}
	id, err := ParseIdentity(lines)
	if err != nil || id.LookOnly() == "" {
		t.Errorf("without units: %v, %q", err, id.LookOnly())
	}
	id, err = ParseIdentity(append(lines, "glsb 37800000", "glsb 35800000")) // 2⁻¹⁶, 2⁻²⁰
	if err != nil || id.LookOnly() != "" || len(id.GainLSB) != 2 || id.GainLSB[0] != 1.0/65536 || id.GainLSB[1] != 1.0/1048576 {
		t.Errorf("with units: %v, %q, %v", err, id.LookOnly(), id.GainLSB)
	}
	if id, _ = ParseIdentity(append(lines, "glsb 37800000 00000000")); id.LookOnly() == "" {
		t.Error("a unit of nothing is taken")
	}
	if _, err = ParseIdentity(append(lines, "glsb 37800000 xyz")); err == nil {
		t.Error("a unit that is no number is taken")
	}
}
