package tui

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/charmbracelet/x/ansi"

	"gainwright/tune/job"
)

// nasty holds strings as a board or a rig file could send them.
var nasty = []string{
	"", "x", "PUMP-3", "\x1b[2J\x1b[31mred", "a\nb\r\nc\td", "\x07\x08\x7f\u009b2J", "ünïcödé ±3 % Ω", "電動機の速度", "e\u0301e\u0301\u0302\u0303",
	"\xff\xfe broken", strings.Repeat("long word ", 60), strings.Repeat("unbroken", 80), "\u202eright to left", "😀😀", "~~", "%d %s", "\x1b]0;title\x07", "\x1bP1$r\x1b\\",
}

var (
	phases = []string{"", disarmed, arming, armed, countDown, running, stopping, tripped, "WHAT"}
	pages  = func() (ids []job.StepID) {
		for _, st := range path {
			ids = append(ids, st.ID)
		}
		return append(ids, "", "no such step")
	}()
	kinds  = []job.QuestionKind{job.AskYesNo, job.AskEnter, job.AskWord, job.AskText, job.AskNumber, job.AskHandTurn, job.AskStopKey, job.AskPower, "?"}
	states = []job.LinkState{job.NoPort, job.Opening, job.Fresh, job.Stale, job.LinkLost, job.LookOnly, ""}
)

// fill sets v and all below it at random.
func fill(rng *rand.Rand, v reflect.Value, depth int) {
	switch v.Interface().(type) {
	case job.StepID:
		v.SetString(string(pages[rng.IntN(len(pages))]))
		return
	case job.QuestionKind:
		v.SetString(string(kinds[rng.IntN(len(kinds))]))
		return
	case job.LinkState:
		v.SetString(string(states[rng.IntN(len(states))]))
		return
	case time.Duration:
		v.SetInt([]int64{0, -1, 1e6, 3e9, 1e12, math.MaxInt64, math.MinInt64}[rng.IntN(7)])
		return
	}
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			fill(rng, v.Field(i), depth+1)
		}
	case reflect.Pointer:
		if rng.IntN(3) > 0 {
			v.Set(reflect.New(v.Type().Elem()))
			fill(rng, v.Elem(), depth+1)
		}
	case reflect.Slice:
		n := rng.IntN(6)
		if rng.IntN(20) == 0 {
			n = 60
		}
		v.Set(reflect.MakeSlice(v.Type(), n, n))
		for i := range n {
			fill(rng, v.Index(i), depth+1)
		}
	case reflect.String:
		v.SetString(nasty[rng.IntN(len(nasty))])
	case reflect.Bool:
		v.SetBool(rng.IntN(2) == 0)
	case reflect.Int, reflect.Int64:
		v.SetInt([]int64{0, 1, -1, 30, math.MaxInt64, math.MinInt64}[rng.IntN(6)])
	case reflect.Uint8, reflect.Uint16, reflect.Uint64:
		v.SetUint(rng.Uint64() >> (64 - v.Type().Bits()))
	case reflect.Float64:
		v.SetFloat([]float64{0, 1, -1, 0.5, 24, 335, math.NaN(), math.Inf(1), math.Inf(-1), 1e300, -1e-300}[rng.IntN(11)])
	default:
		panic("fill: " + v.Kind().String())
	}
}

func anyView(rng *rand.Rand, kept []stage) *job.View {
	v := &job.View{}
	fill(rng, reflect.ValueOf(v).Elem(), 0)
	v.Drive.Phase = phases[rng.IntN(len(phases))]
	if rng.IntN(3) == 0 { // a true stage with some of it broken
		w := *kept[rng.IntN(len(kept))].view
		rv, rw := reflect.ValueOf(v).Elem(), reflect.ValueOf(&w).Elem()
		i := rng.IntN(rv.NumField())
		rw.Field(i).Set(rv.Field(i))
		v = &w
	}
	return v
}

var anyKey = strings.Fields("m g x a y n enter b j k w r q p ? h e z v s t o l c f d 1 2 3 4 5 6 7 8 9 0 esc backspace ctrl+u up down tab ctrl+c A é 電 ~ .")

var sgr = regexp.MustCompile(`\x1b\[[0-9;]*m`)

// judge holds what every frame promises, whatever the view. It measures the
// width with a general-purpose library, not with the code that drew it.
func judge(text string, w, h int, dumb bool) error {
	rows := strings.Split(text, "\n")
	if len(rows) > h {
		return fmt.Errorf("%d rows in a window of %d", len(rows), h)
	}
	for i, row := range rows {
		bare := row
		if strings.Contains(row, "\x1b") {
			bare = sgr.ReplaceAllString(row, "")
		}
		if dumb && bare != row {
			return fmt.Errorf("row %d holds a sequence: %q", i, row)
		}
		for _, r := range bare {
			if r < ' ' || r == 0x7f || (r >= 0x80 && r < 0xa0) || r == 0x202e || r == '\ufffd' {
				return fmt.Errorf("row %d holds %U: %q", i, r, row)
			}
			if dumb && r > '~' {
				return fmt.Errorf("row %d holds %q where only ASCII may be: %q", i, r, row)
			}
		}
		if n := ansi.StringWidth(row); n > w {
			return fmt.Errorf("row %d takes %d columns in a window of %d: %q", i, n, w, row)
		}
	}
	return nil
}

// TestAnyViewAnyKeyAnySize draws random views at random sizes after random
// keys: nothing panics, nothing leaves the window, nothing from outside reaches
// the terminal raw, the stop key means no intent, and while every key is a stop
// none means anything else.
func TestAnyViewAnyKeyAnySize(t *testing.T) {
	kept := stages()
	hot, still, acted := 0, 0, map[string]bool{}
	for seed := uint64(0); seed < 400; seed++ {
		rng := rand.New(rand.NewPCG(seed, 99))
		look := looks[rng.IntN(len(looks))].look
		s := New(look)
		v := anyView(rng, kept)
		var burst []string // keys of one field, so that whole texts are given too
		for range 12 {
			key := anyKey[rng.IntN(len(anyKey))]
			switch {
			case len(burst) > 0:
				key, burst = burst[0], burst[1:]
			case v.Drive.Phase == armed && rng.IntN(3) == 0:
				key = "g"
			case rng.IntN(3) == 0:
				v = anyView(rng, kept)
			case rng.IntN(6) == 0:
				key = " "
			case rng.IntN(6) == 0:
				burst = [][]string{{"1", "s", "a", "enter"}, {"q", "y"}, {"esc", "q", "y"}, {"r", "x", "enter"}, {"9", "v"}}[rng.IntN(5)]
			}
			var wants []job.Intent
			s, wants = s.Update(key, v)
			if key == " " && len(wants) > 0 {
				t.Fatalf("seed %d: the stop key means %#v", seed, wants)
			}
			if Hot(v) {
				hot++
				for _, in := range wants {
					_, mark := in.(job.SetMark)
					_, disarm := in.(job.Disarm) // between two inches, while the shaft runs on
					if !mark && !(disarm && inchRest(v)) {
						t.Fatalf("seed %d: in motion %q means %#v", seed, key, in)
					}
				}
			} else {
				still++
			}
			for _, in := range wants {
				acted[fmt.Sprintf("%T", in)] = true
			}
			w, h := 1+rng.IntN(130), 1+rng.IntN(45)
			if rng.IntN(10) == 0 {
				w, h = 1+rng.IntN(300), 1+rng.IntN(100)
			}
			text := s.Draw(v, w, h)
			if err := judge(text, w, h, look.Dumb); err != nil {
				t.Fatalf("seed %d, %dx%d, page %s: %v", seed, w, h, s.page(v), err)
			}
		}
	}
	if hot < 500 || still < 500 {
		t.Errorf("%d keys in motion and %d at rest: too few of one to mean anything", hot, still)
	}
	if len(acted) < 12 {
		t.Errorf("the random keys meant only %d kinds of intents", len(acted))
	}
}

// TestEverySize draws every stage at the sizes where the layout changes.
func TestEverySize(t *testing.T) {
	for _, st := range stages() {
		s := screenAt(st, Look{})
		for w := 1; w <= 300; w += 1 + w/4 {
			for h := 1; h <= 100; h += 1 + h/4 {
				if err := judge(s.Draw(st.view, w, h), w, h, false); err != nil {
					t.Fatalf("%s at %dx%d: %v", st.name, w, h, err)
				}
			}
		}
	}
}

// TestTopRowsEverywhere: down to 40×10 the top rows answer the four questions.
func TestTopRowsEverywhere(t *testing.T) {
	for _, st := range stages() {
		for _, size := range [][2]int{{40, 10}, {60, 15}, {79, 23}, {80, 24}, {200, 50}} {
			text := screenAt(st, Look{Dumb: true}).Draw(st.view, size[0], size[1])
			top := strings.Join(strings.SplitN(text, "\n", 3)[:2], "\n")
			shaft := "STILL"
			d := st.view.Drive
			if d.Unknown {
				shaft = "UNKNOWN"
			} else if d.Moving {
				shaft = "TURNS"
			}
			for _, want := range []string{d.Phase, shaft, string(st.view.Link.State), "space " + d.Space[:3]} {
				if !strings.Contains(top, want) {
					t.Errorf("%s at %v: the top rows do not say %q:\n%s", st.name, size, want, top)
				}
			}
			if size[0] < 80 && !strings.Contains(text, "smaller than 80x24") {
				t.Errorf("%s at %v: nothing says that the window is small:\n%s", st.name, size, text)
			}
			if Hot(st.view) && !strings.Contains(text, "space STOP") {
				t.Errorf("%s at %v: the bottom row does not name the stop key", st.name, size)
			}
		}
	}
}

// TestNotFreshIsMarked: with a link that is not fresh no value of the drive
// stands on screen unmarked.
func TestNotFreshIsMarked(t *testing.T) {
	for _, state := range []job.LinkState{job.Stale, job.LinkLost} {
		v := at(job.StepStep, false)
		v.Link.State, v.Link.Age = state, 800*time.Millisecond
		v.Drive.Speed, v.Drive.Volts = 126, 9.8
		text := New(Look{Dumb: true}).Draw(v, 120, 40)
		for _, want := range []string{"~~1203 of 3200 rpm~~", "~~9.8 of 24.0 V~~", "0.80 s old", "UNKNOWN"} {
			if !strings.Contains(text, want) {
				t.Errorf("%s: %q is not on screen:\n%s", state, want, text)
			}
		}
	}
}
