package firmware_test

import (
	"fmt"
	"math"
	"testing"
)

// bits of a maximal-length sequence by its recurrence, from the stages that P.
// Alfke, Xilinx application note 052 (1996), table 3 (from memory), gives: the stage that goes
// out is the last, the sum of the tapped ones modulo 2 comes in at the first.
func sequence(stages []int, seed, n int) (a []int) {
	last := stages[0]
	for i := range n {
		if i < last {
			a = append(a, seed>>i&1)
			continue
		}
		sum := 0
		for _, k := range stages {
			sum ^= a[i-k]
		}
		a = append(a, sum)
	}
	return a
}

func (b *board) keep(ms int, v float64) {
	for range ms / 20 {
		b.volts(v)
		b.run(20)
	}
}

func TestSequenceIsThatOfTheTable(t *testing.T) { // P13.3
	const bias, amp, loops, seed = 6.0, 1.5, 3, 5
	for _, stages := range [][]int{{3, 2}, {4, 3}, {5, 3}, {6, 5}, {7, 6}, {8, 6, 5, 4}, {9, 5}} {
		b := ready(t, map[string]float64{"slew": 0, "amax": 0})
		n := 1<<stages[0] - 1
		b.keep(400, bias)
		b.must("ok", "cap", fmt.Sprintf("now 1 %d", n*loops+120))
		b.must("ok", "exp", fmt.Sprintf("prbs %04X %d %d %d %d", b.token, int(amp*1000), stages[0], loops, seed))
		b.keep(n*loops+160, bias)
		if got := b.must("ok", "exp", "state"); got[:4] != "done" {
			t.Fatalf("%d stages: %q", stages[0], got)
		}
		all, _, _ := b.capture()
		at := 0
		for math.Abs(all[at].volts-bias) < 0.01 {
			at++
		}
		for i, bit := range sequence(stages, seed, n) {
			want := bias + amp*float64(2*bit-1)
			// The first period of a bit still has the 200 µs of the compute delay in it.
			for j := 1; j < loops; j++ {
				if got := all[at+loops*i+j].volts; math.Abs(got-want) > 0.011 {
					t.Fatalf("%d stages, bit %d: %g V, want %g V", stages[0], i, got, want)
				}
			}
		}
		if got := all[at+loops*n+1].volts; math.Abs(got-bias) > 0.011 {
			t.Errorf("%d stages: %g V after the last bit", stages[0], got)
		}
	}
}

func TestSquareWaveOnTheBoard(t *testing.T) { // P13.5
	const bias, amp, loops, steps = 6.0, 1.5, 7, 9
	b := ready(t, map[string]float64{"slew": 0, "amax": 0})
	for _, bad := range []string{"1500 7 0", "0 7 9", "1500 10001 9", "1500 7", "1500 7 9 1"} {
		b.must("no 4", "exp", fmt.Sprintf("steps %04X %s", b.token, bad))
	}
	b.keep(400, bias)
	b.must("ok", "cap", fmt.Sprintf("now 1 %d", steps*loops+120))
	b.must("ok", "exp", fmt.Sprintf("steps %04X %d %d %d", b.token, int(amp*1000), loops, steps))
	b.keep(steps*loops+160, bias)
	b.must(fmt.Sprintf("ok done %d", steps-1), "exp", "state")
	all, _, _ := b.capture()
	at := 0
	for math.Abs(all[at].volts-bias) < 0.01 {
		at++
	}
	for i := range steps {
		want := bias + amp*float64(1-2*(i%2))
		for j := 1; j < loops; j++ {
			if got := all[at+loops*i+j].volts; math.Abs(got-want) > 0.011 {
				t.Fatalf("step %d: %g V, want %g V", i, got, want)
			}
		}
	}
	if got := all[at+loops*steps+1].volts; math.Abs(got-bias) > 0.011 {
		t.Errorf("%g V after the last step", got)
	}
}

func TestRelayOnTheBoard(t *testing.T) { // P13.1, P13.2, P13.4
	b := ready(t, map[string]float64{"vmax": 9, "slew": 0, "amax": 0})
	relay := func(token uint16, amp, hyst, middle int) string {
		return fmt.Sprintf("relay %04X %d %d %d 9", token, amp, hyst, middle)
	}
	b.must("no 5", "exp", relay(b.token, 1000, 5000, 100000))
	b.keep(1000, 6)
	middle := b.truth().Speed
	b.must("no 7", "exp", relay(b.token+1, 1000, 5000, middle))
	b.must("no 8", "exp", relay(b.token, 3001, 5000, middle))
	b.must("no 4", "exp", relay(b.token, 1000, 0, middle))
	b.must("no 4", "exp", "prbs 0000 1000 17 1 1")
	b.must("no 4", "exp", "prbs 0000 1000 4 1 16")
	b.must("ok none 0", "exp", "state")
	b.must("ok", "cap", "now 1 1500")
	b.must("ok", "exp", relay(b.token, 2000, 5000, middle))
	b.keep(2000, 6)
	b.must("ok done 9", "exp", "state")
	all, _, _ := b.capture()
	last, switched := 0, 0
	for i := 5; i < len(all); i++ {
		up := 0
		if d := all[i].volts - 6; math.Abs(d) > 1.9 {
			up = int(math.Copysign(1, d))
		}
		if up == 0 || up == last {
			continue
		}
		if last != 0 {
			switched++
			// The speed of the window that ended when it switched, one period before.
			w := float64(int16(all[i-1].counts-all[i-6].counts)) * 2 * math.Pi / 2000 / 0.005
			if d := (w - float64(middle)/1000) * float64(last); d < 4.9 {
				t.Errorf("switched from %d at %g rad/s from the middle", last, d)
			}
		}
		last = up
	}
	if switched != 8 { // the ninth ends it
		t.Errorf("%d switchings", switched)
	}
	b = ready(t, map[string]float64{"vmax": 9, "slew": 0, "amax": 0}) // the arm did not outlive the upload
	b.keep(100, 6)
	b.must("ok", "exp", relay(b.token, 2000, 5000, middle))
	b.keep(100, 6)
	b.must("ok run", "exp", "state")
	b.now([]byte{0x18})
	if x := b.truth(); x.Driven != 0 {
		t.Errorf("%+v after the cut", x)
	}
	b.must("ok none 0", "exp", "state")
}

func TestDriveLineThatAnExperimentWouldCarryOver(t *testing.T) { // P13.1
	b := ready(t, map[string]float64{"vmax": 9, "slew": 0, "amax": 0})
	b.keep(300, 6)
	b.must("ok", "exp", fmt.Sprintf("prbs %04X 2000 9 20 1", b.token))
	b.keep(40, 6.9)
	b.volts(7.1)
	b.run(10)
	if s := b.stopLog(0); s.Cause != 12 {
		t.Errorf("%+v, want cause 12", s)
	}
}
