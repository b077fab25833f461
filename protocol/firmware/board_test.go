package firmware_test

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"

	"gainwright/protocol"
)

func TestIdentity(t *testing.T) {
	b := start(t, "float")
	if l := b.take(); len(l) != 1 || l[0] != "ev boot 1 power" {
		t.Errorf("first lines %q (P9.1)", l)
	}
	b.send([]byte("id\r\n"))
	b.run(150)
	lines := b.take()
	last := lines[len(lines)-1]
	if last != fmt.Sprintf("ok 0 %d", len(lines)-1) {
		t.Errorf("the bare form ends with %q after %d lines (P4.1)", last, len(lines)-1)
	}
	var keys []string
	for _, l := range lines[:len(lines)-1] {
		keys = append(keys, strings.TrimPrefix(l, "id "))
	}
	id, err := protocol.ParseIdentity(keys)
	if err != nil {
		t.Fatal(err)
	}
	if why := id.LookOnly(); why != "" || len(id.UnknownID) != 0 {
		t.Errorf("look-only %q, unknown %q", why, id.UnknownID)
	}
	if !slices.Equal(id.LimitNames, limitNames) || !slices.Equal(id.GainNames, gainNames) {
		t.Errorf("limits %q, gains %q", id.LimitNames, id.GainNames)
	}
	if id.Loop.Microseconds() != 1000 || id.WindowLoops != 5 || id.CountsPerTurn != 2000 || id.Boots != 1 || !id.Can("capture") {
		t.Errorf("%+v", id)
	}
	// Speed: one count a window, in quarters: 2π/2000 rad in 5 ms, over 4.
	for _, c := range [][2]float64{{id.Scales.SpeedLSB, scales.SpeedLSB}, {id.Scales.VoltsLSB, scales.VoltsLSB},
		{id.Scales.CurrentLSB, scales.CurrentLSB}, {id.Scales.BusLSB, scales.BusLSB}} {
		if math.Abs(c[0]/c[1]-1) > 1e-6 {
			t.Errorf("scales %+v, want %+v", id.Scales, scales)
		}
	}
	got := b.must("ok", "id", "")
	if got != strconv.Itoa(len(keys)) {
		t.Errorf("the numbered form counts %s lines, the bare one %d", got, len(keys))
	}
}

func TestBareLinesAndBadOnes(t *testing.T) {
	b := start(t, "float")
	b.take()
	for _, c := range []struct{ name, send, want string }{
		{"bare stop answers as the cut byte", "stop\n", "cut 1 "},
		{"wrong CRC", "nonce 5;0000\n", "no 0 1 "},
		{"no CRC", "nonce 5\n", "no 0 1 "},
		{"lower-case CRC", strings.ToLower(string(protocol.AppendRequest(nil, "lim", 6, "crc"))), "no 0 1 "},
		{"too long", strings.Repeat("x", 128) + "\n", "no 0 2 "},
		{"longest that is allowed, bad CRC", strings.Repeat("x", 127) + "\n", "no 0 1 "},
		{"8-bit garbage", "\x80\xff\x07\n", "no 0 1 "},
		{"unknown verb", string(protocol.AppendRequest(nil, "sing", 7, "")), "no 7 3 "},
		{"empty line", "\r\n", ""},
		{"number that cannot be read", string(protocol.AppendLine(nil, []byte("nonce 007"))), ""},
		{"number 0", string(protocol.AppendLine(nil, []byte("nonce 0"))), ""},
		{"no number", string(protocol.AppendLine(nil, []byte("nonce"))), ""},
		{"two spaces", string(protocol.AppendLine(nil, []byte("nonce  5"))), ""},
	} {
		b.send([]byte(c.send))
		b.run(60)
		got := strings.Join(b.take(), "|")
		if !strings.HasPrefix(got, c.want) || (c.want == "" && got != "") || strings.Contains(got, "|") {
			t.Errorf("%s: %q answered %q, want %q (P1, P3)", c.name, c.send, got, c.want)
		}
	}
	for range 5 { // five bad lines within 3 ms: P1.4
		b.now([]byte("bad\n"))
		b.run(0.5)
	}
	b.run(50)
	if got := b.take(); len(got) != 1 {
		t.Errorf("%d answers to bad lines within 10 ms: %q", len(got), got)
	}
	b.send([]byte("tel\n"))
	b.run(30)
	if s := b.takeSamples(); len(s) != 1 || s[0].State != protocol.Off || s[0].Has&protocol.HasBus == 0 {
		t.Errorf("tel gave %+v", s)
	}
	if got := b.ask("tel", ""); got != "ok" || len(b.takeSamples()) != 1 {
		t.Errorf("numbered tel: %q", got)
	}
}

func TestLimitsAreHeldAndReadBack(t *testing.T) {
	b := start(t, "float")
	nonce := b.must("ok", "nonce", "")
	crc := b.must("ok", "lim", "crc")[:4]
	b.must("no 16", "arm", nonce+" "+crc) // P12.2: none was put in use
	set := limitSet(map[string]float64{"wmax": 123.456, "amax": 1e5, "heat": 12})
	b.putLimits(set)
	for i, name := range limitNames {
		b.must(fmt.Sprintf("ok %d %s %08X", i, name, set[i]), "lim", fmt.Sprintf("get %d", i))
	}
	for _, c := range []struct{ args, want, why string }{
		{"set 0 41C80000", "no 8", "25 V over the hard 24 V"},
		{"set 0 7FC00000", "no 4", "not a number"},
		{"set 0 7F800000", "no 4", "infinite"},
		{"set 0 BF800000", "no 4", "negative"},
		{"set 0 80000000", "no 4", "minus zero"},
		{"set 0 00000000", "no 4", "zero where zero is refused"},
		{"set 2 00000000", "ok 2", "zero where it means not judged"},
		{"set 13 3C23D70A", "no 8", "a heartbeat timeout of 10 ms is under the range"},
		{"set 13 40000000", "no 8", "one of 2 s is over it"},
		{"set 15 3F800000", "no 4", "no such slot"},
		{"set 1 43480000 7", "no 4", "one word too many"},
		{"use 0000", "no 14", "CRC of another set"},
		{"get 15", "no 4", "no such slot"},
		{"keep 3", "no 4", "no such order"},
	} {
		if got := b.ask("lim", c.args); !strings.HasPrefix(got, c.want) {
			t.Errorf("lim %s (%s): %q, want %q", c.args, c.why, got, c.want)
		}
	}
	b.must(fmt.Sprintf("ok %04X 15", protocol.SetCRC(set)), "lim", "crc")
	b.arm()
	b.must("no 5", "lim", "set 0 41200000")
	b.must("no 5", "lim", fmt.Sprintf("use %04X", b.limits))
	b.must("no 5", "gain", "set 0 41200000")
}

func TestArming(t *testing.T) {
	b := start(t, "float")
	b.putLimits(limitSet(nil))
	seen := map[string]bool{}
	nonce := func() string {
		n := b.must("ok", "nonce", "")
		if seen[n] {
			t.Fatalf("one-time number %s came twice", n)
		}
		seen[n] = true
		return n
	}
	arm := func(n string) string { return b.ask("arm", fmt.Sprintf("%s %04X", n, b.limits)) }
	wantOld := func(why, got string) {
		t.Helper()
		if !strings.HasPrefix(got, "no 6") {
			t.Errorf("%s: %q, want no 6", why, got)
		}
	}
	wantOld("no number was given out", arm("12345678"))
	n := nonce()
	b.run(2100)
	wantOld("older than 2 s", arm(n))
	n = nonce()
	b.send([]byte{protocol.Cut})
	wantOld("after a cut", arm(n))
	n = nonce()
	wantOld("another number", arm("00000000"))
	wantOld("used up by the refusal before", arm(n))
	old := nonce()
	nonce()
	wantOld("a newer one was given out", arm(old))
	n = nonce()
	b.must("no 16", "arm", fmt.Sprintf("%s %04X", n, b.limits^1))
	b.set(setInputs, 1)
	b.must("no 11", "arm", fmt.Sprintf("%s %04X", nonce(), b.limits))
	b.set(setInputs, 3)
	b.set(setKick, 50_000)
	b.run(10)
	b.must("no 10", "arm", fmt.Sprintf("%s %04X", nonce(), b.limits))
	b.run(2000)
	n = nonce()
	if got := arm(n); !strings.HasPrefix(got, "ok ") {
		t.Fatalf("arm: %q", got)
	}
	b.must("no 5", "arm", fmt.Sprintf("%s %04X", nonce(), b.limits))
	b.must("ok", "dis", "")
	wantOld("used for an arm before", arm(n))
	n = nonce()
	b.restart(4)
	b.putLimits(limitSet(nil))
	wantOld("from before a restart", arm(n))
	for range 300 {
		nonce()
	}
	b.arm()
	if x := b.truth(); x.State != protocol.Armed || x.Driven != 0 {
		t.Errorf("%+v", x)
	}
	b.run(300)
	if s := b.stopLog(0); s.Cause != protocol.CauseBeat {
		t.Errorf("an arm without heartbeats ended for %v (P6.4)", s.Cause)
	}
}

func TestArmLapses(t *testing.T) {
	b := ready(t, nil)
	b.alive(59_500)
	if x := b.truth(); x.State != protocol.Armed {
		t.Fatalf("after 59.5 s %v", x.State)
	}
	b.alive(1000)
	if x := b.truth(); x.State != protocol.Off || b.stopLog(0).Cause != protocol.CauseDisarmed {
		t.Errorf("after 60.5 s %v, %v", x.State, b.stopLog(0).Cause)
	}
}

func TestDrive(t *testing.T) {
	b := ready(t, nil)
	b.must("ok 100", "rate", "100 x tu")
	b.takeSamples()
	for range 20 {
		b.volts(6)
		b.run(50)
	}
	x := b.truth()
	// At rest of change: (6 V − R·(coulomb + viscous·w)/k)/k, with the motor of host/host.c.
	want := (6 - 1.1*0.01/0.05) / (0.05 + 1.1*2e-5/0.05)
	if x.State != protocol.Driving || x.Driven != 6000 || math.Abs(float64(x.Speed)/1000/want-1) > 0.02 {
		t.Errorf("%+v, want %v rad/s", x, want)
	}
	s := b.takeSamples()
	last := s[len(s)-1]
	if len(s) < 98 || len(s) > 101 || b.framer.Stats.Lost != 0 {
		t.Errorf("%d samples in a second of 100 Hz, %d lost", len(s), b.framer.Stats.Lost)
	}
	if last.Slow.Seen && last.Slow.Inputs != 3 {
		t.Errorf("inputs %04X", last.Slow.Inputs)
	}
	if !last.Slow.Seen {
		t.Error("no V line in a second (P5.6)")
	}
	if last.Volts == 0 || last.Speed == 0 || last.Has&protocol.HasCounts == 0 || s[1].BoardUS-s[0].BoardUS != 10_000 {
		t.Errorf("%+v", last)
	}
	b.speed(100)
	b.run(60)
	if x := b.truth(); x.State != protocol.Driving || x.Wanted != 6000 {
		t.Errorf("ds within a run of dv: %+v (P6.5)", x)
	}
	b.must("ok", "dis", "")
	if x := b.truth(); x.State != protocol.Off || x.Driven != 0 {
		t.Errorf("after dis %+v", x)
	}
	b.run(20)
	if !slices.Contains(b.take(), fmt.Sprintf("ev off 3 %d", b.stopLog(0).Off)) {
		t.Error("no ev off (P9.2)")
	}
}

func TestHeartbeatTimeout(t *testing.T) {
	for _, timeout := range []float64{0.1, 0.25, 1} {
		b := ready(t, map[string]float64{"beat": timeout})
		for range 6 {
			b.volts(3)
			b.run(50)
		}
		b.run(timeout*1000 + 50)
		x, s := b.truth(), b.stopLog(0)
		held := float64(s.Off-s.Beat) / 1e6
		if s.Cause != protocol.CauseBeat || x.State != protocol.Tripped || x.Driven != 0 {
			t.Fatalf("%+v %+v", x, s)
		}
		if held < 0.8*timeout || held > timeout+0.020 {
			t.Errorf("output off %v s after the last heartbeat, timeout %v s", held, timeout)
		}
		if x.OffUS != s.Off {
			t.Errorf("the bridge went off at %d µs, the log says %d", x.OffUS, s.Off)
		}
		b.volts(3) // a late one does not bring it back
		b.run(50)
		if x := b.truth(); x.Driven != 0 || x.State != protocol.Tripped {
			t.Errorf("%+v", x)
		}
		b.must("no 12", "arm", fmt.Sprintf("%s %04X", b.must("ok", "nonce", ""), b.limits))
		b.run(1500)
		b.must("ok", "reset", "")
		if x := b.truth(); x.State != protocol.Off {
			t.Errorf("reset leads to %v (P7.6)", x.State)
		}
	}
}

// The loop sees a missing heartbeat even when the main loop hangs.
func TestHangingMainLoop(t *testing.T) {
	b := ready(t, nil)
	b.volts(3)
	b.run(50)
	b.set(setHang, 1)
	b.volts(3)
	b.run(400)
	if x := b.truth(); x.Driven != 0 || x.State != protocol.Tripped {
		t.Errorf("%+v", x)
	}
}

func TestStaleHeartbeats(t *testing.T) {
	b := ready(t, nil)
	line := func(k, token uint16, mv string) {
		b.send(protocol.AppendLine(nil, fmt.Appendf(nil, "dv %d %04X %s", k, token, mv)))
		b.run(5)
	}
	line(5, b.token, "1000")
	line(6, b.token, "2000")
	for _, c := range []struct {
		k     uint16
		token uint16
		mv    string
		why   string
	}{
		{6, b.token, "3000", "doubled"}, {5, b.token, "3000", "older"}, {65535, b.token, "3000", "half a turn back"},
		{7, b.token + 1, "3000", "another token"}, {7, b.token, "03000", "leading zero"}, {7, b.token, "3e3", "no integer"},
		{7, b.token, "", "no value"}, {7, b.token, "3000 1", "two values"},
	} {
		line(c.k, c.token, c.mv)
		if x := b.truth(); x.Wanted != 2000 {
			t.Errorf("%s: taken, %d mV", c.why, x.Wanted)
		}
	}
	before := b.truth()
	for range 60 { // stale ones do not keep it alive
		line(6, b.token, "2000")
	}
	if x := b.truth(); x.Driven != 0 || x.State != protocol.Tripped || before.Driven == 0 {
		t.Errorf("%+v", x)
	}
}

func TestCutByte(t *testing.T) {
	garbage := [][]byte{
		{protocol.Cut}, []byte("\x18\n"), []byte("dv 9 00\x18"), []byte("\x00\xff\x80\x18\x07"), append(bytes.Repeat([]byte("x"), 500), protocol.Cut),
		append(protocol.AppendRequest(nil, "id", 77, ""), protocol.Cut),
	}
	for _, g := range garbage {
		b := ready(t, nil)
		b.volts(6)
		b.run(30)
		at := bytes.IndexByte(g, protocol.Cut)
		b.now(g[:at])
		if x := b.truth(); x.Driven == 0 {
			t.Fatalf("%q: off before the cut byte", g)
		}
		b.now(g[at : at+1])
		if x := b.truth(); x.Driven != 0 || x.Wanted != 0 || x.State != protocol.Off {
			t.Errorf("%q: %+v before the next byte (P2.1)", g, x)
		}
		b.now(g[at+1:])
		b.volts(6) // its token is void
		b.run(100)
		if x := b.truth(); x.Driven != 0 || x.State != protocol.Off {
			t.Errorf("%q: driven again: %+v", g, x)
		}
		s := b.stopLog(0)
		if !slices.ContainsFunc(b.take(), func(l string) bool { return strings.HasPrefix(l, "cut 1 ") }) || s.Cause != protocol.CauseCut {
			t.Errorf("%q: no answer to the cut; %+v", g, s)
		}
	}
}

// A line that a cut byte broke is gone, and what follows the byte is a new line.
func TestCutThrowsTheHalfLineAway(t *testing.T) {
	b := ready(t, nil)
	b.take()
	whole := protocol.AppendRequest(nil, "in", 900, "")
	for cut := range len(whole) {
		b.send(slices.Concat(whole[:cut], []byte{protocol.Cut}, whole[cut:]))
		b.run(30)
		for _, l := range b.take() {
			if strings.HasPrefix(l, "ok 900") != (cut == 0) && !strings.HasPrefix(l, "cut ") && !strings.HasPrefix(l, "ev ") && !strings.HasPrefix(l, "no 0 1") {
				t.Errorf("cut at %d: %q", cut, l)
			}
		}
	}
}

func TestRepeatedRequest(t *testing.T) {
	b := ready(t, nil)
	b.must("ok", "dis", "")
	line := protocol.AppendRequest(nil, "nonce", 500, "")
	first := b.askLine(line, 500)
	if again := b.askLine(line, 500); again != first {
		t.Errorf("the same line: %q, then %q (P3.3)", first, again)
	}
	gains := b.putGains(map[string]float64{"kp": 0.1, "ki": 1, "b": 1})
	store := protocol.AppendRequest(nil, "gain", 501, fmt.Sprintf("store %04X", gains))
	one := b.askLine(store, 501)
	for range 3 {
		if got := b.askLine(store, 501); got != one {
			t.Errorf("a repeated store: %q, then %q", one, got)
		}
	}
	if want := fmt.Sprintf("ok %04X 1", gains); one != want {
		t.Errorf("store: %q, want %q", one, want)
	}
	if got := b.ask("gain", fmt.Sprintf("store %04X", gains)); got != fmt.Sprintf("ok %04X 2", gains) {
		t.Errorf("second store: %q", got)
	}
}

func TestGains(t *testing.T) {
	b := start(t, "float")
	old := b.putGains(map[string]float64{"kp": 0.2, "ki": 2, "b": 1})
	b.must("ok", "gain", fmt.Sprintf("store %04X", old))
	next := []float64{0.3, 3, 0.001, 0.01, 0.8, 0.05, 0.2}
	var set []uint32
	for i, v := range next {
		set = append(set, bits(v))
		b.must("ok", "gain", fmt.Sprintf("set %d %08X", i, set[i]))
		b.must(fmt.Sprintf("ok %04X 7", old), "gain", "crc run") // nothing changes before use
	}
	b.must("no 14", "gain", fmt.Sprintf("use %04X", old))
	b.must(fmt.Sprintf("ok %04X 7", old), "gain", "crc run")
	b.must("no 4", "gain", "set 0 7F800000")
	b.must("no 4", "gain", "set 7 3F800000")
	crc := protocol.SetCRC(set)
	b.must("ok", "gain", fmt.Sprintf("use %04X", crc))
	for i, name := range gainNames {
		b.must(fmt.Sprintf("ok %d %s %08X", i, name, set[i]), "gain", fmt.Sprintf("get run %d", i))
	}
	b.must(fmt.Sprintf("ok 0 kp %08X", bits(0.2)), "gain", "get store 0")
	b.must(fmt.Sprintf("ok %04X 7", old), "gain", "crc store")
	b.restart(4) // RAM is gone, the stored set is back: P8.4
	b.must(fmt.Sprintf("ok %04X 7", old), "gain", "crc run")
	b.putGains(map[string]float64{"kp": 0.3, "ki": 3, "kd": 0.001, "tf": 0.01, "b": 0.8, "kv": 0.05, "ks": 0.2})
	b.must("no 14", "gain", fmt.Sprintf("store %04X", old))
	b.set(setStoreFails, 1)
	b.must("no 15", "gain", fmt.Sprintf("store %04X", crc))
	b.set(setStoreFails, 0)
	b.must(fmt.Sprintf("ok %04X 7", old), "gain", "crc store")
	b.must("ok", "gain", fmt.Sprintf("store %04X", crc))
	b.restart(0)
	b.must(fmt.Sprintf("ok %04X 7", crc), "gain", "crc run")
	b.set(setKick, 100_000)
	b.run(20)
	b.must("no 10", "gain", "set 0 3F800000")
}

func TestRate(t *testing.T) {
	b := start(t, "float")
	for _, c := range []struct{ args, want string }{
		{"0 x t", "ok 0"}, {"100 x t", "ok 100"}, {"300 x t", "ok 250"}, // 1000/4: a whole number of loops
		{"1000 x t", "no 9"}, {"200 x tu", "no 9"}, {"100 d t", "ok 100"}, {"100 d tu", "no 9"}, {"50 d tu", "ok 50"},
		{"50 q t", "no 4"}, {"50 x u", "no 4"}, {"50 x", "no 4"}, {"-1 x t", "no 4"}, {"70000 x t", "no 4"},
	} {
		if got := b.ask("rate", c.args); !strings.HasPrefix(got, c.want) {
			t.Errorf("rate %s: %q, want %q", c.args, got, c.want)
		}
	}
	b.run(20)
	b.takeSamples()
	b.run(1000)
	if s := b.takeSamples(); len(s) < 49 || len(s) > 51 || s[0].Has&protocol.HasSetpoint == 0 {
		t.Errorf("%d decimal samples in a second of 50 Hz", len(s))
	}
}

func TestStopLogSurvivesAReset(t *testing.T) {
	b := ready(t, nil)
	for i := range 6 {
		if i > 0 {
			b.arm()
		}
		b.volts(float64(i))
		b.run(20)
		b.must("ok", "stop", "")
		b.run(2500)
	}
	first := b.stopLog(0)
	if first.Total != 6 || first.Cause != protocol.CauseCut {
		t.Errorf("%+v", first)
	}
	b.restart(4)
	if got := b.stopLog(0); got != first {
		t.Errorf("after a reset %+v, before %+v", got, first)
	}
	if s := b.stopLog(3); s.Total != 6 {
		t.Errorf("%+v", s)
	}
	b.must("no 4", "log", "4")
	b.restart(0)
	b.must("no 4", "log", "0")
}
