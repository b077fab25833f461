package tui

import (
	"math"
	"math/rand/v2"
	"time"

	"gainwright/protocol/si"
	"gainwright/tune/job"
)

// The fixtures are one job on an invented bench motor of 24 V, at each stage.
// Its numbers fit together (gain 21.4 rad/s per V, time constant 88 ms, dead
// time 2.6 ms) but were measured on nothing.

const (
	fixtureGain = 21.4  // rad/s per V
	fixtureTau  = 0.088 // s
	fixtureDead = 0.0026
)

var path = []job.StepView{
	{ID: job.StepPort, Title: "Port", For: "choose the line to the board", Needs: "cable in, board powered", Moves: "nothing; opening may restart the board", Takes: "seconds", Gives: "an open line", Result: "/dev/ttyACM0, 115200 baud"},
	{ID: job.StepIdentity, Title: "Identity, as-found", For: "ask the board what it is and keep what it holds", Needs: "an open line", Moves: "nothing", Takes: "a few seconds", Gives: "as-found: gains, limits, flags", Result: "board 7A31-22, loop 1.000 ms"},
	{ID: job.StepCount, Title: "Count check", For: "see that one turn of the shaft reads as one turn", Needs: "your hand on the shaft, drive off", Moves: "nothing; you turn the shaft", Takes: "half a minute", Gives: "counts per turn", Result: "2000 counts a turn"},
	{ID: job.StepSign, Title: "Sign check", For: "see that positive drive turns the shaft the positive way", Needs: "count check, area clear", Moves: "a slow ramp each way, ended by the first counts", Takes: "a few seconds a way", Gives: "sign of the encoder, first idea of breakaway", Result: "positive both ways"},
	{ID: job.StepStop, Title: "Stop check", For: "see the stop key work, at rest and at creep speed", Needs: "sign check, area clear", Moves: "creep speed until you press the stop key", Takes: "half a minute", Gives: "time from key to wire to board", Result: "4 ms to the wire, 9 ms to the answer"},
	{ID: job.StepSilence, Title: "Silence check", For: "see the board stop by itself when the console goes silent", Needs: "stop check, area clear", Moves: "creep speed, then the board cuts", Takes: "a few seconds", Gives: "board timeout on the board's clock", Result: "251 ms"},
	{ID: job.StepLimits, Title: "Limit check", For: "see a trip of the board work: set low, provoked, set back", Needs: "silence check, area clear", Moves: "up to a low speed, then the board trips", Takes: "a few seconds", Gives: "trip speed", Result: "tripped at 648 rpm of 640"},
	{ID: job.StepBreakaway, Title: "Breakaway", For: "find the voltage at which the shaft starts to turn", Needs: "checks seen working", Moves: "slow ramps, each ended by the first motion", Takes: "half a minute", Gives: "breakaway volts each way", Result: "1.4 V and 1.6 V"},
	{ID: job.StepStaircase, Title: "Staircase", For: "steady speed against voltage, up and down, both ways", Needs: "breakaway", Moves: "levels of voltage up to the size shown", Takes: "half a minute", Gives: "gain and friction each way", Result: "21.3 rad/s per V"},
	{ID: job.StepStep, Title: "Step test", For: "the quick part of the motion: time constant and dead time", Needs: "staircase", Moves: "small steps about a middle speed", Takes: "ten seconds", Gives: "the record the model is fitted on", Result: "6 steps"},
	{ID: job.StepSecond, Title: "Second test", For: "a record of another kind that the model has not seen", Needs: "step test", Moves: "a pseudo-random pattern about a middle speed", Takes: "ten seconds", Gives: "the record the model is judged on", Result: "2 periods"},
	{ID: job.StepFit, Title: "Model", For: "fit, and judge on what the fit has not seen", Needs: "step test", Moves: "nothing", Takes: "a second", Gives: "gain, time constant, dead time, each with ±", Result: "believed"},
	{ID: job.StepDesign, Title: "Proposal", For: "gains that keep their margins on the real sampled loop", Needs: "a model that is not refused", Moves: "nothing", Takes: "a second", Gives: "gains, margins, forecast, worst case", Result: "largest-ki, Ms 1.60"},
	{ID: job.StepPush, Title: "Push", For: "write the proposed gains to RAM on the board", Needs: "a proposal, disarmed and still", Moves: "nothing", Takes: "seconds", Gives: "gains read back bit by bit", Result: "read back equal"},
	{ID: job.StepFirstLoop, Title: "First closed loop", For: "see the loop hold, with tight limits and a low setpoint", Needs: "gains pushed, area clear", Moves: "20 % of top speed for 3 s", Takes: "a few seconds", Gives: "the loop holds, or not", Result: "holds"},
	{ID: job.StepVerify, Title: "Verify", For: "measured against forecast and against the targets", Needs: "first closed loop", Moves: "setpoint steps both ways", Takes: "ten seconds", Gives: "pass or fail per target", Result: "passed"},
	{ID: job.StepStore, Title: "Store", For: "keep the gains through a power cut, and see that they were kept", Needs: "verify", Moves: "nothing; you switch the board off and on", Takes: "a minute", Gives: "stored gains read back equal", Result: "equal"},
	{ID: job.StepAsLeft, Title: "As-left", For: "keep what the board holds now", Needs: "nothing but the line", Moves: "nothing", Takes: "seconds", Gives: "as-left: gains, limits, flags", Result: "saved"},
	{ID: job.StepCard, Title: "Card", For: "one page to print, sign and leave with the machine", Needs: "as-left", Moves: "nothing", Takes: "a moment", Gives: "card and sticker line", Result: "written"},
}

// at returns the view of a job that stands at a step, with all before it done.
func at(id job.StepID, doing bool) *job.View {
	v := &job.View{
		Now: 61250 * time.Millisecond, Program: "gainwright 0.1", Rig: "PUMP-3", Board: "7A31-22", Port: "/dev/ttyACM0",
		Sheet: "sheets/pump-3-0192",
		Link:  job.LinkView{State: job.Fresh, Age: 12 * time.Millisecond, Frames: 12345, Rate: 200},
		Drive: job.DriveView{Phase: disarmed, Space: "sends a stop", SpeedMax: si.FromRPM(3200), VoltsMax: 24, HeatShare: 0.12,
			Bus: ptr(si.Volts(24.1)), Current: ptr(si.Amps(0)), Counts: ptr(int64(0))},
		Current: id, Doing: doing,
	}
	done := true
	for _, st := range path {
		st.Ready = done
		switch {
		case st.ID == id && doing:
			st.Status, st.Result, done = job.Doing, "", false
		case st.ID == id:
			st.Status, st.Result, done = job.ToDo, "", false
		case done:
			st.Status = job.Done
		default:
			st.Status, st.Result = job.ToDo, ""
		}
		v.Steps = append(v.Steps, st)
	}
	if done := v.Steps[1].Status == job.Done; done {
		v.Found = found()
		v.Checks = []job.CheckView{
			{Name: "count", State: "seen working", Detail: "2000 counts in one turn by hand"},
			{Name: "sign", State: "seen working", Detail: "positive drive, positive speed, both ways"},
			{Name: "stop", State: "to do"}, {Name: "silence", State: "to do"}, {Name: "limit", State: "to do"},
		}
	}
	return v
}

func ptr[T any](v T) *T { return &v }

func found() *job.FoundView {
	gains := []job.Fact{{Name: "Kp", Value: "0.02100 V per rad/s", Why: "as the board answered, binary32 0x3cac0831"}, {Name: "Ki", Value: "2.200 V per rad"}, {Name: "Kd", Value: "0 V·s per rad"}}
	return &job.FoundView{
		File: "sheets/pump-3-0192/as-found.json", Same: true, Running: gains, Stored: gains,
		Lines: []job.Fact{
			{Name: "firmware", Value: "rigboard 2.3"}, {Name: "protocol", Value: "1"}, {Name: "loop period", Value: "1.000 ms"},
			{Name: "gain form", Value: "parallel"}, {Name: "boot count", Value: "41"}, {Name: "reset cause", Value: "power"},
			{Name: "speed ceiling", Value: "3200 rpm, held by board"}, {Name: "current limit", Value: "5.0 A, held by board"},
			{Name: "timeout", Value: "250 ms"},
		},
	}
}

// respond integrates the fixture motor under a voltage; the noise is seeded.
func respond(length, dt float64, drive func(float64) float64, noise float64) (speed, model, volts []job.Point) {
	rng := rand.New(rand.NewPCG(24, 5))
	w := 0.0
	for t := 0.0; t <= length; t += dt {
		u := drive(t - fixtureDead)
		w += dt / fixtureTau * (fixtureGain*u - w)
		speed = append(speed, job.Point{T: t, V: w + noise*rng.NormFloat64()})
		model = append(model, job.Point{T: t, V: w})
		volts = append(volts, job.Point{T: t, V: drive(t)})
	}
	return speed, model, volts
}

func stepsDrive(t float64) float64 {
	switch {
	case t < 0.2:
		return 0
	case int((t-0.2)/0.6)%2 == 0:
		return 9.8
	}
	return 6.0
}

func stepPlan() *job.PlanView {
	_, model, volts := respond(4, 0.01, stepsDrive, 0)
	return &job.PlanView{
		Name: "step test", Purpose: "Steps about a middle speed, for time constant and dead time.", Segments: 7, Mode: "volts, open loop",
		Drive: volts, Expect: model, Band: 0.12, Unit: "V", Size: 1, Resize: true,
		Facts: []job.Fact{
			{Name: "top speed", Value: "2003 rpm", Limit: "of 3200", Verdict: "ok", Why: "K·u = 21.4 rad/s per V × 9.8 V from the staircase, + 12 % band"},
			{Name: "top voltage", Value: "9.8 V", Limit: "of 24.0", Verdict: "ok"},
			{Name: "peak current", Value: "3.4 A", Limit: "of 5.0", Verdict: "ok", Why: "(9.8 V − 6.0 V) / 1.12 Ω at the step"},
			{Name: "heat", Value: "3 % more", Limit: "15 of 100", Verdict: "ok"},
			{Name: "bus, highest", Value: "25.2 V", Limit: "of 30.0", Verdict: "ok"},
			{Name: "turns", Value: "92", Limit: "no bound", Verdict: "ok"},
			{Name: "time", Value: "4.0 s", Limit: "of 20 s", Verdict: "ok"},
		},
	}
}

func runningLive(until float64) *job.LiveView {
	speed, model, volts := respond(4, 0.005, stepsDrive, 0.8)
	n := int(until / 0.005)
	for i := 300; i < 312; i++ {
		speed[i].V = math.NaN()
	}
	return &job.LiveView{
		Name: "step test", Running: true, Length: 4 * time.Second, Elapsed: time.Duration(until * float64(time.Second)),
		Segment: "4 of 7: 9.8 V", Speed: speed[:n], Volts: volts[:n], Expect: model,
		SpeedMax: float64(si.FromRPM(3200)), VoltsMax: 24, Marks: []float64{1.15}, Learn: "time constant 88 ± 6 ms",
	}
}

func modelView() *job.ModelView {
	speed, model, _ := respond(4, 0.01, stepsDrive, 0.8)
	hold, holdFit, _ := respond(3, 0.01, func(t float64) float64 {
		return 7.9 + 1.6*float64(int(t*7)*int(t*7)%3-1)
	}, 0.9)
	res := make([]job.Point, len(speed))
	for i := range speed {
		res[i] = job.Point{T: speed[i].T, V: speed[i].V - model[i].V}
	}
	var stairs []job.Point
	for u := 2.0; u <= 12; u += 2 {
		stairs = append(stairs, job.Point{T: u, V: fixtureGain*u - 28}, job.Point{T: u, V: fixtureGain*u - 26})
	}
	return &job.ModelView{
		Verdict: "believed", Reasons: []string{"hold-out NRMSE 0.061", "residual is white (p 0.31)"},
		Params: []job.Fact{
			{Name: "gain K", Value: "21.4 ± 0.6 rad/s per V", Why: "least squares on the output error, 640 samples of run 10; ± is two standard deviations"},
			{Name: "time constant", Value: "88 ± 5 ms"}, {Name: "dead time", Value: "2.6 ± 0.4 ms"},
		},
		Friction: []job.Fact{{Name: "breakaway fwd", Value: "1.4 ± 0.3 V"}, {Name: "breakaway rev", Value: "1.6 ± 0.3 V"}},
		Candidates: []job.Candidate{
			{Kind: "first-order", NRMSE: "0.048", Holdout: "0.061", AICc: "-812", Verdict: "believed", Chosen: true},
			{Kind: "second-order", NRMSE: "0.047", Holdout: "0.063", AICc: "-810", Verdict: "care"},
			{Kind: "integrating", NRMSE: "0.41", Holdout: "0.52", AICc: "-201", Verdict: "refused"},
		},
		Data: speed, Fit: model, Residual: res, HoldData: hold, HoldFit: holdFit, Stairs: stairs,
		Plausible: []job.Fact{
			{Name: "gain fwd/rev", Value: "2 % apart", Verdict: "ok"}, {Name: "dead time", Value: "2.6 periods", Verdict: "ok"},
			{Name: "breakaway", Value: "6 % of 24 V", Verdict: "ok"}, {Name: "samples used", Value: "97 %", Verdict: "ok"},
		},
	}
}

func loopStep(length, setpoint, tau float64) (y, u []job.Point) {
	for t := 0.0; t <= length; t += 0.005 {
		y = append(y, job.Point{T: t, V: setpoint * (1 - math.Exp(-t/tau))})
		u = append(u, job.Point{T: t, V: setpoint/fixtureGain + 3*math.Exp(-t/tau)})
	}
	return y, u
}

func designView() *job.DesignView {
	y, u := loopStep(0.6, 100, 0.05)
	old, _ := loopStep(0.6, 100, 0.12)
	for i := range old {
		old[i].V += 34 * math.Exp(-old[i].T/0.1) * math.Sin(old[i].T*26)
	}
	return &job.DesignView{
		Bode: bodeFixture(), MsMax: 1.6, CanBeMoved: true, SetPoint: 100, Step: y, Drive: u, FoundStep: old,
		Gains: []job.Fact{{Name: "Kp", Value: "0.0782 V per rad/s", Why: "rule largest-ki at Ms 1.60 on the model of run 10"}, {Name: "Ki", Value: "0.888 V per rad"}},
		Margins: []job.Fact{{Name: "phase margin", Value: "87.0 deg"}, {Name: "gain margin", Value: "21.3 dB"}, {Name: "Ms", Value: "1.12"},
			{Name: "overshoot", Value: "0 %"}, {Name: "settling", Value: "0.20 s"}, {Name: "speed noise", Value: "9 rpm"}, {Name: "top drive", Value: "11.2 V"}},
		Worst: []job.Fact{{Name: "phase margin", Value: "74.1 deg"}, {Name: "gain margin", Value: "18.0 dB"}, {Name: "Ms", Value: "1.21"}, {Name: "overshoot", Value: "2 %"}, {Name: "settling", Value: "0.27 s"}},
		Found: []job.Fact{{Name: "phase margin", Value: "34.0 deg", Verdict: "low"}, {Name: "Ms", Value: "2.31", Verdict: "high"}, {Name: "overshoot", Value: "34 %", Verdict: "high"}, {Name: "settling", Value: "0.47 s"}},
		Targets: []job.Fact{{Name: "phase margin", Value: ">= 55"}, {Name: "gain margin", Value: ">= 8 dB"}, {Name: "overshoot", Value: "<= 10 %"},
			{Name: "settling", Value: "<= 0.30 s"}},
		Rules: []job.RuleRow{
			{Rule: "largest-ki", Kp: "0.0782", Ki: "0.888", Ms: "1.12", PM: "87.0", GM: "21.3", Overshoot: "0 %", Settling: "0.20 s", Chosen: true},
			{Rule: "simc", Kp: "0.790", Ki: "8.98", Ms: "1.58", PM: "61.0", GM: "9.9", Overshoot: "4 %", Settling: "0.03 s", Note: "noise 5x"},
			{Rule: "lambda", Kp: "0.0430", Ki: "0.489", Ms: "1.06", PM: "89.0", GM: "26.4", Overshoot: "0 %", Settling: "0.37 s"},
			{Rule: "pole-placement", Note: "does not apply: the load inertia is not known"},
		},
	}
}

// byHand is a person at the gains, one key on.
func byHand(v *job.View) {
	d := designView()
	d.ByHand, d.Keys, d.BeforeStep = true, 1, d.FoundStep
	d.Gains = []job.Fact{{Name: "> kp", Value: "0.0821 V/(rad/s), was 0.0782"}, {Name: "  ki", Value: "0.888 V/rad"}, {Name: "  b", Value: "1 1"}}
	d.Notes = []string{"not to be pushed: Ms is 2.10 on the fitted model, over the largest bound that may be chosen, 2.0"}
	v.Doing, v.Design = false, d
}

func pushView(state string) *job.PushView {
	p := &job.PushView{Word: "PUMP-3", State: state, Rows: []job.PushRow{
		{Name: "Kp", Old: "0.02100", New: "0.07820", Unit: "V per rad/s"},
		{Name: "Ki", Old: "2.200", New: "0.8880", Unit: "V per rad"},
		{Name: "Kd", Old: "0", New: "0", Unit: "V·s per rad"},
	}}
	if state != "proposed" {
		for i := range p.Rows {
			p.Rows[i].ReadBack = p.Rows[i].New
		}
	}
	return p
}

func verifyView() *job.VerifyView {
	y, _ := loopStep(0.8, 100, 0.05)
	e := &job.VerifyView{Passed: true, Rows: []job.Fact{
		{Name: "overshoot, up", Value: "1 %", Limit: "10 %", Verdict: "pass"}, {Name: "overshoot, down", Value: "2 %", Limit: "10 %", Verdict: "pass"},
		{Name: "settling, up", Value: "0.20 s", Limit: "0.30 s", Verdict: "pass"}, {Name: "settling, down", Value: "0.22 s", Limit: "0.30 s", Verdict: "pass"},
		{Name: "steady error", Value: "3 rpm", Limit: "one step, 30 rpm", Verdict: "pass"},
	}}
	rng := rand.New(rand.NewPCG(3, 4))
	for _, q := range y {
		e.Forecast = append(e.Forecast, q)
		e.Setpoint = append(e.Setpoint, job.Point{T: q.T, V: 100})
		e.BandLow = append(e.BandLow, job.Point{T: q.T, V: q.V - 4})
		e.BandHigh = append(e.BandHigh, job.Point{T: q.T, V: q.V + 4})
		e.Measured = append(e.Measured, job.Point{T: q.T, V: q.V + 0.8*rng.NormFloat64() + 1})
	}
	return e
}

const cardText = `SPEED LOOP CARD          rig PUMP-3  board 7A31-22  file PUMP-3.toml  rec 0192
date 2025-11-04 10:12    by ____________         witnessed ____________
--------------------------------------------------------------------------------
                        AS FOUND              AS LEFT              unit
Kp                      0.0210                0.0782               V per rad/s
Ki                      2.20                  0.888                V per rad
--------------------------------------------------------------------------------
model K 21.4+-3%  tau 88+-5 ms  delay 2.6 ms  breakaway 1.4/1.6 V  PM 87 deg
limits held by board: 3200 rpm  5 A  30 V  link 250 ms (measured 251)
remarks ________________________________________________________________________
signed ______________________________  customer ______________________________
`

// bodeFixture is the loop of a PI on one lag with dead time: 1/(jω·0.1)·e^(−jω·0.004),
// and the same 1.3 times as large.
func bodeFixture() (b job.BodeView) {
	for i := range 160 {
		x := -1 + 3.2*float64(i)/159
		w := 2 * math.Pi * math.Pow(10, x)
		db, deg := -20*math.Log10(0.1*w), -90-0.004*w*180/math.Pi
		b.Gain, b.Phase = append(b.Gain, job.Point{T: x, V: db}), append(b.Phase, job.Point{T: x, V: deg})
		b.WorstGain, b.WorstPhase = append(b.WorstGain, job.Point{T: x, V: db + 2.3}), append(b.WorstPhase, job.Point{T: x, V: deg - 3})
	}
	b.Crossover, b.PhaseCross = ptr(math.Log10(10/(2*math.Pi))), ptr(math.Log10(math.Pi/2/0.004/(2*math.Pi)))
	b.PM, b.GM = ptr(90-0.04*180/math.Pi), ptr(20*math.Log10(0.1*math.Pi/2/0.004))
	return b
}
