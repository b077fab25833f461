// Package palette turns the roles of text on screen (a title, an alarm, a value
// that is no longer fresh) into terminal sequences, rendered once and kept. It
// decides how a role looks; it does not know where it stands or what it says.
//
// The colours are the sixteen that every terminal has, and their exact tint is
// the terminal's own. So text is either in the terminal's default colours or in
// a pair of foreground and background that keeps its contrast in the common
// tables, and lines of charts use the two hues that stand out from black and
// from white alike: no one has to say whether the background is light or dark,
// and the terminal is never asked. Red belongs to alarms. Every role differs in
// words or shape as well, so that nothing is lost without colour.
package palette

import (
	"io"
	"strings"

	"github.com/charmbracelet/lipgloss"
	"github.com/muesli/termenv"
)

// The library under the screens asks the terminal for its background when it
// starts, which takes seconds on one that never answers. This package sorts
// before it, so that the answer is there before the question.
func init() { lipgloss.SetHasDarkBackground(true) }

// Role is what a piece of text is.
type Role uint8

// The roles.
const (
	Plain    Role = iota
	Strong        // titles, values
	Key           // a key that may be pressed
	Bar           // a heading across the screen
	Moving        // the shaft turns or is about to
	Caution       // armed; abnormal
	Alarm         // red: an alarm
	AlarmOff      // the other half of a flash
	Good          // passed, fresh
	Notice        // simulated, look-only
	Old           // a value that is not fresh
	Chosen        // the row that a key acts on
	Main          // curve: measured
	Beside        // curve: another one
	Thin          // curve: forecast, setpoint; axes
	Edge          // curve: limit
	roleCount
)

// Options is what the surroundings say about the terminal.
type Options struct {
	NoColour bool // attributes only
	Dumb     bool // no sequences at all
}

// Styles holds what to write before and after a text of each role.
type Styles struct {
	prefix [roleCount]string
	suffix [roleCount]string
}

// Pair is a foreground and a background of the sixteen; -1 is the terminal's
// default.
type Pair struct {
	Fore, Back int
	Mark       bool // a line of a chart, not text
}

type look struct {
	pair                  Pair
	bold, reverse, strike bool
	plainBold, plainRev   bool // where there are no colours
}

var none = Pair{Fore: -1, Back: -1}

var looks = [roleCount]look{
	Plain:    {pair: none},
	Strong:   {pair: none, bold: true, plainBold: true},
	Key:      {pair: none, bold: true, plainBold: true},
	Bar:      {pair: Pair{Fore: 0, Back: 7}, plainRev: true},
	Moving:   {pair: none, bold: true, reverse: true, plainBold: true, plainRev: true},
	Caution:  {pair: Pair{Fore: 0, Back: 11}, plainBold: true, plainRev: true},
	Alarm:    {pair: Pair{Fore: 15, Back: 1}, bold: true, plainBold: true, plainRev: true},
	AlarmOff: {pair: none, bold: true, plainBold: true},
	Good:     {pair: Pair{Fore: 0, Back: 2}},
	Notice:   {pair: Pair{Fore: 0, Back: 6}, plainRev: true},
	Old:      {pair: Pair{Fore: 0, Back: 7}, strike: true},
	Chosen:   {pair: none, reverse: true, plainRev: true},
	Main:     {pair: Pair{Fore: 12, Back: -1, Mark: true}, plainBold: true},
	Beside:   {pair: Pair{Fore: 5, Back: -1, Mark: true}},
	Thin:     {pair: none},
	Edge:     {pair: none, bold: true, plainBold: true},
}

// Pairs returns the colours of every role that sets any, for whoever wants to
// check their contrast.
func Pairs() map[Role]Pair {
	m := map[Role]Pair{}
	for r, l := range looks {
		if l.pair != none {
			m[Role(r)] = l.pair
		}
	}
	return m
}

// New renders the styles of all roles once.
func New(o Options) *Styles {
	s := &Styles{}
	if o.Dumb {
		return s
	}
	r := lipgloss.NewRenderer(io.Discard)
	r.SetColorProfile(termenv.ANSI)
	r.SetHasDarkBackground(true)
	for i, l := range looks {
		st := r.NewStyle().Bold(l.bold).Reverse(l.reverse).Strikethrough(l.strike)
		if o.NoColour {
			st = r.NewStyle().Bold(l.plainBold).Reverse(l.plainRev).Strikethrough(l.strike)
		} else {
			if l.pair.Fore >= 0 {
				st = st.Foreground(lipgloss.ANSIColor(l.pair.Fore))
			}
			if l.pair.Back >= 0 {
				st = st.Background(lipgloss.ANSIColor(l.pair.Back))
			}
		}
		before, after, _ := strings.Cut(st.Render("x"), "x")
		s.prefix[i], s.suffix[i] = before, after
	}
	return s
}

// Wrap returns what to write before and after a text of role r.
func (s *Styles) Wrap(r Role) (before, after string) {
	if r >= roleCount {
		r = Plain
	}
	return s.prefix[r], s.suffix[r]
}
