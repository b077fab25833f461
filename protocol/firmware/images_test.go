package firmware_test

import (
	"bufio"
	"fmt"
	"io"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"gainwright/protocol"
	"gainwright/protocol/firmware/emulate"
)

// needImage returns the path of one file of a part of what can be built here, or
// skips with a word.
func needImage(t *testing.T, programs []string, part, name string) string {
	t.Helper()
	path := filepath.Join(emulate.Images(t, part, programs...), name)
	if _, err := os.Stat(path); err != nil {
		t.Skipf("%s was not built: a library is missing", name)
	}
	return path
}

// imageSession is the short form of a job on a board whose motor is in its image:
// identity, limits, arm, drive, heartbeat timeout, gains, closed loop, cut. It
// judges by the board's own clock and numbers only.
func imageSession(t *testing.T, b *board) {
	t.Helper()
	b.t = t
	b.send([]byte("\nid\n"))
	for range 100 {
		b.run(10)
		if n := len(b.lines); n > 0 && strings.HasPrefix(b.lines[n-1], "ok 0 ") {
			break
		}
	}
	var keys []string
	for _, l := range b.take() {
		if k, ok := strings.CutPrefix(l, "id "); ok {
			keys = append(keys, k)
		}
	}
	id, err := protocol.ParseIdentity(keys)
	if err != nil || id.LookOnly() != "" || !slices.Equal(id.LimitNames, limitNames) {
		t.Fatalf("identity %q: %v, look-only %q", keys, err, id.LookOnly())
	}
	b.framer.Scales = id.Scales
	b.putLimits(limitSet(nil))
	b.must("no 6", "arm", fmt.Sprintf("0000ABCD %04X", b.limits))
	b.arm()
	b.must("ok", "rate", "50 x tu")
	b.takeSamples()
	for range 20 {
		b.volts(6)
		b.run(50)
	}
	s := b.takeSamples()
	want := (6 - 1.1*0.01/0.05) / (0.05 + 1.1*2e-5/0.05) // the motor of boards/common
	last := s[len(s)-1]
	if len(s) < 20 || last.State != protocol.Driving || float64(last.Speed) < 0.97*want || float64(last.Speed) > 1.03*want {
		t.Errorf("%d samples, the last %+v, want %.1f rad/s", len(s), last, want)
	}
	b.run(400)
	log := b.stopLog(0)
	if held := log.Off - log.Beat; log.Cause != protocol.CauseBeat || held < 200_000 || held > 270_000 {
		t.Errorf("silent for %d µs: %+v", held, log)
	}
	b.run(2500)
	b.must("ok", "reset", "")
	b.closedLoop(id.GainNames)
}

// closedLoop puts gains in, stores them, and holds a speed.
func (b *board) closedLoop(names []string) {
	t := b.t
	t.Helper()
	values := map[string]float64{"kp": 0.03, "ki": 0.6, "b": 1}
	var set []uint32
	for i, n := range names {
		set = append(set, bits(values[n]))
		b.must("ok", "gain", fmt.Sprintf("set %d %08X", i, set[i]))
	}
	crc := protocol.SetCRC(set)
	b.must("ok", "gain", fmt.Sprintf("use %04X", crc))
	b.must(fmt.Sprintf("ok %04X 1", crc), "gain", fmt.Sprintf("store %04X", crc))
	b.must(fmt.Sprintf("ok %04X %d", crc, len(set)), "gain", "crc store")
	b.arm()
	for range 20 {
		b.speed(90)
		b.run(50)
	}
	s := b.takeSamples()
	if last := s[len(s)-1]; last.State != protocol.Looping || last.Speed < 89 || last.Speed > 91 {
		t.Errorf("asked for 90 rad/s: %+v", last)
	}
	b.send([]byte("gar\x80bage\x18"))
	b.run(200)
	s = b.takeSamples()
	if last := s[len(s)-1]; last.State != protocol.Off || last.Volts != 0 {
		t.Errorf("after the cut byte %+v", last)
	}
	if log := b.stopLog(0); log.Cause != protocol.CauseCut {
		t.Errorf("%+v", log)
	}
	if b.framer.Stats.BadLines > 0 {
		t.Errorf("bad lines: %v", b.bad)
	}
}

// TestATmega328P runs the 8-bit image under libsimavr, in the emulator's own
// time, and looks at how deep the stack went.
func TestATmega328P(t *testing.T) {
	t.Parallel()
	programs := []string{"gcc", "avr-gcc"}
	for _, image := range []string{"m328-sim.elf", "m328-sim-fixed.elf"} {
		t.Run(image, func(t *testing.T) {
			elf := needImage(t, programs, "avr", image)
			runner := needImage(t, programs, "avr", "avrrun")
			cmd := exec.Command(runner, elf, "--virtual")
			cmd.Stderr = os.Stderr
			in, err := cmd.StdinPipe()
			if err != nil {
				t.Fatal(err)
			}
			out, err := cmd.StdoutPipe()
			if err != nil {
				t.Fatal(err)
			}
			if err := cmd.Start(); err != nil {
				t.Fatal(err)
			}
			b := &board{t: t, in: in, out: bufio.NewReader(out)}
			t.Cleanup(func() { in.Close(); cmd.Wait() })
			b.run(20)
			imageSession(t, b)
			var static, stack int
			if _, err := fmt.Sscanf(string(b.order('Q', 0, nil)), "static %d stack %d", &static, &stack); err != nil {
				t.Fatal(err)
			}
			t.Logf("static %d, stack at its deepest %d bytes", static, stack)
			if static+stack > 2048-32 {
				t.Errorf("static %d and stack %d bytes leave no room in 2048", static, stack)
			}
		})
	}
}

// The 8-bit image without its motor keeps its budget of flash: half of the chip's.
func TestATmega328PFitsInItsFlash(t *testing.T) {
	t.Parallel()
	need(t, "avr-size")
	elf := needImage(t, []string{"gcc", "avr-gcc"}, "avr", "m328.elf")
	out, err := exec.Command("avr-size", elf).Output()
	if err != nil {
		t.Fatal(err)
	}
	var text, data, bss int
	if _, err := fmt.Sscan(strings.SplitN(string(out), "\n", 2)[1], &text, &data, &bss); err != nil {
		t.Fatalf("%q: %v", out, err)
	}
	t.Logf("%d bytes of flash, %d of static RAM", text+data, data+bss)
	if flash := text + data; flash > 16384 || flash < 8192 {
		t.Errorf("%d bytes of flash, at most 16384", flash)
	}
}

// TestCortexM3 runs the 32-bit image under QEMU, in real time, over a socket.
func TestCortexM3(t *testing.T) {
	t.Parallel() // it waits most of the time
	image := needImage(t, []string{"arm-none-eabi-gcc", "qemu-system-arm"}, "arm", "an385.elf")
	path := filepath.Join(buildDir, "uart")
	cmd := exec.Command("qemu-system-arm", "-M", "mps2-an385", "-kernel", image, "-display", "none", "-monitor", "none", "-nodefaults",
		"-chardev", "socket,id=u0,path="+path+",server=on,wait=on", "-serial", "chardev:u0")
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { cmd.Process.Kill(); cmd.Wait() })
	var conn net.Conn
	for range 500 {
		c, err := net.Dial("unix", path)
		if err == nil {
			conn = c
			break
		}
		<-time.After(10 * time.Millisecond)
	}
	if conn == nil {
		t.Fatal("qemu-system-arm does not open its socket")
	}
	defer conn.Close()
	b := &board{t: t, live: conn}
	imageSession(t, b)
}

// runLive takes what comes within so many ms of real time.
func (b *board) runLive(ms float64) {
	b.t.Helper()
	end := time.Now().Add(time.Duration(ms * float64(time.Millisecond)))
	buf := make([]byte, 4096)
	for {
		b.live.SetReadDeadline(end)
		n, err := b.live.Read(buf)
		b.framer.Feed(buf[:n], b)
		if err == nil {
			continue
		}
		if ne, ok := err.(net.Error); ok && ne.Timeout() {
			return
		}
		if err == io.EOF {
			b.t.Fatal("the emulator is gone")
		}
		b.t.Fatal(err)
	}
}
