package safetytest_test

import (
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// boardMutants break the board limiter: one line of its C core each.
var boardMutants = []mutant{
	{"S1", "../protocol/firmware/core/gw_line.c", "	if (b == GW_CUT_BYTE)\n		cut_locked();", "	if (b == GW_CUT_BYTE + 1)\n		cut_locked();", board, "TestCutByte"},
	{"S1", "../protocol/firmware/core/gw_run.c", "	gw_port_off();\n	off = gw_port_us();", "	off = gw_port_us();", board, "TestCutByte"},
	{"S3", "../protocol/firmware/core/gw_run.c", "g.nonce_ok && nonce == g.nonce &&", "g.nonce_ok &&", board, "TestArming"},
	{"S3", "../protocol/firmware/core/gw_run.c", "	g.nonce_ok = 0; /* used, whatever comes of it */", "", board, "TestArming"},
	{"S3", "../protocol/firmware/core/gw_run.c", "if (on(g.state) && token == g.token &&", "if (on(g.state) &&", board, "TestStaleHeartbeats"},
	{"S3", "../protocol/firmware/core/gw_run.c", "(uint16_t)(k - g.k - 1u) < 0x7FFFu", "(uint16_t)(k - g.k) < 0x7FFFu", board, "TestStaleHeartbeats"},
	{"S3", "../protocol/firmware/core/gw_line.c", " || sent != crc) {", ") {", board, "TestBareLinesAndBadOnes"},
	{"S4", "../protocol/firmware/core/gw_loop.c", "	if (size_of(g.mrad) > g.lim[LIM_W])", "	if (g.mrad > (int32_t)g.lim[LIM_V] && size_of(g.mrad) > 100u * g.lim[LIM_W])", board, "TestTrips"},
	{"S4", "../protocol/firmware/core/gw_loop.c", "if (g.lim[LIM_I] != 0 && size_of(g.amps) > g.lim[LIM_I])", "if (g.lim[LIM_I] != 0 && g.amps > 2 * (int32_t)g.lim[LIM_I])", board, "TestTrips"},
	{"S4", "../protocol/firmware/core/gw_loop.c", "if (held(&g.nocnt_us, (uint8_t)(driven", "if (held(&g.nocnt_us, (uint8_t)(0 && driven", board, "TestTrips"},
	{"S4", "../protocol/firmware/core/gw_loop.c", "if (held(&g.stall_us, driven, g.lim[LIM_STALL]))", "if (held(&g.stall_us, 0, g.lim[LIM_STALL]))", board, "TestTrips"},
	{"S4", "../protocol/firmware/core/gw_loop.c", "int32_t against = g.u1 > 0 ? -g.mrad : g.mrad;", "int32_t against = g.u1 > 0 ? g.mrad : -g.mrad;", board, "TestTrips"},
	{"S4", "../protocol/firmware/core/gw_loop.c", "	g.heat += ma * ma / 1024u;", "	g.heat += ma / 1024u;", board, "TestTrips"},
	{"S4", "../protocol/firmware/core/gw_loop.c", "	if (held(&g.run_us, 1, g.lim[LIM_RUN]))", "	if (held(&g.run_us, 0, g.lim[LIM_RUN]))", board, "TestTrips"},
	{"S4", "../protocol/firmware/core/gw_loop.c", "uv = g.uv + step;", "uv = g.uv + 2 * step;", board, "TestSlewLimit"},
	{"S4", "../protocol/firmware/core/gw_run.c", "	if (size > g.lim[volts ? LIM_V : LIM_W] ||", "	if (size > 2u * g.lim[volts ? LIM_V : LIM_W] ||", board, "TestTrips"},
	{"S4", "../protocol/firmware/core/gw_exper.c", "	if ((uint32_t)(size + amp) > g.lim[LIM_V] ||", "	if ((uint32_t)size > g.lim[LIM_V] ||", board, "TestRelayOnTheBoard"},
	{"S4", "../protocol/firmware/core/gw_run.c", "		size += (uint32_t)EXPER_SIZE;\n", "", board, "TestDriveLineThatAnExperimentWouldCarryOver"},
	{"S3", "../protocol/firmware/core/gw_exper.c", "	if (token != g.token)\n		return REF_TOKEN;", "	if (token == 0)\n		return REF_TOKEN;", board, "TestRelayOnTheBoard"},
	{"S8", "../protocol/firmware/core/gw_loop.c", "	if (now - g.beat_us > g.lim[LIM_BEAT])", "	if (now - g.beat_us > 2u * g.lim[LIM_BEAT])", board, "TestHeartbeatTimeout"},
	{"S8", "../protocol/firmware/core/gw_loop.c", "now - g.lapse_us > 60000000u)", "now - g.lapse_us > 600000000u)", board, "TestArmLapses"},
	{"S8", "../protocol/firmware/core/gw_run.c", "	if ((in & GW_GUARD_MASK) != GW_GUARD_MASK)", "	if ((in & GW_GUARD_MASK) != GW_GUARD_MASK && in == 0)", board, "TestTrips"},
	{"S9", "../protocol/firmware/core/gw_run.c", "	if (!g.limits_in || crc != gw_set_crc(g.lim_held, LIM_N))", "	if (!g.limits_in || crc == 1)", board, "TestArming"},
	{"S9", "../protocol/firmware/core/gw_sets.c", "		g.lim_held[i] = g.lim_staged[i];\n		g.lim[i] = v[i];", "		g.lim[i] = v[i];", board, "TestLimitsAreHeldAndReadBack"},
	{"S9", "../protocol/firmware/core/gw_sets.c", "	if (no == 0 && crc != gw_set_crc(g.gain_staged, G_N))", "	if (no == 0 && crc == 0)", board, "TestGains"},
	{"S10", "../protocol/firmware/core/gw_run.c", "		else if (!g.rest)\n			no = REF_MOVING;\n		if (no == 0) {", "		if (no == 0) {", board, "TestResetIsRefusedWhileTheCauseIsThere"},
}

// coreMutants break what joins the limiter with the wire.
var coreMutants = []mutant{
	{"S3", "supervisor/lines.go", "if err := a.AsError(); err != nil && a.Err != protocol.ErrVoid {\n			c.Do(safety.PatternRefused", "if err := a.AsError(); err == protocol.ErrVoid {\n			c.Do(safety.PatternRefused", core, "TestPatternsOnTheWire"},
	{"S3", "supervisor/lines.go", "return fmt.Sprintf(\"prbs %04X %d %d %d %d\", token, amp,", "return fmt.Sprintf(\"prbs %04X %d %d %d %d\", token, amp+500,", core, "TestPatternsOnTheWire"},
	{"S5", "supervisor/core.go", "		c.void() // a stop voids what was asked before it\n", "", core, "TestAStopVoidsRequests"},
	{"S5", "supervisor/lines.go", "	c.void()\n	c.connected = false\n", "	c.connected = false\n", core, "TestARestartVoidsWhatWasAsked"},
	{"S6", "supervisor/core.go", "if c.streaming && !c.lost && now-c.lastAt > linkLostAge {", "if false {", core, "TestSilenceIsALostLink"},
	{"S8", "supervisor/lines.go", "int(s.Slow.Boots) != c.boots {", "int(s.Slow.Boots) < c.boots {", core, "TestARestartVoidsWhatWasAsked"},
	{"S5", "supervisor/core.go", "		then[i] = c.taken()\n	}\n	for i, a := range voided {\n		then[i](a)", "		_ = i\n	}\n	for i, a := range voided {\n		then[i] = c.taken()\n		then[i](a)", core, "TestVoidsInsideVoidsDoNotMix"},
	{"S7", "supervisor/core.go", "c.stop == nil || now-c.stop.Asked > safety.StopAnswer {", "c.stop == nil {", core, "TestAStopIsTimedByItsOwnPress"},
	{"S7", "supervisor/core.go", "	c.lastAt, c.stop = now, nil\n", "	c.lastAt = now\n", core, "TestAStopIsTimedByItsOwnPress"},
	{"S1", "../tune/bench/urgent.go", "	case l.urgent <- f:\n", "	case l.mail <- func(s *session) { f(s); l.heeded++ }:\n", bench, "TestAStopGoesAheadOfAFullMailbox"},
	{"S1", "../tune/bench/live.go", "	l.heed()\n", "", bench, "TestAStopGoesAheadOfAFullMailbox"},
	{"S5", "../tune/bench/line.go", "if w.l.asked.Load() != w.l.heeded {", "if false {", bench, "TestNoLineFollowsAStopThatIsNotHeeded"},
	{"S13", "../tune/bench/urgent.go", "!l.style.CompareAndSwap(1, 0)", "l.style.Load() == 0", bench, "TestTheSecondPressIsACutWhileTheSessionHangs"},
	{"S14", "../tune/bench/live.go", "	case <-time.After(2 * closeWait):", "	case <-time.After(200 * closeWait):", bench, "TestClosingDoesNotWaitForASessionThatHangs"},
	{"S8", "../tune/bench/live.go", "	case drift > clockSlack:\n", "	case drift > clockSlack && s.now-l.monoWas < time.Second:\n", bench, "TestASleepWithAPauseIsSeen"},
	{"S3", "step.go", "	case Armed, CountDown: // while", "	case Arming, Armed, CountDown: // while", core, "TestRandomHistoriesOnTheWire"},
	{"S3", "supervisor/core.go", "c.token, c.beat = token, 0", "c.token = token", core, "TestRandomHistoriesOnTheWire"},
	{"S13", "supervisor/core.go", " && !c.st.Ramping() {", " {", bench, "TestARampIsNotOvertakenByACut"},
}

func init() { mutants = append(append(mutants, boardMutants...), coreMutants...) }

// runBoardMutant builds the C core from a copy with one line changed and runs the
// test that has to fail.
func runBoardMutant(t *testing.T, m mutant) (out string, err error) {
	if _, err := exec.LookPath("gcc"); err != nil {
		t.Skip("no gcc here: the board's mutants are not built")
	}
	dir := t.TempDir()
	file := filepath.Join("..", m.file)
	sources, err := filepath.Glob(filepath.Join(filepath.Dir(file), "*.[ch]"))
	if err != nil || len(sources) < 10 {
		t.Fatalf("%d sources: %v", len(sources), err)
	}
	for _, s := range sources {
		b, err := os.ReadFile(s)
		if err != nil {
			t.Fatal(err)
		}
		text := string(b)
		if filepath.Base(s) == filepath.Base(file) {
			text = strings.Replace(text, m.old, m.new, 1)
		}
		if err := os.WriteFile(filepath.Join(dir, filepath.Base(s)), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	cmd := exec.Command("go", "test", "-count=1", "-timeout=120s", "-run", "^"+regexp.QuoteMeta(m.test)+"$", ".")
	cmd.Dir = filepath.Join("..", m.pkg)
	cmd.Env = append(os.Environ(), "GAINWRIGHT_CORE="+dir)
	all, err := cmd.CombinedOutput()
	return string(all), err
}
