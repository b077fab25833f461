package sheet

import (
	"encoding/json"
	"encoding/xml"
	"errors"
	"io"
	"os"
	"path/filepath"
	"reflect"
	"regexp"
	"strings"
	"testing"

	"gainwright/tune/sheet/plain"
)

// wellFormed holds a page against XML 1.0, which is stricter than HTML: one
// string that got through raw breaks it.
func wellFormed(t *testing.T, page string) map[string]int {
	t.Helper()
	d := xml.NewDecoder(strings.NewReader(page))
	seen := map[string]int{}
	for {
		token, err := d.Token()
		if errors.Is(err, io.EOF) {
			return seen
		}
		if err != nil {
			t.Fatalf("not well formed: %v", err)
		}
		start, ok := token.(xml.StartElement)
		if !ok {
			continue
		}
		seen[start.Name.Local]++
		for _, a := range start.Attr {
			name := strings.ToLower(a.Name.Local)
			if strings.HasPrefix(name, "on") || name == "href" || name == "src" {
				t.Errorf("<%s> has %s=%q", start.Name.Local, name, a.Value)
			}
		}
	}
}

func TestReport(t *testing.T) {
	dir := exampleJob().write(t, exampleDir(t, 192))
	page := Report(dir)
	seen := wellFormed(t, page)
	// as found; as left over as found; run: speed, drive; staircase; breakaway;
	// fit, residual; Bode: magnitude, phase; verify.
	if seen["svg"] != 11 {
		t.Errorf("%d plots, want 11", seen["svg"])
	}
	if seen["script"]+seen["img"]+seen["link"]+seen["iframe"] > 0 {
		t.Error("the page wants something from outside, or runs something")
	}
	for _, want := range []string{
		"SIMULATED RIG", "agrees with its chain", "phase margin 87.0 deg", "gain margin 27.0 dB", "belt squeaks",
		"rad/s (3200 rpm)", "residual: measured less model", "not who did it", ">staircase: steady speed", "guard (hardware): FAILED",
	} {
		if !strings.Contains(page, want) {
			t.Errorf("%q is missing", want)
		}
	}
	if regexp.MustCompile(`NaN|Inf\b|%!|<nil>`).MatchString(page) {
		t.Error("a number that is none got into the page")
	}
	if strings.Contains(strings.ReplaceAll(page, `xmlns="http://www.w3.org/2000/svg"`, ""), "://") {
		t.Error("an address in the page")
	}
}

func TestReportOfDamagedSheet(t *testing.T) {
	dir := exampleJob().write(t, exampleDir(t, 192))
	r, _ := Open(dir)
	verify, _ := r.Last(KindVerify, "")
	x := tamper{t, dir}
	x.replace(verify.File, "0.4", "0.3")
	page := Report(dir)
	wellFormed(t, page)
	for _, want := range []string{"Checked: 1 problems", verify.File, "cannot be shown"} {
		if !strings.Contains(page, want) {
			t.Errorf("%q is missing", want)
		}
	}
	if page := Report(t.TempDir()); !strings.Contains(page, "no index can be read") {
		t.Error("an empty folder is not named as such")
	}
}

// evil is what a board, a rig file or a person may send: a terminal's escape
// sequences, HTML, ways out of a folder, bytes that are not UTF-8, and 10 kB.
var evil = "\x1b]0;x\x07\u009b2J\"'><script>alert(1)</script><!-- ../../\\..\\ \r\n\x00\u202e\xff" + strings.Repeat("W", 10_000)

// fill sets every field that v has, at any depth.
func fill(v reflect.Value) {
	switch v.Kind() {
	case reflect.String:
		v.SetString(evil)
	case reflect.Bool:
		v.SetBool(true)
	case reflect.Int, reflect.Int64:
		v.SetInt(3)
	case reflect.Uint64:
		v.SetUint(3)
	case reflect.Float64:
		v.SetFloat(1.5)
	case reflect.Pointer:
		v.Set(reflect.New(v.Type().Elem()))
		fill(v.Elem())
	case reflect.Struct:
		for i := range v.NumField() {
			fill(v.Field(i))
		}
	case reflect.Slice:
		if v.Type() == reflect.TypeFor[json.RawMessage]() {
			v.Set(reflect.ValueOf(Raw(map[string]string{"form": evil, evil: evil})))
			return
		}
		v.Set(reflect.MakeSlice(v.Type(), 3, 3))
		for i := range v.Len() {
			fill(v.Index(i))
		}
	case reflect.Map:
		v.Set(reflect.MakeMap(v.Type()))
		value := reflect.New(v.Type().Elem()).Elem()
		fill(value)
		v.SetMapIndex(reflect.ValueOf(evil), value)
	}
}

func filled[T any]() T {
	var v T
	fill(reflect.ValueOf(&v).Elem())
	return v
}

func TestHostileTextAppearsNowhereRaw(t *testing.T) {
	h := filled[Header]()
	h.Start, h.Simulated = testHeader.Start, true
	dir := filepath.Join(t.TempDir(), NewDirName(evil, evil, testTime(t), evil))
	s, err := Create(dir, h, testClock())
	if err != nil {
		t.Fatal(err)
	}
	tr := testTrace()
	tr.Name = evil
	step := func(_ Line, err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	step(s.Text(KindRig, evil, evil))
	step(s.Trace(evil, tr, evil))
	step(s.Remark(evil))
	for _, e := range []struct {
		kind Kind
		v    any
	}{
		{KindIdentity, map[string]string{evil: evil}}, {KindPart, filled[PartRecord]()}, {KindAsFound, filled[Snapshot]()},
		{KindCheck, filled[CheckRecord]()}, {KindInterlock, filled[InterlockRecord]()}, {KindRun, filled[RunRecord]()}, {KindFit, filled[FitRecord]()}, {KindExperiment, filled[ExperimentRecord]()},
		{KindProposal, filled[ProposalRecord]()}, {KindPush, filled[PushRecord]()}, {KindVerify, filled[VerifyRecord]()},
		{KindStore, filled[StoreRecord]()}, {KindAsLeft, filled[Snapshot]()}, {KindEvent, filled[EventRecord]()},
	} {
		step(s.Entry(e.kind, evil, e.v))
	}
	step(s.Entry(KindEvent, NameChecklist, filled[ChecklistRecord]()))
	step(s.Entry(KindEvent, NameWhyStopped, filled[WhyStoppedRecord]()))
	step(s.Entry(KindJob, NameOutcome, filled[OrderRecord]()))
	step(s.Entry(KindEvent, NameDrill, filled[DrillRecord]()))
	step(s.Entry(KindEvent, NameRunUp, filled[RunUpRecord]()))
	step(s.Entry(KindEvent, NameAcceptance, filled[AcceptanceRecord]()))
	step(s.Entry(KindRig, NameNameplate, filled[NameplateRecord]()))
	step(s.Entry(KindFit, NameMotor, filled[MotorRecord]()))
	step(s.Entry(KindFit, NameStaircase, filled[StaircaseRecord]()))
	step(s.Entry(KindFit, NameBreakaway, filled[BreakawayRecord]()))
	if err := s.Close(evil, evil); err != nil {
		t.Fatal(err)
	}
	problems, sum := Check(dir)
	if len(problems) > 0 {
		t.Fatalf("the sheet is not sound: %v", problems)
	}

	page := Report(dir)
	seen := wellFormed(t, page)
	if seen["script"] > 0 || strings.Contains(page, "<!--") {
		t.Error("HTML from outside got into the page")
	}
	r, _ := Open(dir)
	card := Card(CardOf(r))
	sizeOf(t, card)
	shown := map[string]string{"report": page, "card": card, "sticker": Sticker(CardOf(r)), "folder": filepath.Base(dir)}
	found, _ := os.ReadDir(dir)
	for _, f := range found {
		if !fileShape.MatchString(f.Name()) {
			t.Errorf("file name %q", f.Name())
		}
		b, _ := os.ReadFile(filepath.Join(dir, f.Name()))
		shown[f.Name()] = string(b)
	}
	for name, text := range shown {
		if !plain.Clean(text) {
			t.Errorf("%s holds raw text", name)
		}
	}
	if len(shown["folder"]) > 100 {
		t.Errorf("a folder's name of %d bytes", len(shown["folder"]))
	}
	// What was said must still be there for a reader who wants it.
	if sum.Header.Rig != strings.ToValidUTF8(evil, "\ufffd") {
		t.Error("the header does not give back what was recorded")
	}
}

func newOf(form reflect.Type) any { return reflect.New(form).Interface() }
