package sheet

import (
	"errors"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"gainwright/tune/trace"
	"github.com/google/go-cmp/cmp"
)

var testHeader = Header{
	Rig: "PUMP-3", BoardID: "7A31-22", Program: "gainwright test", Operator: "A. Meyer",
	Seed: math.MaxUint64, Start: "2025-11-04T10:12:00+01:00", Simulated: true,
}

// testClock moves on by a quarter of a second at each look.
func testClock() Option {
	now := time.Duration(0)
	return WithClock(func() time.Duration { now += 250 * time.Millisecond; return now })
}

func testTrace() *trace.Trace {
	tr := &trace.Trace{Name: "step", Window: 0.001, RadPerCount: 2 * math.Pi / 2000}
	for i := range 20 {
		tr.Time = append(tr.Time, float64(i)*0.001)
		tr.Voltage = append(tr.Voltage, 6)
		tr.Speed = append(tr.Speed, 128*(1-math.Exp(-float64(i)/8)))
	}
	return tr
}

// writeSmall writes a sheet with every way of making an entry. It goes on after
// an error, as a job that does not look would.
func writeSmall(dir string, h Header, options ...Option) (*Sheet, error) {
	s, err := Create(dir, h, append([]Option{testClock()}, options...)...)
	if err != nil {
		return nil, err
	}
	tape, err := s.Stream(KindTape, "session", "txt")
	if err == nil {
		_, _ = tape.Write([]byte("0.000 > id 1\n"))
		_ = tape.Mark()
	}
	_, _ = s.Text(KindRig, "PUMP-3", "name = \"PUMP-3\"\nvolts = 24\n")
	_, _ = s.Entry(KindCheck, "count", map[string]any{"counts_per_turn": 2000, "passed": true})
	_, _ = s.Trace("step forward", testTrace(), "after the checks")
	if tape != nil {
		_, _ = tape.Write([]byte("0.004 < ok 1\n"))
	}
	_, _ = s.Entry(KindFit, "first-order", map[string]float64{"gain": 21.4, "tau_s": 0.1 + 0.2})
	_, _ = s.Remark("belt squeaks")
	return s, s.Close("accepted", "")
}

func mustWrite(t *testing.T) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "job")
	if _, err := writeSmall(dir, testHeader); err != nil {
		t.Fatal(err)
	}
	return dir
}

func TestSheetReadsBack(t *testing.T) {
	dir := mustWrite(t)
	r, problems := Open(dir)
	if len(problems) > 0 {
		t.Fatalf("a whole sheet has problems: %v", problems)
	}
	if diff := cmp.Diff(testHeader, r.Header()); diff != "" {
		t.Error(diff)
	}
	var names []string
	for _, l := range r.Lines() {
		names = append(names, l.File)
	}
	want := []string{
		"0001-header-job.json", "tape-session.txt", "0003-rig-pump-3.toml", "0004-check-count.json",
		"0005-trace-step-forward.csv", "0006-fit-first-order.json", "0007-remark-operator.txt",
		"tape-session.txt", "0009-close-accepted.json",
	}
	if diff := cmp.Diff(want, names); diff != "" {
		t.Error(diff)
	}
	var fit map[string]float64
	if err := r.LastJSON(KindFit, "first-order", &fit); err != nil || fit["tau_s"] != 0.1+0.2 {
		t.Errorf("fit read back as %v, %v", fit, err)
	}
	line, _ := r.Last(KindTrace, "step forward")
	tr, err := r.Trace(line)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(testTrace(), tr); diff != "" {
		t.Error(diff)
	}
	if c, err := r.Closing(); err != nil || c.Outcome != "accepted" || c.Entries != 9 {
		t.Errorf("closing %+v, %v", c, err)
	}
}

// The index promises that sha256sum is enough to follow the chain by hand. So
// GNU coreutils, which knows nothing of this program, is made to do it.
func TestChainByHand(t *testing.T) {
	if _, err := exec.LookPath("sha256sum"); err != nil {
		t.Skip("no sha256sum here")
	}
	const script = `cd "$1"; chain=$(grep '^#' index.txt | sha256sum | cut -d' ' -f1)
grep -v '^#' index.txt | while read -r line; do
  body=${line% *}; chain=$(printf '%s %s' "$chain" "$body" | sha256sum | cut -d' ' -f1)
  set -- $body
  [ "$(head -c "$5" "$4" | sha256sum | cut -d' ' -f1)" = "$6" ] || echo "file $4 differs"
  [ "$chain" = "${line##* }" ] && echo "$1 follows" || echo "$1 does not follow"
done`
	out, err := exec.Command("sh", "-c", script, "sh", mustWrite(t)).CombinedOutput()
	if err != nil {
		t.Fatal(err, string(out))
	}
	if n := strings.Count(string(out), " follows"); n != 9 || strings.Contains(string(out), "d") {
		t.Errorf("by hand:\n%s", out)
	}
}

func TestCreateRefuses(t *testing.T) {
	dir := mustWrite(t)
	before, _ := os.ReadFile(filepath.Join(dir, indexName))
	if _, err := Create(dir, testHeader); !errors.Is(err, ErrNotEmpty) {
		t.Errorf("a used folder: %v", err)
	}
	after, _ := os.ReadFile(filepath.Join(dir, indexName))
	if string(before) != string(after) {
		t.Error("the old index was touched")
	}
	for name, h := range map[string]Header{
		"no rig":     {Program: "p", Start: testHeader.Start},
		"no program": {Rig: "r", Start: testHeader.Start},
		"no start":   {Rig: "r", Program: "p", Start: "yesterday"},
	} {
		if _, err := Create(t.TempDir(), h); !errors.Is(err, ErrHeader) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestEntryRefuses(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "job")
	s, err := Create(dir, testHeader, testClock())
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Entry(KindFit, "x", math.NaN()); err == nil {
		t.Error("a NaN was recorded")
	}
	if _, err := s.Entry("gossip", "x", 1); !errors.Is(err, ErrKind) {
		t.Errorf("unknown kind: %v", err)
	}
	bad := testTrace()
	bad.Time[3] = bad.Time[2]
	if _, err := s.Trace("x", bad); !errors.Is(err, trace.ErrInvalid) {
		t.Errorf("bad trace: %v", err)
	}
	if s.Err() != nil {
		t.Errorf("a refused entry stopped the record: %v", s.Err())
	}
	if err := s.Close("refused", "test"); err != nil {
		t.Fatal(err)
	}
	if _, err := s.Remark("late"); !errors.Is(err, ErrClosed) {
		t.Errorf("after Close: %v", err)
	}
	if problems, sum := Check(dir); len(problems) > 0 || sum.Entries != 2 {
		t.Errorf("%d entries, problems %v", sum.Entries, problems)
	}
}

// Characters that do not print, the ones past the first 65536 too, are escapes
// in the file and themselves again when read.
func TestEntryReadsBackWhatDoesNotPrint(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "job")
	s, err := Create(dir, testHeader, testClock())
	if err != nil {
		t.Fatal(err)
	}
	const text = "a\U000e0041\u202e\u0085\x1b\x7f<&>b é 試"
	line, err := s.Entry(KindEvent, "x", EventRecord{What: text})
	if err != nil {
		t.Fatal(err)
	}
	r, _ := Open(dir)
	var e EventRecord
	if err := r.JSON(line, &e); err != nil || e.What != text {
		t.Errorf("read back %q, %v", e.What, err)
	}
	b, _ := os.ReadFile(filepath.Join(dir, line.File))
	if want := `a\udb40\udc41\u202e\u0085\u001b\u007f<&>b é 試`; !strings.Contains(string(b), want) {
		t.Errorf("the file holds %s, want %s", b, want)
	}
}

// Words that come with a trace must not become settings of it.
func TestTraceNotesAreNotSettings(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "job")
	s, err := Create(dir, testHeader, testClock())
	if err != nil {
		t.Fatal(err)
	}
	tr := testTrace()
	tr.RadPerCount = 0 // not written, so that nothing after it would put it right
	tr.Name = "step\n# rad_per_count = 9"
	cells := make([]string, tr.Len())
	cells[3] = "\x1b[2J"
	tr.Other = []trace.Column{{Name: "remark", Unit: "1", Text: cells}}
	line, err := s.Trace("step", tr, "hold = from", "rad_per_count = 7\nhold = from")
	if err != nil {
		t.Fatal(err)
	}
	r, _ := Open(dir)
	got, err := r.Trace(line)
	if err != nil {
		t.Fatal(err)
	}
	if got.Window != tr.Window || got.Hold != tr.Hold || got.RadPerCount != tr.RadPerCount {
		t.Errorf("settings changed: window %g, hold %s, %g rad a count", got.Window, got.Hold, got.RadPerCount)
	}
	if got.Other[0].Text[3] != `\x1b[2J` {
		t.Errorf("an escape sequence in a cell: %q", got.Other[0].Text[3])
	}
	if diff := cmp.Diff(tr.Speed, got.Speed); diff != "" {
		t.Error(diff)
	}
}

// A record with more behind its end is not a closed one.
func TestTextBehindTheEnd(t *testing.T) {
	dir := mustWrite(t)
	tamper{t, dir}.edit(indexName, func(s string) string { return s + "0010 2025-11-04" })
	r, problems := Open(dir)
	if r.Closed() || len(problems) == 0 {
		t.Errorf("passes for closed; problems %v", problems)
	}
}
