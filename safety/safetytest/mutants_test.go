package safetytest_test

import (
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

// mutant is a one-line edit of limiter code that breaks a promise. The test
// named must fail with it; a mutant that lives shows that the test sees nothing.
type mutant struct {
	promise  string // S-number that it breaks
	file     string // seen from safety
	old, new string // old stands in the file exactly once
	pkg      string // of the test, below safety
	test     string
}

const (
	step      = "."
	world     = "sim"
	drawn     = "safetytest"
	core      = "supervisor"
	bench     = "../tune/bench"
	board     = "../protocol/firmware" // its tests run the C core behind a host build
	worlds    = "TestWorlds"
	drawnTest = "TestRandomHistories"
)

var mutants = []mutant{
	{"S1", "step.go", "		} else {\n			m.do(SendStop{}) // (S1) a stop is a level", "		} else if m.Now == m.stoppingAt {\n			m.do(SendStop{}) // (S1) a stop is a level", step, "TestStopIsRepeatedUntilTheBoardSaysOff"},
	{"S1", "step.go", "if !m.boardOff {\n			m.do(SendStop{})", "if m.boardOff {\n			m.do(SendStop{})", drawn, drawnTest},
	{"S1", "sample.go", "if off && m.HeardAt >= m.stoppingAt+OffConfirm {", "if off {", step, "TestOldTelemetryDoesNotConfirmAStop"},
	{"S1", "stop.go", "if m.Now-m.stoppingAt > StopAnswer {", "if false {", step, "TestABoardThatDoesNotConfirmTrips"},
	{"S1", "effect.go", "func (SendDrive) rank() int     { return 4 }", "func (SendDrive) rank() int     { return -1 }", step, "TestAStopComesFirst"},
	{"S2", "stop.go", "moving := m.Phase == CountDown || m.Phase == Running", "moving := m.Phase == Running", step, "TestEveryUnlistedKeyStops"},
	{"S2", "step.go", "if m.Phase.ArmHeld() || m.Phase == Stopping {\n			m.stop(cause(CodePaste", "if m.Phase == Running {\n			m.stop(cause(CodePaste", step, "TestEveryUnlistedKeyStops"},
	{"S2", "step.go", "		if m.Phase != Running {\n			m.keyStops()", "		if m.Phase == Disarmed {\n			m.keyStops()", step, "TestEveryUnlistedKeyStops"},
	{"S3", "arm.go", "m.env.Admit(e.Plan.plan); err != nil {", "m.env.Admit(e.Plan.plan); err != nil && !e.Plan.valid {", step, "TestTheEnvelopeIsAskedAgainAtArming"},
	{"S3", "arm.go", "	case !m.Clear:\n", "	case false:\n", step, "TestNothingDrivesWithoutTheWholeWay"},
	{"S3", "arm.go", "if m.Now-m.ArmedAt < ClearWait {", "if m.Now-m.ArmedAt < ClearWait/2 {", step, "TestNothingDrivesWithoutTheWholeWay"},
	{"S3", "step.go", "if m.Now-m.CountedAt >= m.env.CountDown {", "if m.Now-m.CountedAt >= m.env.CountDown-100*time.Millisecond {", step, "TestNothingDrivesWithoutTheWholeWay"},
	{"S4", "admit.go", "if lim := tighter(p.VoltsMax, float64(env.VoltsMax)); top > lim {", "if lim := tighter(p.VoltsMax, float64(env.VoltsMax)); s.To > lim {", step, "TestDriveStaysInsideTheEnvelope"},
	{"S4", "admit.go", "if !env.Reverse && math.Min(s.From, s.To) < 0 {", "if false {", step, "TestDriveStaysInsideTheEnvelope"},
	{"S4", "run.go", "if math.Abs(v-m.Value) <= most {", "if math.Abs(v-m.Value) <= 9*most {", step, "TestDriveKeepsTheSlewLimit"},
	{"S4", "judge.go", "if m.limit(math.Abs(w), top, CodeSpeed, \"rad/s\") {", "if m.limit(w, top, CodeSpeed, \"rad/s\") {", step, "TestEveryLimitTrips"},
	{"S4", "judge.go", "top*(1+voltsSlack)+voltsOffset", "top*(2+voltsSlack)+voltsOffset", step, "TestEveryLimitTrips"},
	{"S4", "judge.go", "m.limit(math.Abs(float64(s.Current)), most, CodeCurrent, \"A\")", "m.limit(float64(s.Current), most, CodeCurrent, \"A\")", step, "TestEveryLimitTrips"},
	{"S4", "judge.go", "if s.Bus < m.env.BusMin {", "if s.Bus < m.env.BusMin/2 {", step, "TestEveryLimitTrips"},
	{"S4", "judge.go", "moved := math.Abs(m.pos - m.runPos)", "moved := m.pos - m.runPos", step, "TestEveryLimitTrips"},
	{"S4", "judge.go", "case i < 0.25*locked:\n			code = CodeNoCounts", "case i < 0.25*locked:\n			code = CodeStalled", step, "TestEveryLimitTrips"},
	{"S4", "judge.go", "math.Abs(w) < 0.97*j.wrongWas {", "math.Abs(w) > 0.97*j.wrongWas {", step, "TestEveryLimitTrips"},
	{"S4", "judge.go", "m.Heat*math.Exp(-h/m.env.HeatTau.Seconds())+i*i*h", "m.Heat*math.Exp(-h/m.env.HeatTau.Seconds())+i*h", step, "TestHeatFollowsTheThermalRelayCurve"},
	{"S4", "judge.go", "end := l.Gain * m.volts(float64(s.Volts))", "end := l.Gain * 0", step, "TestEveryLimitTrips"},
	{"S4", "loose.go", "far := !other && goesOn && math.Abs(j.slope) >", "far := !other && goesOn && 9*math.Abs(j.slope) <", step, "TestEveryLimitTrips"},
	{"S4", "loose.go", "	if pushed {\n		code = CodePushed\n	}\n", "	_ = pushed\n", step, "TestEveryLimitTrips"},
	{"S4", "run.go", "case m.Now-m.RunAt > m.env.RunTimeMax:", "case m.Now-m.RunAt > 2*m.env.RunTimeMax:", step, "TestRunTimeTrips"},
	{"S4", "judge.go", "if v := math.Abs(float64(s.Speed)); v > float64(m.env.CreepMax) {", "if v := math.Abs(float64(s.Speed)); v > float64(m.env.SpeedMax) {", step, "TestAShaftThatTurnsUndrivenTrips"},
	{"S5", "arm.go", "case e.Stops != m.Stops:", "case e.Stops > m.Stops:", step, "TestAStopVoidsWhatWasAskedBefore"},
	{"S5", "arm.go", "case m.stopped && m.Now-m.stoppedAt < HoldOff:", "case m.stopped && m.Now-m.stoppedAt < HoldOff/2:", step, "TestAStopVoidsWhatWasAskedBefore"},
	{"S5", "board.go", "case Disarmed, Stopping, Tripped:\n		m.log", "case Tripped:\n		m.log", step, "TestAStopVoidsWhatWasAskedBefore"},
	{"S5", "stop.go", "	m.Stops++\n	m.stopped, m.stoppedAt = true, m.Now\n	switch m.Phase {", "	m.stopped, m.stoppedAt = true, m.Now\n	switch m.Phase {", world, worlds},
	{"S6", "step.go", "		case !m.fresh():\n			m.trip(CodeStale, m.ageWords())\n", "", step, "TestNoMotionOnStaleTelemetryOrAFrozenScreen"},
	{"S6", "step.go", "m.Now-m.leasedAt > m.env.LeaseMax):\n			m.trip", "m.Now-m.leasedAt > 2*m.env.LeaseMax):\n			m.trip", step, "TestNoMotionOnStaleTelemetryOrAFrozenScreen"},
	{"S6", "sample.go", "if e.BoardUS <= m.boardUS {", "if e.BoardUS < m.boardUS {", step, "TestRepeatsAndBufferedTelemetryAreNotFresh"},
	{"S6", "sample.go", "m.HeardAt = max(m.HeardAt, board+m.offset)", "m.HeardAt = e.At", step, "TestRepeatsAndBufferedTelemetryAreNotFresh"},
	{"S6", "arm.go", "case e.Unattended && !m.Simulated:", "case false:", step, "TestUnattendedIsForSimulatedRigsOnly"},
	{"S7", "arm.go", "return ticked | SetOf(CheckStopKey, CheckCount, CheckSign)\n", "return SetOf(CheckStopKey, CheckSign)\n", step, "TestChecksComeBeforeMotion"},
	{"S7", "board.go", "j.Passed = e.SinceBeat >= lo && e.SinceBeat <= hi &&", "j.Passed = e.SinceBeat <= hi &&", step, "TestSilenceCheckIsJudgedHere"},
	{"S7", "run.go", "	if m.Silent {\n		return\n	}\n", "", step, "TestSilenceIsSilentAndBounded"},
	{"S7", "admit.go", "s.Until.Counts > SignCounts)", "s.Until.Counts > 100*SignCounts)", step, "TestBoundedRunsAreHeldToTheirBounds"},
	{"S8", "board.go", "	if m.Phase != Disarmed && m.Phase != Tripped {\n		m.trip(CodeReconnected, \"\")\n	}\n", "", step, "TestEverythingEndsDisarmed"},
	{"S8", "step.go", "	case when > m.Now+TickMax && m.Phase.ArmHeld():", "	case when > m.Now+time.Hour && m.Phase.ArmHeld():", step, "TestTheProgramWasHeldUp"},
	{"S8", "step.go", "	case when < m.Now-LateEvent:", "	case when < m.Now-time.Hour:", step, "TestEverythingEndsDisarmed"},
	{"S8", "sample.go", "e.Slow.Boots != m.BootCount {", "e.Slow.Boots < m.BootCount {", step, "TestRestartAndInterlockAreSeenInTelemetry"},
	{"S8", "step.go", "if m.Now-m.ArmedAt > m.env.ArmLapse {", "if m.Now-m.ArmedAt > 2*m.env.ArmLapse {", step, "TestTheArmLapses"},
	{"S8", "sample.go", "if s.State.Moving() {\n			m.trip", "if false {\n			m.trip", step, "TestABoardThatDrivesUnaskedIsStopped"},
	{"S9", "arm.go", "	case !m.standstill():\n		c = cause(CodeMoving, \"\")\n", "", step, "TestWritesOnlyAtStandstillDisarmed"},
	{"S9", "arm.go", "		m.LimitsHeld = false // until read back equal\n", "", step, "TestLimitsAreHeldBeforeArming"},
	{"S10", "stop.go", "	if m.Phase == Tripped {\n		m.Trip.Later++\n		m.boardOff = false\n		m.log(\"while tripped: %s\", c)\n		return\n	}\n", "", step, "TestATripKeepsItsFirstCause"},
	{"S10", "stop.go", "	case !m.Trip.Acked:\n", "	case false:\n", step, "TestATripKeepsItsFirstCause"},
	{"S10", "step.go", "case m.Now-m.Trip.At < AckWait:", "case false:", step, "TestATripKeepsItsFirstCause"},
	{"S10", "stop.go", "	case !m.boardOff:\n		m.log(\"not reset: the board", "	case false:\n		m.log(\"not reset: the board", step, "TestNoResetBeforeTheBoardSaysOff"},
	{"S11", "arm.go", "if e.Loosens && strings.TrimSpace(e.Reason) == \"\" {", "if e.Loosens && e.Reason == \"\" {", step, "TestLooseningNeedsAReason"},
	{"S12", "admit.go", "		if !(l.v > 0) || math.IsInf(l.v, 0) {\n			return refused(0, \"the \"", "		if l.v < 0 || math.IsInf(l.v, 0) {\n			return refused(0, \"the \"", step, "TestEnvelopeWithAHoleAdmitsNothing"},
	{"S13", "stop.go", "m.Now-m.ramp.at > RampAnswer:", "m.Now-m.ramp.at > time.Second:", step, "TestARampBecomesACut"},
	{"S13", "stop.go", "now > 0.95*m.ramp.speed {", "now > 9.5*m.ramp.speed {", step, "TestARampBecomesACut"},
	{"S16", "enabling.go", "if p, not := m.notEnabled(); not && m.Phase.ArmHeld() {", "if p, not := m.notEnabled(); not && m.Phase == Running {", step, "TestEnablingSwitchStopsAndDisarms"},
	{"S16", "enabling.go", "	case free:\n		return Released\n", "	case free:\n		return HeldMiddle\n", step, "TestEnablingSwitchHasThreePositions"},
	{"S16", "enabling.go", "	case in != \"\":\n		m.trip(CodeInterlock, in)\n", "	case false && in != \"\":\n		m.trip(CodeInterlock, in)\n", step, "TestTheBoardsWordOnTheEnablingSwitch"},
	{"S16", "stop.go", "if at < m.stoppingAt || m.whichInput {", "if at < m.stoppingAt {", step, "TestTheBoardsWordOnTheEnablingSwitch"},
	{"S16", "arm.go", "if p, not := m.notEnabled(); not {", "if p, not := m.notEnabled(); false && not {", step, "TestEnablingSwitchStopsAndDisarms"},
	{"S16", "inch.go", "if v := math.Abs(float64(m.Last.Volts)); v > voltsOffset {", "if v := math.Abs(float64(m.Last.Volts)); v > 1e6 {", step, "TestAnInchEndsAtItsAngle"},
	{"S16", "inch.go", "if driven > env.InchTime {", "if driven > 2*env.InchTime {", step, "TestInchIsAdmittedInsideItsBounds"},
	{"S16", "inch.go", "func (m *machine) betweenInches() bool { return m.Phase == Armed && m.Inches > 0 }", "func (m *machine) betweenInches() bool { return false }", world, worlds},
	{"S16", "step.go", "if m.Phase == Running && !m.Silent && !m.Plan.plan.Inch {", "if m.Phase == Running && !m.Silent {", world, worlds},
	{"S4", "admit.go", "top := s.reach()", "top := math.Max(math.Abs(s.From), math.Abs(s.To))", step, "TestAPatternIsAdmittedWithItsReach"},
	{"S4", "pattern.go", "case !env.Reverse && s.From < x.Amplitude:", "case false:", step, "TestAPatternIsAdmittedWithItsReach"},
	{"S3", "pattern.go", "case i != len(p.Segments)-1:", "case false:", step, "TestAPatternIsAdmittedWithItsReach"},
	{"S3", "pattern.go", "m.patterned || math.Abs(value-s.From) >= 1e-3 {", "m.patterned {", step, "TestAPatternIsAskedForOnce"},
	{"S3", "arm.go", "case e.Plan.plan.HasPattern() && !m.Patterns:", "case false:", step, "TestAPatternIsAskedForOnce"},
	{"S4", "judge.go", "end := l.Gain * m.volts(float64(s.Volts))", "end := l.Gain * float64(s.Volts)", step, "TestAPatternIsLookedAheadTo"},
	{"S16", "arm.go", "		return ticked | SetOf(CheckStopKey)\n", "		return SetOf(CheckStopKey)\n", step, "TestChecklistComesBeforeAnythingMoves"},
}

// TestMutantsFitTheCode shows that every mutant still changes one place of the
// code and that the test that is to kill it exists.
func TestMutantsFitTheCode(t *testing.T) {
	tests := map[string]string{}
	for _, pkg := range []string{step, world, drawn, core, board, bench} {
		files, err := filepath.Glob(filepath.Join("..", pkg, "*_test.go"))
		if err != nil {
			t.Fatal(err)
		}
		for _, f := range files {
			b, err := os.ReadFile(f)
			if err != nil {
				t.Fatal(err)
			}
			tests[pkg] += string(b)
		}
	}
	for i, m := range mutants {
		b, err := os.ReadFile(filepath.Join("..", m.file))
		if err != nil {
			t.Fatal(err)
		}
		if n := strings.Count(string(b), m.old); n != 1 {
			t.Errorf("mutant %d (%s): its line stands %d times in %s:\n%s", i+1, m.promise, n, m.file, m.old)
		}
		if !strings.Contains(tests[m.pkg], "func "+m.test+"(") {
			t.Errorf("mutant %d: no test %s in %s", i+1, m.test, m.pkg)
		}
	}
}

// TestMutantsAreKilled applies GAINWRIGHT_MUTANTS of the mutants (or "all"),
// from GAINWRIGHT_MUTANTS_FROM on, one at a time by a build overlay, and runs the
// test that has to fail. It does nothing without the variable: each takes a build.
func TestMutantsAreKilled(t *testing.T) {
	n, from := wanted(t)
	killed := 0
	for i := range n {
		k := (from + i) % len(mutants)
		m := mutants[k]
		t.Run(fmt.Sprintf("%d-%s-%s", k+1, m.promise, m.test), func(t *testing.T) {
			if out, err := runMutant(t, m); err == nil {
				t.Errorf("it lives:\n- %s\n+ %s\n%s", m.old, m.new, out)
			} else if !strings.Contains(out, "--- FAIL") && !strings.Contains(out, "panic:") || strings.Contains(out, " error: ") {
				t.Errorf("it does not build:\n%s", out)
			} else {
				killed++
			}
		})
	}
	t.Logf("%d of %d mutants killed (from number %d of %d)", killed, n, from%len(mutants)+1, len(mutants))
}

func wanted(t *testing.T) (n, from int) {
	s := os.Getenv("GAINWRIGHT_MUTANTS")
	if s == "" {
		t.Skip("GAINWRIGHT_MUTANTS is not set")
	}
	if n = len(mutants); s != "all" {
		v, err := strconv.Atoi(s)
		if err != nil {
			t.Fatal(err)
		}
		n = min(v, n)
	}
	if s := os.Getenv("GAINWRIGHT_MUTANTS_FROM"); s != "" {
		v, err := strconv.Atoi(s)
		if err != nil || v < 0 {
			t.Fatalf("GAINWRIGHT_MUTANTS_FROM: %q", s)
		}
		from = v
	}
	return n, from
}

func runMutant(t *testing.T, m mutant) (out string, err error) {
	if m.pkg == board {
		return runBoardMutant(t, m)
	}
	file, err := filepath.Abs(filepath.Join("..", m.file))
	if err != nil {
		t.Fatal(err)
	}
	b, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	bent := filepath.Join(dir, "bent.go")
	if err := os.WriteFile(bent, []byte(strings.Replace(string(b), m.old, m.new, 1)), 0o644); err != nil {
		t.Fatal(err)
	}
	overlay := filepath.Join(dir, "overlay.json")
	j, err := json.Marshal(map[string]any{"Replace": map[string]string{file: bent}})
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(overlay, j, 0o644); err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command("go", "test", "-vet=off", "-count=1", "-timeout=90s", "-overlay", overlay, "-run", "^"+regexp.QuoteMeta(m.test)+"$", ".", "-rapid.nofailfile")
	if m.pkg == world || m.pkg == core || m.pkg == bench {
		cmd.Args = cmd.Args[:len(cmd.Args)-1] // that package draws nothing
	}
	cmd.Dir = filepath.Join("..", m.pkg)
	cmd.Env = append(os.Environ(), "GAINWRIGHT_MUTANTS=", "GAINWRIGHT_SIM_MINUTES=")
	all, err := cmd.CombinedOutput()
	return string(all), err
}
