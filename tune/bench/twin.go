package bench

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"gainwright/link/simrig"
	"gainwright/protocol"
	"gainwright/safety/rig"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// ErrNoTwin is what a record wraps that no twin can be made of.
var ErrNoTwin = errors.New("no twin")

// Twin is a simulated rig made of a record: its model, its friction, its board.
type Twin struct {
	Config  simrig.Config
	Text    []byte // of the simulated board, as a file would have it
	Rig     rig.Rig
	RigText []byte
}

// TwinOf makes the twin of a record that came as far as a model. What the record does
// not know (a resistance where no current was measured, an inductance) is chosen so
// that gain, time constants, dead time and friction in volts come out as recorded:
// with K·ω₀ the gain and τ the time constant, b = (K/gain − K²)/R and
// J = τ·K/(gain·R), the equations of a permanent-magnet motor with small inductance.
func TwinOf(r *sheet.Reader) (t Twin, err error) {
	no := func(what string) (Twin, error) {
		return Twin{}, fmt.Errorf("%w: the record %s; take one of a job that came as far as its model", ErrNoTwin, what)
	}
	last, err := job.LastDesign(r)
	if err != nil || last.Model == nil {
		return no("has no model that is believed")
	}
	m, err := r.Motor()
	if err != nil || m.GainRadSPerV == nil || m.TauS == nil || *m.GainRadSPerV <= 0 {
		return no("does not know gain and time constant of its motor")
	}
	id, err := identityOf(r)
	if err != nil {
		return no("has no identity that can be read: " + err.Error())
	}
	if t.Rig, t.RigText, err = rigOfRecord(r); err != nil {
		return no("has no rig file that can be read: " + err.Error())
	}
	gain, tau := *m.GainRadSPerV, *m.TauS
	k := 1 / gain
	if m.KeVsPerRad != nil && *m.KeVsPerRad > 0 && *m.KeVsPerRad < k {
		k = *m.KeVsPerRad
	}
	ohms := t.Rig.Motor.VoltageRated / t.Rig.Motor.CurrentMax
	if m.ROhm != nil && *m.ROhm > 0 {
		ohms = *m.ROhm
	}
	viscous, inertia := math.Max(0, (k/gain-k*k)/ohms), tau*k/(gain*ohms)
	henry := math.Max(1e-6, ohms*tau/200) // an electrical time constant that nobody sees
	if ps := last.Model.Poles(); len(ps) == 2 && imag(ps[0]) == 0 {
		henry = math.Max(1e-6, ohms*math.Min(-1/real(ps[0]), -1/real(ps[1])))
	}
	var b strings.Builder
	line := func(format string, args ...any) { fmt.Fprintf(&b, format+"\n", args...) }
	line("# The twin of record %s: a simulated rig made of its model, friction and board.", sheet.RecordName(r.Dir()))
	line("name = %q\nseed = 1", t.Rig.Name)
	env := t.Rig.Envelope()
	line("\n[nameplate]\nvoltage_rated_V = %.9g\nvoltage_max_V = %.9g\nspeed_max_rad_s = %.9g\ncurrent_max_A = %.9g\nbus_max_V = %.9g\nbus_min_V = %.9g",
		t.Rig.Motor.VoltageRated, env.VoltsMax, env.SpeedMax, env.CurrentMax, env.BusMax, env.BusMin)
	line("\n[motor]\nresistance_ohm = %.9g\ninductance_H = %.9g\ntorque_constant_Nm_A = %.9g\ninertia_kg_m2 = %.9g", ohms, henry, k, inertia)
	slide := slidingOf(r)
	for i, side := range []struct {
		name string
		away *float64
	}{{"forward", m.BreakawayForwardV}, {"reverse", m.BreakawayReverseV}} {
		coulomb := slide[i] * k / ohms
		static := coulomb
		if side.away != nil {
			static = math.Max(coulomb, *side.away*k/ohms)
		}
		line("\n[friction.%s]\ncoulomb_Nm = %.9g\nstatic_Nm = %.9g\nviscous_Nms = %.9g\nstribeck_rad_s = 2.0", side.name, coulomb, static, viscous)
	}
	line("\n[load]\ngear_ratio = %.9g", math.Max(t.Rig.Encoder.GearRatio, 0.1))
	line("\n[driver]\nquadrants = %d\ndead_time_s = %.9g\noff = %q", max(1, id.Quadrants), math.Max(0, last.Model.DeadTime), word(id.OffMeans, "coast", "short"))
	line("\n[supply]\nvoltage_V = %.9g\ncurrent_limit_A = %.9g\ncan_sink = %v", t.Rig.Drive.BusNominal, 1.5*float64(env.CurrentMax), t.Rig.Drive.SupplySinks)
	line("\n[encoder]\ncounts_per_turn = %.0f\nside = %q\nedge_noise_counts = 0.1", id.CountsPerTurn, word(id.EncoderSide, "motor", "load"))
	line("\n[sensors]\ncurrent = %v\ncurrent_step_A = %.9g\nbus = %v\nbus_step_V = %.9g", id.Scales.CurrentLSB > 0, float64(id.Scales.CurrentLSB), id.BusMeasured, float64(id.Scales.BusLSB))
	line("\n[board]\nid = %q\nfirmware = \"twin of %s\"", id.Board, sheet.RecordName(r.Dir()))
	line("loop_us = %d\ncompute_delay_us = %d\nwindow_loops = %d\nlaw = %q\nform = %q\nderivative = %q\ndiscretisation = %q\nanti_windup = %q\ncapture_samples = %d\nexperiments = %v",
		id.Loop.Microseconds(), id.ComputeDelay.Microseconds(), id.WindowLoops, word(id.Law, "pi", "pid"), word(id.Form, "parallel", "ideal", "series"),
		word(id.Derivative, "measurement", "error"), word(id.Discretisation, "backward-euler", "forward-euler", "tustin", "incremental"),
		word(id.AntiWindup, "clamp", "none", "back-calculation"), id.CaptureN, id.Can("exper"))
	if len(id.Inputs) > 0 {
		line("inputs = [\"%s\"]", strings.Join(id.Inputs, `", "`))
	}
	if g := last.Gains; g != nil && word(id.Form, "parallel", "ideal", "series") == "parallel" {
		p := g.Parallel()
		line("\n[gains]\nkp = %.9g\nki = %.9g\nkd = %.9g\ntf = %.9g\nb = %.9g", p.Kp, p.Ki, p.Kd, p.DerivativeFilter, p.SetpointWeight)
	}
	t.Text = []byte(b.String())
	t.Config, err = simrig.Parse("twin of "+sheet.RecordName(r.Dir()), t.Text)
	return t, err
}

// word is w where it is one of those known, the first of them else.
func word(w string, known ...string) string {
	if slices.Contains(known, w) {
		return w
	}
	return known[0]
}

func identityOf(r *sheet.Reader) (protocol.Identity, error) {
	var ids map[string]string
	if err := r.LastJSON(sheet.KindIdentity, "", &ids); err != nil {
		return protocol.Identity{}, err
	}
	var lines []string
	for k, v := range ids {
		lines = append(lines, k+" "+v)
	}
	slices.Sort(lines)
	return protocol.ParseIdentity(lines)
}

func rigOfRecord(r *sheet.Reader) (rig.Rig, []byte, error) {
	for _, l := range r.Find(sheet.KindRig, "") {
		if !strings.HasSuffix(l.File, ".toml") {
			continue
		}
		text, err := r.Read(l)
		if err != nil {
			return rig.Rig{}, nil, err
		}
		parsed, err := rig.Parse(l.File, text)
		return parsed, text, err
	}
	return rig.Rig{}, nil, sheet.ErrNoEntry
}

// slidingOf is the dry friction of the staircase in V, forward and reverse; 0 where
// it is not known.
func slidingOf(r *sheet.Reader) (v [2]float64) {
	var s sheet.StaircaseRecord
	if r.LastJSON(sheet.KindFit, sheet.NameStaircase, &s) != nil {
		return v
	}
	for _, q := range s.Params {
		for i, name := range []string{"sliding friction forward", "sliding friction reverse"} {
			if q.Name == name && q.Value != nil {
				v[i] = math.Max(0, *q.Value)
			}
		}
	}
	return v
}
