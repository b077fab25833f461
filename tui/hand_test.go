package tui

import (
	"strings"
	"testing"

	"gainwright/tune/job"
)

// TestHandsKeepEveryKey: a layout moves keys and loses none, so that no two
// meanings share one key, and the stop key and the keys without letters stay.
func TestHandsKeepEveryKey(t *testing.T) {
	for _, h := range []Hand{HandBoth, HandLeft, HandRight} {
		taken := map[string]string{}
		for c := 'a'; c <= 'z'; c++ {
			k := h.Key(string(c))
			if was, ok := taken[k]; ok {
				t.Errorf("hand %d: %s is both %s and %c", h, k, was, c)
			}
			taken[k] = string(c)
			if back := h.Key(k); back != string(c) {
				t.Errorf("hand %d: %c goes to %s and back to %s", h, c, k, back)
			}
		}
		for _, k := range []string{" ", "?", "enter", "esc", "1", "0", "+", "-"} {
			if got := h.Key(k); got != k {
				t.Errorf("hand %d moves %q to %q", h, k, got)
			}
		}
	}
}

// The halves of a QWERTY keyboard, from memory; the space bar belongs to both.
const leftHalf, rightHalf = "qwertasdfgzxcvb", "yuiophjklnm"

// TestLiveKeysAreUnderTheFreeHand: what is pressed from the plan to the end of a
// run, and at a trip, is within reach of one hand, and the keys that follow each
// other are no neighbours.
func TestLiveKeysAreUnderTheFreeHand(t *testing.T) {
	for h, half := range map[Hand]string{HandLeft: leftHalf, HandRight: rightHalf} {
		for _, k := range []string{"a", "y", "g", "x", "m", "e", "z", "j", "k", "n", "b"} {
			if got := h.Key(k); !strings.Contains(half, got) {
				t.Errorf("hand %d: %s is at %s, outside of %s", h, k, got, half)
			}
		}
		for _, two := range [][2]string{{"a", "y"}, {"y", "g"}, {"a", "g"}, {"e", "z"}} {
			if a, b := h.Key(two[0]), h.Key(two[1]); neighbours(a, b) {
				t.Errorf("hand %d: %s and %s (%s, %s) touch", h, two[0], two[1], a, b)
			}
		}
	}
}

// neighbours reports whether two letters touch in the three rows of letters.
func neighbours(a, b string) bool {
	rows := []string{"qwertyuiop", "asdfghjkl", "zxcvbnm"}
	at := func(k string) (x, y int) {
		for y, r := range rows {
			if x := strings.Index(r, k); x >= 0 {
				return 2*x + y, y // each row is set half a key to the right
			}
		}
		return -99, -99
	}
	xa, ya := at(a)
	xb, yb := at(b)
	return max(xa-xb, xb-xa) <= 2 && max(ya-yb, yb-ya) <= 1
}

// TestKeysOfAHand: the screen names the keys of the layout and they do what it says.
func TestKeysOfAHand(t *testing.T) {
	for h, want := range map[Hand][3]string{HandLeft: {"a", "r", "w"}, HandRight: {"p", "y", "m"}} {
		for _, st := range stages() {
			s := New(Look{Hand: h})
			switch st.name {
			case "plan":
				if _, in := s.Update(want[0], st.view); len(in) != 1 || in[0] != (job.Arm{}) {
					t.Errorf("hand %d: %s on the plan means %v", h, want[0], in)
				}
				if text := New(Look{Hand: h, Dumb: true}).Draw(st.view, 80, 24); !strings.Contains(text, want[0]+" arms this plan") {
					t.Errorf("hand %d: the plan does not name %s:\n%s", h, want[0], text)
				}
			case "running":
				if _, in := s.Update(want[2], st.view); len(in) != 1 || in[0] != (job.SetMark{}) {
					t.Errorf("hand %d: %s in motion means %v", h, want[2], in)
				}
				if text := New(Look{Hand: h, Dumb: true}).Draw(st.view, 80, 24); !strings.Contains(text, "STOP   "+want[2]+" mark") {
					t.Errorf("hand %d: the run does not name %s:\n%s", h, want[2], text)
				}
			}
		}
		if h.MarkKey() != want[2][0] {
			t.Errorf("hand %d: the tap lets %c through", h, h.MarkKey())
		}
	}
	if _, ok := HandNamed("middle"); ok {
		t.Error("middle is a hand")
	}
	if l := LookFrom(func(name string) string { return map[string]string{HandVariable: "Left"}[name] }); l.Hand != HandLeft {
		t.Errorf("%s=Left gives %v", HandVariable, l.Hand)
	}
}
