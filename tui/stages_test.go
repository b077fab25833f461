package tui

import (
	"strings"
	"time"

	"gainwright/protocol/si"
	"gainwright/tune/job"
)

// stage is a view with the screen that looks at it.
type stage struct {
	name string
	view *job.View
	keys string // pressed before the picture, separated by blanks
}

func withDrive(v *job.View, f func(*job.DriveView)) *job.View { f(&v.Drive); return v }

func simulate(v *job.View) *job.View { v.Simulated, v.Hand, v.Rig = true, true, "BENCHTOP"; return v }

// stages returns every stage of the job, and what can go wrong.
func stages() []stage {
	var out []stage
	add := func(name string, v *job.View, keys string) { out = append(out, stage{name, v, keys}) }

	v := at(job.StepPort, false)
	v.Link = job.LinkView{State: job.NoPort, Age: -1}
	v.Rig, v.Drive = "", job.DriveView{Phase: disarmed, Space: "nothing to stop yet", Unknown: true}
	v.Ports = []job.PortView{
		{Path: "/dev/ttyACM0", Product: "rig board", Serial: "7A31-22", Note: "last used for PUMP-3"},
		{Path: "/dev/ttyUSB0", Product: "USB-serial bridge", Serial: "A50285BI"}, {Path: "/dev/ttyS0", Name: "ttyS0"},
	}
	add("ports", v, "j")

	add("as-found", at(job.StepCount, false), "")
	add("path", at(job.StepStop, false), "1")

	v = at(job.StepCount, true)
	v.Drive.Counts = ptr(int64(1874))
	v.Drive.Moving = true
	v.Ask = &job.Question{ID: 7, Kind: job.AskHandTurn, Text: "Turn the shaft by hand, one full turn in the positive direction.",
		Detail: []string{"Positive is the arrow on the machine. The rig file says 2000 counts a turn."}}
	add("count", simulate(v), "")

	v = at(job.StepStop, true)
	v.Ask = &job.Question{ID: 9, Kind: job.AskStopKey, Text: "Press the stop key now.", Detail: []string{"The time from the key to the wire and to the board's answer is kept."}}
	add("stop-key", v, "")

	v = at(job.StepStep, true)
	v.Plan = stepPlan()
	add("plan", v, "")
	add("plan-why", v, "w")

	v = at(job.StepStep, true)
	v.Plan = stepPlan()
	add("armed-clear", withDrive(v, func(d *job.DriveView) {
		d.Phase, d.ArmLeft, d.ClearAsk, d.ClearWait = armed, 57*time.Second, true, 1200*time.Millisecond
	}), "")
	v = at(job.StepStep, true)
	v.Plan = stepPlan()
	add("armed-go", withDrive(v, func(d *job.DriveView) { d.Phase, d.ArmLeft, d.Clear = armed, 41*time.Second, true }), "")
	v = at(job.StepStep, true)
	v.Plan = stepPlan()
	add("count-down", withDrive(v, func(d *job.DriveView) { d.Phase, d.CountLeft, d.Clear = countDown, 2100*time.Millisecond, true }), "")

	v = at(job.StepStep, true)
	v.Plan, v.Live = stepPlan(), runningLive(2.4)
	add("running", withDrive(v, func(d *job.DriveView) {
		d.Phase, d.Moving, d.Speed, d.Volts, d.Space = running, true, si.FromRPM(2003), 9.8, "CUT, the motor coasts"
		*d.Current = 0.42
	}), "")

	v = at(job.StepSecond, false)
	v.Live = runningLive(4)
	v.Live.Running, v.Live.Ended, v.Live.Segment = false, "all segments done", ""
	add("ended", v, "")

	v = at(job.StepFit, true)
	v.Busy, v.Share = "Fitting 5 structures on 640 samples", 0.43
	add("fitting", v, "")
	v = at(job.StepDesign, false)
	v.Model = modelView()
	add("model", v, "")
	add("model-why", v, "w j")

	v = at(job.StepDesign, true)
	v.Model, v.Design = modelView(), designView()
	v.Ask = &job.Question{ID: 21, Kind: job.AskEnter, Text: "Take the proposal to the push?"}
	add("design", v, "")
	v = at(job.StepPush, false)
	byHand(v)
	add("design-by-hand", v, "8")
	add("loop", v, "l")
	v = at(job.StepPush, false)
	v.Design = designView()
	v.Design.CanBeMoved = false
	add("design-done", v, "")

	v = at(job.StepPush, true)
	v.Push = pushView("proposed")
	v.Ask = &job.Question{ID: 30, Kind: job.AskWord, Text: "Write these gains to the board's RAM?", Want: "PUMP-3"}
	add("push-word", v, "P U M")
	v = at(job.StepFirstLoop, false)
	v.Push = pushView("pushed, read back equal")
	add("pushed", v, "")

	v = at(job.StepVerify, true)
	y, u := loopStep(0.8, 100, 0.05)
	set := make([]job.Point, len(y))
	for i := range y {
		set[i] = job.Point{T: y[i].T, V: 100}
	}
	v.Live = &job.LiveView{Name: "verify, step up", Running: true, Length: 4 * time.Second, Elapsed: 800 * time.Millisecond, Segment: "1 of 6: setpoint 955 rpm",
		Speed: y, Volts: u, Setpoint: set, Expect: y, SpeedMax: float64(si.FromRPM(3200)), VoltsMax: 24}
	add("closed-loop", withDrive(v, func(d *job.DriveView) {
		d.Phase, d.Moving, d.Speed, d.Volts, d.Space = running, true, si.FromRPM(955), 4.7, "RAMP AND CUT, again: CUT"
	}), "")
	v = at(job.StepStore, false)
	v.Verify = verifyView()
	add("verify", v, "")

	v = at(job.StepStore, true)
	v.Push = pushView("stored")
	v.Push.Stored = "yes, not yet re-read"
	v.Ask = &job.Question{ID: 40, Kind: job.AskPower, Text: "Switch the board off, wait five seconds, switch it on again.", Detail: []string{"Then the gains are read back."}}
	add("store", v, "")

	v = at(job.StepCard, false)
	v.Card = cardText
	add("card", v, "c")

	v = at(job.StepStep, true)
	v.Live = runningLive(1.1)
	v.Live.Running, v.Live.Ended = false, "tripped"
	v.Alarms = []job.AlarmView{
		{At: 20 * time.Second, Text: "telemetry late", State: string(job.ReturnedUnacknowledged), Cause: "no sample for 180 ms", Do: "look at the cable"},
		{At: 30 * time.Second, Text: "battery at 9 %", State: "unacknowledged", Active: true, MayShelve: true, Shelved: job.ShelvedForATime, ShelvedUntil: 900 * time.Second, Why: "mains in ten minutes"},
		{At: 61 * time.Second, Text: "speed over limit", State: "unacknowledged", Active: true, Cause: "3215 rpm over 3200 rpm, seen by the board", Do: "find out why it ran away before the next arm: load, encoder, plan"},
	}
	v.Log = []job.LogLine{{At: 58 * time.Second, Text: "run started: step test"}, {At: 61 * time.Second, Text: "board cut the output"}}
	add("tripped", withDrive(v, func(d *job.DriveView) {
		d.Phase, d.Trip, d.Remedy = tripped, "3215 rpm over 3200 rpm, seen by the board", "find out why it ran away before the next arm"
	}), "")

	v = at(job.StepStep, true)
	v.Live = runningLive(1.1)
	v.Link.State, v.Link.Age = job.LinkLost, 1340*time.Millisecond
	add("link-lost", withDrive(v, func(d *job.DriveView) { d.Unknown, d.Speed, d.Volts = true, si.FromRPM(1204), 9.8 }), "")

	v = at(job.StepSign, false)
	v.Steps[6].Status, v.Steps[6].Reason = job.Skipped, "the rig has no low speed range"
	v.Steps[3].Status, v.Steps[3].Reason = job.Refused, "positive drive gave negative counts"
	v.Refusal = &job.RefusalView{Number: 211, What: "Closed loop is refused: drive + gives speed -.", Cause: "Either the motor leads or A and B of the encoder are swapped.",
		Remedy: "Switch the power off and swap A and B, so that positive is the arrow on the machine; then do the sign check again."}
	add("refused", v, "1")

	v = at(job.StepIdentity, true)
	v.Link.State, v.Link.Why = job.LookOnly, "This board's timeout did not show itself."
	v.Ask = &job.Question{ID: 3, Kind: job.AskNumber, Text: "How many encoder lines has the motor?", Unit: "lines", Default: "500"}
	add("number", v, "5 1 2")

	v = at(job.StepStop, false)
	add("help", v, "?")
	add("words", v, "d")
	add("pages", v, "p j j")
	add("quit", v, "q")
	add("remark", v, "r l o u d")
	v = at(job.StepStop, false)
	v.Log = []job.LogLine{{At: 3 * time.Second, Text: "port opened"}, {At: 9 * time.Second, Text: "as-found saved"}}
	add("alarms", v, "f")
	add("checks", at(job.StepSilence, false), "4")

	v = at(job.StepStep, false)
	v.Drive.Enabling = "released"
	v.Interlocks = []job.InterlockView{
		{Name: "E-stop", Now: "working position", Seen: "open, in its working position", Stop: "open by the board, 0.82 s, 4.60 turns", Passed: "passed"},
		{Name: "guard", Bit: 1, Now: "OPEN", Seen: "open"},
		{Name: "enabling switch", Bit: 2, Now: "released", Seen: "released, pressed through, held in the middle"},
	}
	add("interlocks", v, "i")

	v = at(job.StepDesign, false)
	v.Experiments = experimentsFixture()
	add("experiments", v, "t")
	add("experiments-before", v, "t k")

	v = at(job.StepCount, false)
	v.Earlier = &job.EarlierView{Record: "record 0187 of 2024-11-12", Differs: 2, Lines: []string{"record 0187 of 2024-11-12, by KM", "As found now against as left then:",
		"  identity enc: 2000 motor, now 4096 motor", "  stored kp: 0.078, now 0.021", "", "Part swapped: motor",
		"  counts per turn              2000, now 4096", "If nothing is changed on the board:", "  speed reads                  2.048 x",
		"  motor runs at                48.83 % of the setpoint", "", "quantity          unit        old       new       change   allowed      verdict",
		"counts per turn   1           2000      4096      +104.8%  equal        MISMATCH", "R at 25 °C        ohm         1.120     1.140     +1.8%    ±10 %        WITHIN",
		"retune is due: gain K moved by +17 %, more than 15 %", "offer 1: retune: the motor itself answers otherwise"}}
	add("earlier", v, "x")
	v = at(job.StepStep, true)
	v.Doing = false
	v.Ask = &job.Question{ID: 9, Kind: job.AskChoice, Text: "Why was it stopped?", Options: []string{"a person came near", "a noise", "another reason"}, Detail: []string{"The answer goes into the record."}}
	add("why-stopped", v, "")
	v = at(job.StepStep, true)
	v.Plan = stepPlan()
	v.Plan.Notes = []string{"battery 9 % and not charging", "sleep is not held off: start under systemd-inhibit"}
	v.Plan.Grave = 1
	add("inching", withDrive(v, func(d *job.DriveView) {
		d.Phase, d.Inch, d.Inches, d.Clear, d.ArmLeft = armed, true, 2, true, 41*time.Second
	}), "")
	return out
}

// screenAt presses the keys of a stage on a new screen.
func screenAt(st stage, look Look) Screen {
	s := New(look)
	for _, k := range strings.Fields(st.keys) {
		s, _ = s.Update(k, st.view)
	}
	return s
}
