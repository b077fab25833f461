package conformance

import (
	"os"
	"testing"
	"time"

	"gainwright/protocol/firmware/emulate"
)

// emulated is a Line to a firmware whose time the test owns.
type emulated struct{ *emulate.Board }

func (l emulated) Write(p []byte) error {
	l.Receive(p)
	return l.Err()
}

func (l emulated) Read(until time.Duration) ([]byte, error) {
	for l.Err() == nil && l.Now() < until {
		l.Advance(l.Now() + max(time.Millisecond, min(4*time.Millisecond, until-l.Now())))
		if b := l.Output(); len(b) > 0 {
			return b, nil
		}
	}
	return nil, l.Err()
}

func (l emulated) restart() error {
	l.PowerCycle()
	return l.Err()
}

// conforms holds a firmware against every check, with leave to move and to restart.
func conforms(t *testing.T, b *emulate.Board, o Options) {
	t.Helper()
	l := emulated{b}
	if _, err := l.Read(l.Now() + 300*time.Millisecond); err != nil {
		t.Fatal(err)
	}
	o.Permit, o.Restart = permitted, l.restart
	r, err := Run(l, o)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%d passed, %d not judged, %.0f s of the board's time", r.Passed, len(r.NotJudged), l.Now().Seconds())
	if !r.Conforms || r.Use != UseDrive || r.Passed < 60 {
		t.Errorf("conforms %t, use %s (%s), %d passed", r.Conforms, r.Use, r.Reason, r.Passed)
		tell(t, r)
	}
}

// The reference firmware in C, compiled for this machine, in both arithmetics.
func TestFirmwareConforms(t *testing.T) {
	t.Run("float", func(t *testing.T) { conforms(t, emulate.Host(t, false), Options{}) })
	t.Run("fixed", func(t *testing.T) { conforms(t, emulate.Host(t, true), Options{Brief: true}) })
}

// The same firmware as an image of an 8-bit chip, its motor in the image. All of
// the chip's RAM has to do for that.
func TestATmega328PConforms(t *testing.T) {
	t.Parallel()
	b := emulate.ATmega328P(t, "m328-sim")
	conforms(t, b, Options{Brief: os.Getenv("GAINWRIGHT_LONG") == ""})
	memory(t, b, 2048)
}

// The image that has the motor on its pins, where none hangs: everything that
// does not need one, within three quarters of the RAM.
func TestATmega328PWithoutItsMotor(t *testing.T) {
	t.Parallel()
	b := emulate.ATmega328P(t, "m328")
	l := emulated{b}
	r, err := Run(l, Options{Restart: l.restart, Brief: true})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%d passed, %d not judged", r.Passed, len(r.NotJudged))
	if r.Failed > 0 || r.Passed < 60 {
		t.Errorf("%d passed, %d failed", r.Passed, r.Failed)
		tell(t, r)
	}
	memory(t, b, 1536)
}

// memory holds static data and the painted stack at its deepest against a bound.
func memory(t *testing.T, b *emulate.Board, most int) {
	t.Helper()
	static, stack, ok := b.Memory()
	t.Logf("static %d, stack at its deepest %d bytes, %d together", static, stack, static+stack)
	if !ok || static < 500 || stack < 50 || static+stack > most {
		t.Errorf("static %d and stack %d bytes, at most %d", static, stack, most)
	}
}

// And of a 32-bit one.
func TestCortexM3Conforms(t *testing.T) {
	t.Parallel()
	conforms(t, emulate.CortexM3(t), Options{Brief: os.Getenv("GAINWRIGHT_LONG") == ""})
}
