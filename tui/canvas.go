package tui

import (
	"strings"
	"unicode"
	"unicode/utf8"

	"gainwright/tui/palette"
	"gainwright/tune/sheet/plain"
)

// cell is one column of one row. The second column of a wide character holds
// no character of its own.
type cell struct {
	r    rune
	role palette.Role
}

const tail = rune(-1) // second column of a wide character

// canvas is the grid that pages draw on. Whatever is drawn stays inside, so no
// page can make a row too long or a frame too high.
type canvas struct {
	w, h   int
	cells  []cell
	marks  map[int]string // combining marks by cell
	styles *palette.Styles
	ascii  bool
	out    []byte
}

func (c *canvas) reset(w, h int) {
	c.w, c.h = max(w, 0), max(h, 0)
	n := c.w * c.h
	if cap(c.cells) < n {
		c.cells = make([]cell, n)
	}
	c.cells = c.cells[:n]
	for i := range c.cells {
		c.cells[i] = cell{' ', palette.Plain}
	}
	clear(c.marks)
}

// set writes one character; outside of the grid it does nothing.
func (c *canvas) set(x, y int, r rune, role palette.Role) {
	if x < 0 || y < 0 || x >= c.w || y >= c.h {
		return
	}
	i := y*c.w + x
	if c.cells[i].r == tail && x > 0 {
		c.cells[i-1].r = ' '
	}
	if x+1 < c.w && c.cells[i+1].r == tail {
		c.cells[i+1].r = ' '
	}
	if c.marks[i] != "" {
		delete(c.marks, i)
	}
	c.cells[i] = cell{r, role}
}

// String returns the rows, joined by line feeds, with the sequences of the
// roles around each piece. Blanks at the end of a row are left out unless they
// show.
func (c *canvas) String() string {
	c.out = c.out[:0]
	for y := 0; y < c.h; y++ {
		if y > 0 {
			c.out = append(c.out, '\n')
		}
		c.row(y)
	}
	return string(c.out)
}

func (c *canvas) row(y int) {
	row := c.cells[y*c.w : (y+1)*c.w]
	n := len(row)
	for n > 0 && row[n-1].r == ' ' && flat(row[n-1].role) {
		n--
	}
	at := palette.Plain
	_, after := c.styles.Wrap(at)
	for x := 0; x < n; x++ {
		role := row[x].role
		if row[x].r == ' ' && flat(role) && flat(at) {
			role = at // a blank looks the same, so no sequence is spent on it
		}
		if role != at {
			c.out = append(c.out, after...)
			var before string
			before, after = c.styles.Wrap(role)
			c.out = append(c.out, before...)
			at = role
		}
		if row[x].r == tail {
			continue
		}
		if r := row[x].r; r < utf8.RuneSelf {
			c.out = append(c.out, byte(r))
		} else {
			c.out = utf8.AppendRune(c.out, r)
		}
		if len(c.marks) > 0 {
			c.out = append(c.out, c.marks[y*c.w+x]...)
		}
	}
	c.out = append(c.out, after...)
}

// flat reports whether a blank in this role looks like no blank at all.
func flat(r palette.Role) bool {
	switch r {
	case palette.Plain, palette.Strong, palette.Key, palette.Main, palette.Beside, palette.Thin, palette.Edge, palette.AlarmOff:
		return true
	}
	return false
}

// area is a rectangle of the canvas with its own co-ordinates.
type area struct {
	c          *canvas
	x, y, w, h int
}

// sub returns the part of a that begins at x, y and is at most w×h.
func (a area) sub(x, y, w, h int) area {
	x, y = max(x, 0), max(y, 0)
	return area{a.c, a.x + x, a.y + y, max(0, min(w, a.w-x)), max(0, min(h, a.h-y))}
}

// put writes s at x, y and returns the column behind it. Text that does not fit
// is cut and ends in two points; text from outside loses its power first.
func (a area) put(x, y int, role palette.Role, s string) int {
	if y < 0 || y >= a.h || x >= a.w || s == "" {
		return x
	}
	room := a.w - x
	if s = a.c.tame(s); plain.Width(s) > room {
		s = plain.Visible(s, room)
	}
	for _, r := range s {
		w := 1
		if r >= 0x300 {
			if w = plain.Width(string(r)); w == 0 {
				a.c.mark(a.x+x-1, a.y+y, r)
				continue
			}
		}
		a.c.set(a.x+x, a.y+y, r, role)
		if w == 2 {
			a.c.set(a.x+x+1, a.y+y, tail, role)
		}
		x += w
	}
	return x
}

// right writes s so that it ends before column x.
func (a area) right(x, y int, role palette.Role, s string) {
	s = a.c.tame(s)
	a.put(max(0, x-plain.Width(s)), y, role, s)
}

// fill paints a row from x on in a role.
func (a area) fill(x, y int, role palette.Role) {
	for ; x < a.w && y >= 0 && y < a.h; x++ {
		a.c.set(a.x+x, a.y+y, ' ', role)
	}
}

// wrap writes s over as many rows as it needs from row y on and returns the
// next free row.
func (a area) wrap(y int, role palette.Role, s string) int {
	for _, line := range lines(a.c.tame(s), a.w) {
		a.put(0, y, role, line)
		y++
	}
	return y
}

func (c *canvas) mark(x, y int, r rune) {
	if x < 0 || y < 0 || x >= c.w || y >= c.h {
		return
	}
	if c.marks == nil {
		c.marks = map[int]string{}
	}
	c.marks[y*c.w+x] += string(r)
}

// tame makes every character of s one that prints, on one line, and in ASCII
// where the terminal has nothing else.
func (c *canvas) tame(s string) string {
	easy := true
	for i := 0; i < len(s); i++ {
		if s[i] < ' ' || s[i] > '~' {
			easy = false
			break
		}
	}
	if easy {
		return s
	}
	s = plain.Visible(s, 0)
	if c.ascii {
		s = toASCII(s)
	}
	return s
}

// spelled holds the signs of the trade that have a usual spelling in ASCII.
var spelled = strings.NewReplacer(
	"±", "+-", "°", "deg ", "Ω", "ohm", "²", "^2", "³", "^3", "µ", "u", "μ", "u", "·", "*", "→", "->", "≤", "<=", "≥", ">=",
	"×", "x", "−", "-", "–", "-", "—", "-", "τ", "tau", "ω", "w", "…", "..", "’", "'", "‘", "'", "“", `"`, "”", `"`,
	"✓", "+", "✗", "x", "▸", ">", "│", "|", "─", "-", "█", "#", "░", ".", "⠿", "*", "⠒", ".", "╌", "-", "•", "o",
)

func toASCII(s string) string {
	s = spelled.Replace(s)
	var b strings.Builder
	for _, r := range s {
		if r > unicode.MaxASCII {
			const hex = "0123456789abcdef"
			b.WriteString(`\u`)
			for shift := 12; shift >= 0; shift -= 4 {
				b.WriteByte(hex[(r>>shift)&15])
			}
			continue
		}
		b.WriteRune(r)
	}
	return b.String()
}

// lines breaks s at blanks into pieces of at most w columns; a word that is too
// long is broken where the line ends.
func lines(s string, w int) []string {
	if w <= 0 {
		return nil
	}
	if plain.Width(s) <= w {
		return []string{s}
	}
	var out []string
	line, width := "", 0
	flush := func() {
		out = append(out, line)
		line, width = "", 0
	}
	for _, word := range strings.Fields(s) {
		n := plain.Width(word)
		if line != "" && width+1+n > w {
			flush()
		}
		for n > w {
			head, rest := split(word, w)
			out = append(out, head)
			word, n = rest, plain.Width(rest)
		}
		if line != "" {
			line, width = line+" ", width+1
		}
		line, width = line+word, width+n
	}
	if line != "" {
		flush()
	}
	return out
}

// split cuts a word so that its head takes at most w columns, and one
// character at least.
func split(word string, w int) (head, rest string) {
	width := 0
	for i, r := range word {
		n := plain.Width(string(r))
		if width+n > w && i > 0 {
			return word[:i], word[i:]
		}
		width += n
	}
	_, n := utf8.DecodeRuneInString(word)
	if width > w {
		return word[:n], word[n:]
	}
	return word, ""
}
