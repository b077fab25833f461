package firmware_test

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"

	"gainwright/protocol"
)

// The host build holds these limits, in this order, and these gains.
var limitNames = strings.Fields("vmax wmax imax bmax bmin amax turns stall wrong nocnt vbreak heat run beat slew")
var gainNames = strings.Fields("kp ki kd tf b kv ks")

func bits(v float64) uint32 { return math.Float32bits(float32(v)) }

// limitSet is a set of limits that lets the tests' runs pass.
func limitSet(change map[string]float64) []uint32 {
	base := map[string]float64{"vmax": 20, "wmax": 450, "imax": 0, "bmax": 30, "bmin": 18, "amax": 0, "turns": 0, "stall": 0.5,
		"wrong": 0.2, "nocnt": 0.3, "vbreak": 2, "heat": 0, "run": 30, "beat": 0.25, "slew": 0}
	var set []uint32
	for _, n := range limitNames {
		v := base[n]
		if c, ok := change[n]; ok {
			v = c
		}
		set = append(set, bits(v))
	}
	return set
}

// putLimits stages a set, puts it in use and reads it back.
func (b *board) putLimits(set []uint32) {
	b.t.Helper()
	for i, v := range set {
		b.must("ok "+strconv.Itoa(i), "lim", fmt.Sprintf("set %d %08X", i, v))
	}
	crc := protocol.SetCRC(set)
	b.must(fmt.Sprintf("ok %04X %d", crc, len(set)), "lim", fmt.Sprintf("use %04X", crc))
	b.limits = crc
}

func (b *board) putGains(gains map[string]float64) (crc uint16) {
	b.t.Helper()
	var set []uint32
	for i, n := range gainNames {
		set = append(set, bits(gains[n]))
		b.must("ok "+strconv.Itoa(i), "gain", fmt.Sprintf("set %d %08X", i, set[i]))
	}
	crc = protocol.SetCRC(set)
	b.must(fmt.Sprintf("ok %04X %d", crc, len(set)), "gain", fmt.Sprintf("use %04X", crc))
	return crc
}

// arm arms with a fresh one-time number.
func (b *board) arm() {
	b.t.Helper()
	nonce := b.must("ok", "nonce", "")
	token := b.must("ok", "arm", fmt.Sprintf("%s %04X", nonce, b.limits))
	v, ok := protocol.ParseHex16([]byte(token))
	if !ok {
		b.t.Fatalf("token %q", token)
	}
	b.token, b.k = v, 0
}

// ready starts a board with limits in use and the arm done.
func ready(t *testing.T, change map[string]float64) *board {
	t.Helper()
	b := start(t, "float")
	b.putLimits(limitSet(change))
	b.arm()
	return b
}

// stopped is entry i of the stop log.
type stopped struct {
	Total           int
	Cause           protocol.Cause
	Seen, Beat, Off int64
	Speed           int
}

func (b *board) stopLog(i int) (s stopped) {
	b.t.Helper()
	var at int
	f := b.must("ok", "log", strconv.Itoa(i))
	if _, err := fmt.Sscan(f, &at, &s.Total, &s.Cause, &s.Seen, &s.Beat, &s.Off, &s.Speed); err != nil || at != i {
		b.t.Fatalf("log %q: %v", f, err)
	}
	return s
}

// wantTrip lets up to so many ms pass with heartbeats, until the board has
// tripped for the cause and the bridge is off.
func (b *board) wantTrip(cause protocol.Cause, ms int) {
	b.t.Helper()
	for range ms / 10 {
		b.beat()
		b.run(10)
		if x := b.truth(); x.State == protocol.Tripped {
			if x.Driven != 0 || x.Wanted != 0 {
				b.t.Errorf("tripped and still driven with %d mV", x.Driven)
			}
			if s := b.stopLog(0); s.Cause != cause {
				b.t.Errorf("tripped for %v, want %v", s.Cause, cause)
			}
			return
		}
	}
	b.t.Errorf("no trip for %v in %d ms: %+v", cause, ms, b.truth())
}
