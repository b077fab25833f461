package main

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"testing"
	"unicode"
	"unicode/utf8"

	"gainwright/tune/sheet"
)

// fullJob is the record of one whole dry run, shared by the tests that only read;
// fullJobBase is the folder that holds it, once there is one.
var fullJobBase string

var fullJob = sync.OnceValues(func() (string, error) {
	base, err := os.MkdirTemp("", "gainwright-test-")
	if err != nil {
		return "", err
	}
	fullJobBase = base
	dir := filepath.Join(base, "20260102-080000-benchtop-7a31-22-rec00003")
	code, out, errs := command("dryrun", "--sim", "../../testdata/rigs/benchtop.toml", "--out", dir, "--json")
	if code != exitDone {
		return dir, fmt.Errorf("exit %d: %s%s", code, out, errs)
	}
	return dir, nil
})

func wholeJob(t *testing.T) string {
	t.Helper()
	dir, err := fullJob()
	if err != nil {
		t.Fatal(err)
	}
	return dir
}

func TestMain(m *testing.M) {
	code := m.Run()
	if fullJobBase != "" {
		_ = os.RemoveAll(fullJobBase)
	}
	os.Exit(code)
}

func TestWholeJobRecomputes(t *testing.T) {
	m := object(t, exitDone, "recompute", wholeJob(t), "--json")
	for _, key := range []string{"identical", "gains", "model"} {
		if m[key] == nil {
			t.Errorf("the contract's key %q is missing", key)
		}
	}
	if m["identical"] != true {
		t.Errorf("differences: %v", m["differences"])
	}
	code, out, _ := command("recompute", wholeJob(t))
	if code != exitDone || !strings.Contains(out, "IDENTICAL: ") || strings.Contains(out, "NOT IDENTICAL") {
		t.Errorf("exit %d:\n%s", code, out)
	}
}

// width is the longest line of a text.
func width(text string) (n int) {
	for _, l := range strings.Split(text, "\n") {
		n = max(n, utf8.RuneCountInString(l))
	}
	return n
}

func TestCardCommand(t *testing.T) {
	code, card, errs := command("card", wholeJob(t))
	if code != exitDone || errs != "" {
		t.Fatalf("exit %d %s", code, errs)
	}
	if width(card) > 80 || strings.Count(card, "\n") > 60 {
		t.Errorf("%d columns, %d lines", width(card), strings.Count(card, "\n"))
	}
	for _, want := range []string{"GAINS LEFT AND VERIFIED", "SIMULATED RIG", "(believed)", "breakaway 1.4", "R 2.", "target <= 10", "target none",
		"[x] silence (2", "worst case", "bus 24", "done by"} {
		if !strings.Contains(card, want) {
			t.Errorf("the card does not say %q:\n%s", want, card)
		}
	}
	for _, l := range strings.Split(card, "\n") {
		if strings.HasSuffix(l, "..") {
			t.Errorf("cut short: %q", l)
		}
	}
	code, sticker, _ := command("card", wholeJob(t), "--sticker")
	if code != exitDone || width(sticker) > 40 || strings.Count(sticker, "\n") != 1 || !strings.Contains(sticker, "benchtop") {
		t.Errorf("exit %d, sticker %q", code, sticker)
	}
	// The card that is kept in the record was made before it was closed: it says
	// the same but for the hash.
	kept, err := filepath.Glob(filepath.Join(wholeJob(t), "*card-card.txt"))
	if err != nil || len(kept) != 1 {
		t.Fatal(kept, err)
	}
	b, err := os.ReadFile(kept[0])
	if err != nil {
		t.Fatal(err)
	}
	if hashless(string(b)) != hashless(card) {
		t.Errorf("the card in the record differs:\n%s", b)
	}
}

func hashless(card string) string {
	head, tail, _ := strings.Cut(card, "\nhash   ")
	_, tail, _ = strings.Cut(tail, "\n")
	return head + tail
}

func TestReportCommand(t *testing.T) {
	dir := wholeJob(t)
	page := filepath.Join(t.TempDir(), "report.html")
	if code, out, errs := command("report", dir, "--html", page); code != exitDone || !strings.Contains(out, page) {
		t.Fatalf("exit %d %s%s", code, out, errs)
	}
	b, err := os.ReadFile(page)
	if err != nil {
		t.Fatal(err)
	}
	text := string(b)
	for _, r := range text {
		if unicode.IsControl(r) && r != '\n' {
			t.Fatalf("raw control character %U", r)
		}
	}
	for _, not := range []string{"<script", "cannot be read", "cannot be shown", "cannot be drawn", "href=", "src="} {
		if strings.Contains(text, not) {
			t.Errorf("the page holds %q", not)
		}
	}
	for _, want := range []string{"staircase: steady speed over voltage", "breakaway voltage of each ramp", "open loop: phase", "residual", "verify against forecast", "worst case", "V/(rad/s)"} {
		if !strings.Contains(text, want) {
			t.Errorf("the page does not show %q", want)
		}
	}
	if code, _, errs := command("report", dir, "--html", page); code != exitUsage || !strings.Contains(errs, "nothing is overwritten") {
		t.Errorf("over an older page: exit %d %s", code, errs)
	}
	m := object(t, exitDone, "report", dir, "--check", "--json")
	if m["ok"] != true || m["closed"] != true || len(m["problems"].([]any)) != 0 {
		t.Errorf("%v", m)
	}
	chain := m["chain"].(string)
	if m := object(t, exitDone, "report", dir, "--check", "--hash", chain[:16], "--json"); m["hash_known"] != true {
		t.Error("the record does not know its own hash")
	}
	if m := object(t, exitFailed, "report", dir, "--check", "--hash", "0123456789abcdef", "--json"); m["hash_known"] != false {
		t.Error("a made-up hash is known")
	}
}

func TestReportFindsAChange(t *testing.T) {
	dir := copySheet(t, sheetsOfTestdata(t)[0])
	file := change(t, dir, "as-found-board", "3CAC0831", "3CAC0832")
	code, out, _ := command("report", dir, "--check")
	if code != exitFailed || !strings.Contains(out, file) || !strings.Contains(out, "changed") || width(out) > 80 {
		t.Errorf("exit %d:\n%s", code, out)
	}
}

func TestCompareCommand(t *testing.T) {
	dirs := sheetsOfTestdata(t)
	m := object(t, exitDone, "compare", dirs[0], dirs[1], "--json")
	rows := m["rows"].([]any)
	if len(rows) < 12 {
		t.Fatalf("%d rows", len(rows))
	}
	for _, r := range rows {
		r := r.(map[string]any)
		for _, key := range []string{"quantity", "old", "new", "change", "allowed", "verdict"} {
			if _, ok := r[key]; !ok {
				t.Errorf("a row without the contract's key %q: %v", key, r)
			}
		}
		if v := r["verdict"]; v == "outside" || v == "mismatch" {
			t.Errorf("two jobs on the same rig differ: %v", r)
		}
	}
	if len(m["retune"].([]any)) != 0 || m["old_gains_on_new_motor"] == nil {
		t.Errorf("retune %v, old gains %v", m["retune"], m["old_gains_on_new_motor"])
	}
	// Gains that were left with little margin, and still have it, ask for nothing.
	if m := object(t, exitDone, "compare", wholeJob(t), wholeJob(t), "--json"); len(m["retune"].([]any)) != 0 {
		t.Errorf("a job against itself: retune %v", m["retune"])
	}
	// Another rig: its motor turns a disc, so the time constant is far off.
	m = object(t, exitDone, "compare", dirs[0], wholeJob(t), "--json")
	why := fmt.Sprint(m["retune"])
	if !strings.Contains(why, "time constant") || !strings.Contains(fmt.Sprint(m["notes"]), "two rigs") {
		t.Errorf("retune %v, notes %v", why, m["notes"])
	}
	code, out, _ := command("compare", dirs[0], wholeJob(t))
	if code != exitDone || !strings.Contains(out, "OUTSIDE") || !strings.Contains(out, "retune is due") {
		t.Errorf("exit %d\n%s", code, out)
	}
	for _, l := range strings.Split(out, "\n")[2:] {
		if utf8.RuneCountInString(l) > 80 && !strings.Contains(l, "/") {
			t.Errorf("over 80 columns: %q", l)
		}
	}
	code, page, _ := command("compare", wholeJob(t), wholeJob(t), "--html", "-")
	if code != exitDone || !strings.Contains(page, "verify: old and new") || !strings.Contains(page, "R at 25") || strings.Contains(page, "<script") {
		t.Errorf("exit %d, page of %d bytes", code, len(page))
	}
	code, page, _ = command("compare", dirs[0], wholeJob(t), "--html", "-")
	if code != exitDone || !strings.Contains(page, "rec00001 holds no verify to draw") {
		t.Errorf("exit %d: a record without a verify", code)
	}
	code, out, _ = command("compare", "--folder", sheetsDir)
	if code != exitDone || !strings.Contains(out, "2 records compared") || width(out) > 80 {
		t.Errorf("exit %d\n%s", code, out)
	}
}

// motorSheet makes a record that holds a motor's values alone. The numbers are
// examples.
func motorSheet(t *testing.T, counts, tau float64) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "job")
	s, err := sheet.Create(dir, sheet.Header{Rig: "press", BoardID: "B1", Program: "test", Start: "2026-01-02T08:00:00Z", Simulated: true})
	if err != nil {
		t.Fatal(err)
	}
	gain := 21.0
	if _, err := s.Entry(sheet.KindFit, sheet.NameMotor, sheet.MotorRecord{CountsPerTurn: &counts, GainRadSPerV: &gain, TauS: &tau, LoadState: "bare"}); err != nil {
		t.Fatal(err)
	}
	if err := s.Close("ended", ""); err != nil {
		t.Fatal(err)
	}
	return dir
}

// A count-only change needs no retune, and the words give the exact factors:
// 4096 counts for 2000 are x2.048, gains x0.4883 on a board that is not told.
func TestCompareOffersScaling(t *testing.T) {
	old := motorSheet(t, 2000, 0.08)
	m := object(t, exitDone, "compare", old, motorSheet(t, 4096, 0.08), "--json")
	offers := fmt.Sprint(m["offers"])
	if !strings.Contains(offers, "x2.048") || !strings.Contains(offers, "x0.4883") || !strings.Contains(offers, "exact scaling is enough") {
		t.Errorf("counts alone: %s", offers)
	}
	m = object(t, exitDone, "compare", old, motorSheet(t, 4096, 0.12), "--json")
	if offers := fmt.Sprint(m["offers"]); strings.Contains(offers, "exact scaling") || !strings.Contains(offers, "retune: ") {
		t.Errorf("counts and time constant: %s", offers)
	}
}

// The line is read by a program that is not ours and gives the same numbers.
func TestExportModelLine(t *testing.T) {
	dir := wholeJob(t)
	m := object(t, exitDone, "export", dir, "--what", "model", "--format", "json")
	code, line, errs := command("export", dir, "--what", "model", "--format", "tf")
	if code != exitDone {
		t.Fatal(errs)
	}
	var want []string
	for _, key := range []string{"num", "den"} {
		for _, v := range m[key].([]any) {
			want = append(want, fmt.Sprint(v))
		}
	}
	want = append(want, fmt.Sprint(m["dead_time"]))
	read := map[string][]string{
		// GNU Octave (Debian: octave), %.17g round-trips binary64.
		"octave-cli": {"--quiet", "--no-init-file", "--eval", line + `printf("%.17g\n", num, den, dead_time);`},
		// Python (Debian: python3), repr round-trips binary64.
		"python3": {"-c", line + "print(*map(repr, num + den + [dead_time]), sep='\\n')"},
	}
	ran := 0
	for program, args := range read {
		if _, err := exec.LookPath(program); err != nil {
			t.Logf("%s is not installed: not tried with it", program)
			continue
		}
		out, err := exec.Command(program, args...).CombinedOutput()
		if err != nil {
			t.Errorf("%s: %v\n%s", program, err, out)
			continue
		}
		ran++
		got := strings.Fields(string(out))
		if len(got) != len(want) {
			t.Fatalf("%s read %v, want %v", program, got, want)
		}
		for i := range want {
			a, err1 := strconv.ParseFloat(got[i], 64)
			b, err2 := strconv.ParseFloat(want[i], 64)
			if err1 != nil || err2 != nil || a != b {
				t.Errorf("%s read %s, want %s", program, got[i], want[i])
			}
		}
	}
	if ran == 0 {
		t.Skip("neither octave-cli nor python3 is installed")
	}
}

// The header compiles and holds the same binary32 values as the board.
func TestExportCHeader(t *testing.T) {
	cc, err := exec.LookPath("cc")
	if err != nil {
		t.Skip("no C compiler here")
	}
	dir, tmp := wholeJob(t), t.TempDir()
	header := filepath.Join(tmp, "gains.h")
	if code, _, errs := command("export", dir, "--what", "gains", "--format", "c", "--out", header); code != exitDone {
		t.Fatal(errs)
	}
	source := filepath.Join(tmp, "main.c")
	program := "#include <stdio.h>\n#include \"gains.h\"\nint main(void){float g[4]={GAIN_KP,GAIN_KI,GAIN_KD,GAIN_SETPOINT_WEIGHT};for(int i=0;i<4;i++)printf(\"%.9g\\n\",g[i]);return 0;}\n"
	if err := os.WriteFile(source, []byte(program), 0o644); err != nil {
		t.Fatal(err)
	}
	if out, err := exec.Command(cc, "-Wall", "-Werror", "-o", filepath.Join(tmp, "a.out"), source).CombinedOutput(); err != nil {
		t.Fatalf("%v\n%s", err, out)
	}
	out, err := exec.Command(filepath.Join(tmp, "a.out")).Output()
	if err != nil {
		t.Fatal(err)
	}
	g := object(t, exitDone, "export", dir, "--what", "gains")
	for i, key := range []string{"kp", "ki", "kd", "setpoint_weight"} {
		got, err := strconv.ParseFloat(strings.Fields(string(out))[i], 32)
		if want := g[key].(float64); err != nil || math.Float32bits(float32(got)) != math.Float32bits(float32(want)) {
			t.Errorf("%s: C has %v, the board %v", key, got, want)
		}
	}
}

func TestExportTraces(t *testing.T) {
	dir, to := wholeJob(t), filepath.Join(t.TempDir(), "traces")
	code, out, errs := command("export", dir, "--what", "traces", "--out", to)
	if code != exitDone {
		t.Fatal(errs)
	}
	names := strings.Fields(out)
	if len(names) < 8 {
		t.Errorf("%d traces: %s", len(names), out)
	}
	// What comes out is read by fit as it stands.
	var capture string
	for _, n := range names {
		if strings.Contains(n, "step-test-capture") {
			capture = n
		}
	}
	m := object(t, exitDone, "fit", capture, "--json")
	if m["chosen"] == nil {
		t.Errorf("fit of the exported capture: %v", m)
	}
	if code, _, errs := command("export", dir, "--what", "traces", "--out", to); code != exitUsage || !strings.Contains(errs, "nothing is overwritten") {
		t.Errorf("a second time: exit %d %s", code, errs)
	}
	c := object(t, exitDone, "export", dir, "--what", "traces", "--format", "json", "--entry", filepath.Base(capture))
	if len(c["time_s"].([]any)) < 100 || c["current_A"] == nil || c["temperature_degC"] != nil {
		t.Errorf("columns of %s", capture)
	}
}

func writeJSON(t *testing.T, v any) string {
	t.Helper()
	b, err := json.Marshal(v)
	if err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "g.json")
	if err := os.WriteFile(path, b, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// Series to ideal: K = K'(Ti' + Td')/Ti', Ti = Ti' + Td', Td = Ti'·Td'/(Ti' + Td')
// (Åström and Hägglund, PID Controllers, 2nd ed., 1995, section 3.2; from memory).
// With K' = 1, Ti' = 3 s, Td' = 1 s that is 4/3, 4 s and 0.75 s.
func TestConvertForms(t *testing.T) {
	series := writeJSON(t, map[string]any{"form": "series", "kc": 1, "ti": 3, "td": 1, "derivative_filter": 0.01})
	want := map[string]map[string]float64{
		"ideal":    {"kp": 4.0 / 3, "ti": 4, "td": 0.75},
		"parallel": {"kp": 4.0 / 3, "ki": 1.0 / 3, "kd": 1},
		"series":   {"kc": 1, "ti": 3, "td": 1},
	}
	for form, keys := range want {
		g := object(t, exitDone, "convert", "--gains", series, "--to", form, "--json")
		if g["form"] != form {
			t.Errorf("%s: form %v", form, g["form"])
		}
		for k, v := range keys {
			if got := g[k].(float64); math.Abs(got-v) > 1e-12 {
				t.Errorf("%s: %s is %v, want %v", form, k, got, v)
			}
		}
		// What is printed can be read again.
		if back := object(t, exitDone, "convert", "--gains", writeJSON(t, g), "--to", "series", "--json"); math.Abs(back["td"].(float64)-1) > 1e-12 {
			t.Errorf("%s and back: %v", form, back)
		}
	}
	// ti under 4·td has no real series form.
	ideal := writeJSON(t, map[string]any{"form": "ideal", "kp": 1, "ti": 1, "td": 0.5, "derivative_filter": 0.01})
	if code, _, errs := command("convert", "--gains", ideal, "--to", "series"); code != exitRefused || !strings.Contains(errs, "4·td") {
		t.Errorf("exit %d %s", code, errs)
	}
}

// A board that counts over 4 ms at 2000 counts a turn sees 2π/2000/0.004 rad/s in
// one count; its duty is in parts of 24 V.
func TestConvertBoard(t *testing.T) {
	g := writeJSON(t, map[string]any{"form": "parallel", "kp": 0.25, "ki": 15.0, "sample_time": 0.001})
	rig := "../../testdata/rigs/benchtop.rig.toml"
	m := object(t, exitDone, "convert", "--gains", g, "--to", "board", "--rig", rig, "--speed-unit", "counts", "--window", "0.004", "--drive-unit", "duty",
		"--integer", "--shift", "24", "--per-sample", "--json")
	unit := 2 * math.Pi / 2000 / 0.004
	kp := 0.25 * unit / 24
	ki := 15 * unit / 24 * 0.001
	if math.Abs(m["kp"].(float64)/kp-1) > 1e-12 || math.Abs(m["ki"].(float64)/ki-1) > 1e-12 {
		t.Errorf("kp %v ki %v, want %v %v", m["kp"], m["ki"], kp, ki)
	}
	if m["kp_int"].(float64) != math.RoundToEven(kp*(1<<24)) || m["ki_int"].(float64) != math.RoundToEven(ki*(1<<24)) {
		t.Errorf("integers %v %v", m["kp_int"], m["ki_int"])
	}
	m = object(t, exitDone, "convert", "--gains", g, "--to", "board", "--rig", rig, "--json")
	if m["kp"].(float64) != 0.25 || m["rounding"].(float64) != 0 {
		t.Errorf("a board in SI: %v", m)
	}
	if code, _, errs := command("convert", "--gains", g, "--to", "board", "--rig", rig, "--integer", "--shift", "0"); code != exitRefused || !strings.Contains(errs, "rounds to 0") {
		t.Errorf("exit %d %s", code, errs)
	}
}

// Every mistake at the command line ends with 2 and says what would do.
func TestUsageErrors(t *testing.T) {
	dir := sheetsOfTestdata(t)[0]
	g := writeJSON(t, map[string]any{"kp": 1, "ki": 1})
	none := filepath.Join(t.TempDir(), "none")
	for _, tt := range []struct {
		args []string
		want string
	}{
		{[]string{"recompute"}, "arg"},
		{[]string{"recompute", none}, "no such file"},
		{[]string{"recompute", g}, "name the folder"},
		{[]string{"report", t.TempDir()}, "is no record"},
		{[]string{"report", dir, "--html", "-", "--json"}, "standard output"},
		{[]string{"card", none}, "no such file"},
		{[]string{"compare", dir}, "takes two"},
		{[]string{"compare", dir, dir, dir}, "at most 2"},
		{[]string{"compare", "--folder", sheetsDir, dir}, "name no others"},
		{[]string{"export", dir}, "what"},
		{[]string{"export", dir, "--what", "soup"}, "traces, model or gains"},
		{[]string{"export", dir, "--what", "model", "--format", "c"}, "tf or json"},
		{[]string{"export", dir, "--what", "traces", "--entry", "0001-header-job.json"}, "no such trace"},
		{[]string{"convert", "--gains", g, "--to", "soup"}, "parallel, ideal, series or board"},
		{[]string{"convert", "--gains", g, "--to", "board"}, "--rig"},
		{[]string{"convert", "--gains", none, "--to", "ideal"}, "no such file"},
		{[]string{"convert", "--gains", g, "--to", "board", "--rig", "../../testdata/rigs/benchtop.rig.toml", "--speed-unit", "counts"}, "--window"},
		{[]string{"replay", none}, "no such file"},
		{[]string{"replay", dir}, "no tape"},
		{[]string{"replay", g}, "not a tape"},
		{[]string{"card", dir, "--bogus"}, "unknown flag"},
	} {
		code, out, errs := command(tt.args...)
		if code != exitUsage || !strings.Contains(errs, tt.want) || out != "" {
			t.Errorf("%v: exit %d, %q, want 2 and %q; standard output %q", tt.args, code, errs, tt.want, out)
		}
	}
}

// Text from outside that would move a terminal's cursor stays text.
func TestHostileRecord(t *testing.T) {
	evil := "\x1b[2J\u202e\u009b31m<script>alert(1)</script>"
	dir := filepath.Join(t.TempDir(), "job")
	s, err := sheet.Create(dir, sheet.Header{Rig: evil, BoardID: evil, Program: evil, Operator: evil, Start: "2026-01-02T08:00:00Z", Simulated: true})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Entry(sheet.KindFit, sheet.NameMotor, sheet.MotorRecord{LoadState: evil}); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(evil, evil); err != nil {
		t.Fatal(err)
	}
	for _, args := range [][]string{{"report", dir}, {"report", dir, "--json"}, {"report", dir, "--html", "-"}, {"card", dir}, {"card", dir, "--sticker"}, {"card", dir, "--json"},
		{"recompute", dir}, {"recompute", dir, "--json"}, {"compare", dir, dir}, {"compare", dir, dir, "--json"}, {"export", dir, "--what", "model"}} {
		_, out, errs := command(args...)
		for _, r := range out + errs {
			if r != '\n' && !unicode.IsPrint(r) {
				t.Errorf("%v prints %U raw", args, r)
				break
			}
		}
		if args[len(args)-1] == "-" && strings.Contains(out, "<script") {
			t.Errorf("%v: raw HTML", args)
		}
	}
}
