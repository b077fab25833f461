package tui

import "strings"

// Hand says which hand is free for the keys while the other is near the E-stop.
type Hand uint8

// The layouts: the whole keyboard, or the keys of a run, a trip and a question
// within reach of one hand. Letters change places in pairs, so that every key
// still has one meaning and all of them are there.
const (
	HandBoth Hand = iota
	HandLeft
	HandRight
)

// handPairs are the letters that change places. The keys that follow each other
// on the way to a run stay apart.
var handPairs = [...]string{
	HandLeft:  "yr nv jc kd mw",
	HandRight: "ap gi xl eu zo bh",
}

// HandNamed returns the layout with a name: left, right, or both and "" for the
// whole keyboard.
func HandNamed(name string) (Hand, bool) {
	switch strings.ToLower(strings.TrimSpace(name)) {
	case "", "both":
		return HandBoth, true
	case "left":
		return HandLeft, true
	case "right":
		return HandRight, true
	}
	return HandBoth, false
}

// Key returns the key that stands where another does in the key table; it is its
// own inverse.
func (h Hand) Key(key string) string {
	if int(h) >= len(handPairs) || len(key) != 1 {
		return key
	}
	for _, pair := range strings.Fields(handPairs[h]) {
		switch key {
		case pair[:1]:
			return pair[1:]
		case pair[1:]:
			return pair[:1]
		}
	}
	return key
}

// MarkKey is the one key that does not stop a run.
func (h Hand) MarkKey() byte { return h.Key("m")[0] }

// meant returns the key of the key table that a pressed key stands for. A locked
// shift key changes nothing.
func (h Hand) meant(key string) string {
	if h == HandLeft && key == "tab" {
		return "enter"
	}
	if len(key) == 1 {
		return h.Key(strings.ToLower(key))
	}
	return key
}

// words replaces keys in braces by those of the layout: "{y} yes".
func (h Hand) words(text string) string {
	if !strings.Contains(text, "{") {
		return text
	}
	var b strings.Builder
	for {
		i := strings.IndexByte(text, '{')
		if i < 0 || i+2 >= len(text) || text[i+2] != '}' {
			b.WriteString(text)
			return b.String()
		}
		b.WriteString(text[:i])
		b.WriteString(h.Key(text[i+1 : i+2]))
		text = text[i+3:]
	}
}
