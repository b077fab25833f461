package bench

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"gainwright/protocol/firmware/emulate"
	"gainwright/safety/rig"
	"gainwright/tune/job"
)

// The motor that every image of the firmware computes (protocol/firmware/host and
// boards/common), and what follows from its equations
//
//	J·dω/dt = Kt·i − B·ω − friction,  U = R·i + Ke·ω
//
// without inductance: gain 1/(Ke + R·B/Kt), time constant J·R/(Ke·Kt + R·B).
const (
	fwOhms, fwKe     = 1.1, 0.05 // Ω; V·s/rad, the same in N·m/A
	fwInertia, fwVis = 1e-4, 2e-5
	fwGain           = 1 / (fwKe + fwOhms*fwVis/fwKe)
	fwTau            = fwInertia * fwOhms / (fwKe*fwKe + fwOhms*fwVis)
)

// firmwareRig is what a person would type off the labels of that rig.
func firmwareRig(t *testing.T) (rig.Rig, []byte) {
	t.Helper()
	r := rig.Rig{Name: "image"}
	r.Motor = rig.Motor{VoltageRated: 24, SpeedMax: 3800, CurrentMax: 9}
	r.Drive = rig.Drive{Kind: "volts", Quadrants: 4, BusNominal: 24, BusMax: 30, BusMin: 18, SupplySinks: true}
	r.Encoder = rig.Encoder{CountsPerTurn: 2000, Side: "motor", GearRatio: 1}
	r.Limits.Volts = 20
	r.Load.State = "coupled"
	text := job.NameplateText(r)
	parsed, err := rig.Parse("image (nameplate)", text)
	if err != nil {
		t.Fatal(err)
	}
	return parsed, text
}

// firmwareJob does every step of the path but the card on a board of the firmware
// and judges what came of it by the motor's own equations.
func firmwareJob(t *testing.T, b *emulate.Board) {
	t.Helper()
	r, text := firmwareRig(t)
	v := NewHosted(b, 115200, time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
	j := job.New(v.Hands(nil), job.Options{Rig: r, RigText: text, Version: "test"})
	for _, s := range job.Path {
		if s.ID == job.StepCard { // needs a record
			break
		}
		if s.Optional {
			continue
		}
		if err := j.Do(s.ID); err != nil {
			for _, l := range v.s.view.Log[max(0, len(v.s.view.Log)-8):] {
				t.Logf("%8.3f %s", l.At.Seconds(), l.Text)
			}
			t.Fatalf("%s: %v (board: %v)", s.ID, err, b.Err())
		}
		if j.NoChange {
			t.Fatalf("%s: nothing to change, with all gains at zero", s.ID)
		}
	}
	if b.Err() != nil {
		t.Fatal(b.Err())
	}
	if j.Verified == nil || j.Verified.Passed == nil || !*j.Verified.Passed {
		t.Errorf("verify: %+v", j.Verified)
	}
	m := j.Fit.Best().Model
	gain, tau := m.DCGain(), slowestReal(m)
	t.Logf("%.0f s of the board's time; gain %.3f (%.3f), time constant %.4f s (%.4f)", v.Now().Seconds(), gain, fwGain, tau, fwTau)
	if math.Abs(gain/fwGain-1) > 0.03 {
		t.Errorf("gain %.3f rad/s per V, the motor has %.3f", gain, fwGain)
	}
	if math.Abs(tau/fwTau-1) > 0.05 {
		t.Errorf("time constant %.4f s, the motor has %.4f", tau, fwTau)
	}
	storedEqual(t, v, j)
}

func TestWholeJobOnTheHostBuild(t *testing.T) {
	t.Parallel()
	firmwareJob(t, emulate.Host(t, false))
}

func TestWholeJobOnATmega328P(t *testing.T) {
	t.Parallel()
	firmwareJob(t, emulate.ATmega328P(t, "m328-sim"))
}

func TestWholeJobOnCortexM3(t *testing.T) {
	t.Parallel()
	firmwareJob(t, emulate.CortexM3(t))
}

// storedEqual asks the board itself, after the job, for both its sets.
func storedEqual(t *testing.T, v *Virtual, j *job.Job) {
	t.Helper()
	h := v.Hands(nil)
	if len(j.Running.Names) == 0 {
		t.Fatal("nothing was pushed")
	}
	for i, name := range j.Running.Names {
		for _, where := range []string{"run", "store"} {
			a, err := h.Request("gain", fmt.Sprintf("get %s %d", where, i))
			if err != nil {
				t.Fatal(err)
			}
			if want := fmt.Sprintf("%d %s %08X", i, name, j.Running.Bits[i]); strings.Join(a.Fields, " ") != want {
				t.Errorf("gain get %s %d: %q, pushed was %q", where, i, a.Fields, want)
			}
		}
	}
	if kp, _ := j.Running.Value("kp"); kp <= 0 {
		t.Errorf("kp %v", kp)
	}
	if n := h.Line().Restarts; n != 0 {
		t.Errorf("%d restarts that nobody asked for", n)
	}
}
