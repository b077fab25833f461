package conformance

import (
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"gainwright/protocol"
)

// Options says how far the checks may go. The zero value moves nothing and
// restarts nothing.
type Options struct {
	// Permit is asked once before the checks that turn the motor, with what they
	// will do; nil: they are left out.
	Permit func(what string) bool
	// Restart restarts the board, by its power or its reset, and returns once
	// that is under way; nil: checks that need it are left out.
	Restart func() error
	// Interrupted ends the checks with a cut byte as soon as it reports true; it
	// is asked every few ms. nil: never.
	Interrupted func() bool
	// Only names paragraphs ("P2", "P6.4", "P6.4a"); others are left out. Empty:
	// all of them.
	Only []string
	// Brief leaves out the one check that takes a minute.
	Brief bool
	// Progress is told of each check as it is judged.
	Progress func(Result)
}

// Result is the outcome of one check.
type Result struct {
	ID     string `json:"id"`   // paragraph of SPEC.md, and a letter where there are several
	What   string `json:"what"` // what the board must do
	OK     bool   `json:"ok"`
	Detail string `json:"detail"` // what it did instead; empty where it is right
}

// Left is a check that could not be judged.
type Left struct {
	ID     string `json:"id"`
	What   string `json:"what"`
	Reason string `json:"reason"`
}

// What a board may be used for.
const (
	UseDrive    = "drive"
	UseLookOnly = "look-only"
)

// Report is what the checks found.
type Report struct {
	Protocol  string   `json:"protocol"` // version that the board speaks; empty: not known
	Board     string   `json:"board"`
	Firmware  string   `json:"firmware"`
	Passed    int      `json:"passed"`
	Failed    int      `json:"failed"`
	Checks    []Result `json:"checks"`
	NotJudged []Left   `json:"not_judged"`
	Conforms  bool     `json:"conforms"` // nothing failed, and what decides was judged
	Use       string   `json:"use"`
	Reason    string   `json:"reason"` // why look-only; empty for drive
	// NotRestored says what the checks could not bring back to as it was found;
	// empty: limits and gains are as found.
	NotRestored string `json:"not_restored"`
}

// check is one line of the list.
type check struct {
	id, what string
	needs    string // id of a check that must have passed for this one to mean anything
	arms     bool   // begins with the board off, tripless and the test limits in use
	moves    bool
	run      func(*session) error
}

// leftOut is why a check cannot be judged on this board.
type leftOut string

func (l leftOut) Error() string { return string(l) }

// ErrInterrupted says that Options.Interrupted ended the checks.
var ErrInterrupted = errors.New("ended by hand; a cut byte was sent")

// deciding are the checks without which nobody may drive a board.
var deciding = []string{"P1.2a", "P2.1a", "P2.2a", "P4.2a", "P6.2a", "P6.4a", "P7.2e", "P12.1a"}

// restartsMax is how often a check that a restart of the board disturbed is
// begun again.
const restartsMax = 2

// Run holds the board behind line against the checks. It ends with a cut byte,
// whatever happens. The error is that of the line or of an interruption; the
// report is then as far as it got.
func Run(line Line, o Options) (rep Report, err error) {
	s := newSession(line, o)
	r := runner{s: s, o: o, verdict: map[string]bool{}}
	defer func() { _ = line.Write([]byte{protocol.Cut}) }()
	var back error
	if err = s.open(); err == nil || errors.Is(err, errNoIdentity) {
		spoke := err == nil
		err = r.all(spoke)
		if spoke && !errors.As(err, new(*lineError)) {
			back = s.putBack()
		}
	}
	rep = r.report()
	if back != nil {
		rep.NotRestored = back.Error()
	}
	return rep, err
}

type runner struct {
	s       *session
	o       Options
	checks  []Result
	left    []Left
	verdict map[string]bool
	asked   bool
	may     bool
}

// all runs the list in order. Where the board gave no identity that can be read,
// only what the lines themselves show is judged.
func (r *runner) all(spoke bool) error {
	only := "P4.1a"
	if len(r.s.badCRC) > 0 {
		only = "P1.2a"
	}
	for _, c := range list() {
		if !spoke && c.id != only {
			r.leave(c, "the board's identity cannot be read")
			continue
		}
		if err := r.one(c); err != nil {
			return err
		}
	}
	return nil
}

func (r *runner) one(c check) error {
	if why := r.notNow(c); why != "" {
		r.leave(c, why)
		return nil
	}
	var err error
	for range restartsMax + 1 {
		before := r.s.restarts
		if err = r.try(c); err == nil || r.s.restarts == before || errors.Is(err, ErrInterrupted) || errors.As(err, new(*lineError)) {
			break
		}
		err = leftOut("the board restarted in the middle of it: " + err.Error())
	}
	switch {
	case errors.Is(err, ErrInterrupted) || errors.As(err, new(*lineError)):
		return err
	case isLeftOut(err):
		r.leave(c, err.Error())
	default:
		res := Result{ID: c.id, What: c.what, OK: err == nil}
		if err != nil {
			res.Detail = err.Error()
		}
		r.verdict[c.id] = res.OK
		r.checks = append(r.checks, res)
		if r.o.Progress != nil {
			r.o.Progress(res)
		}
	}
	return nil
}

func isLeftOut(err error) bool { return errors.As(err, new(leftOut)) }

// notNow is why a check is left out before it begins, or "".
func (r *runner) notNow(c check) string {
	if len(r.o.Only) > 0 && !slices.ContainsFunc(r.o.Only, func(p string) bool { return within(c.id, p) }) {
		return "it was not asked for"
	}
	if c.needs != "" && !r.verdict[c.needs] {
		return c.needs + " is not met, on which this one rests"
	}
	if !c.moves {
		return ""
	}
	if r.o.Permit == nil {
		return "it turns the motor, which was not asked for"
	}
	for _, id := range []string{"P2.2a", "P6.4a"} {
		if !r.verdict[id] {
			return "nothing is driven on a board that does not meet " + id
		}
	}
	if !r.asked {
		r.asked, r.may = true, r.o.Permit(r.s.moveWords())
	}
	if !r.may {
		return "it turns the motor, which was not permitted"
	}
	return ""
}

// within reports whether a check belongs to a paragraph: P6.4a to P6, P6.4 and
// P6.4a, but P12.1a not to P1.
func within(id, paragraph string) bool {
	rest, ok := strings.CutPrefix(id, paragraph)
	return ok && (rest == "" || paragraph == "" || rest[0] < '0' || rest[0] > '9')
}

// try runs a check once and leaves the board off behind it.
func (r *runner) try(c check) error {
	s := r.s
	s.forget()
	if c.arms {
		if err := s.prepare(); err != nil {
			return err
		}
	}
	err := c.run(s)
	if errors.Is(err, ErrInterrupted) {
		return err
	}
	if c.arms {
		if after := s.calm(); err == nil && errors.Is(after, ErrInterrupted) {
			return after
		}
	}
	return err
}

func (r *runner) leave(c check, why string) {
	r.left = append(r.left, Left{ID: c.id, What: c.what, Reason: why})
}

func (r *runner) report() Report {
	id := &r.s.id
	rep := Report{Board: id.Board, Firmware: id.Firmware, Checks: r.checks, NotJudged: r.left, Use: UseLookOnly}
	if rep.Checks == nil {
		rep.Checks = []Result{}
	}
	if rep.NotJudged == nil {
		rep.NotJudged = []Left{}
	}
	if id.ProtoMajor > 0 {
		rep.Protocol = fmt.Sprintf("%d.%d", id.ProtoMajor, id.ProtoMinor)
	}
	var failed []string
	for _, c := range r.checks {
		if c.OK {
			rep.Passed++
			continue
		}
		rep.Failed++
		failed = append(failed, c.ID)
	}
	var open []string
	for _, d := range deciding {
		if _, judged := r.verdict[d]; !judged && !slices.Contains(failed, d) {
			open = append(open, d)
		}
	}
	rep.Conforms = rep.Failed == 0 && len(open) == 0
	switch {
	case rep.Failed > 0:
		rep.Reason = "not met: " + strings.Join(failed, " ")
	case len(open) > 0:
		rep.Reason = "not judged: " + strings.Join(open, " ")
	case id.LookOnly() != "":
		rep.Reason = id.LookOnly()
	default:
		rep.Use = UseDrive
	}
	return rep
}

// list is every check, in the order in which they run.
func list() []check {
	return slices.Concat(identityChecks, foundChecks, lineChecks, requestChecks, cutChecks, telemetryChecks, limitChecks, armingChecks,
		motionChecks, gainChecks, captureChecks, startChecks, moveChecks, experChecks, closingChecks)
}

// errorf makes the detail of a failed check.
func errorf(format string, args ...any) error { return fmt.Errorf(format, args...) }

// ms is a duration in words for a detail.
func ms(d time.Duration) string { return fmt.Sprintf("%.1f ms", float64(d)/float64(time.Millisecond)) }
