package palette

import (
	"math"
	"regexp"
	"strings"
	"testing"
)

type rgb [3]float64

// The default colours of two common terminals, *from memory*: xterm (its
// application defaults) and the text mode of the VGA adapter, which the Linux
// console uses.
var tables = map[string][16]rgb{
	"xterm": {
		{0, 0, 0}, {205, 0, 0}, {0, 205, 0}, {205, 205, 0}, {0, 0, 238}, {205, 0, 205}, {0, 205, 205}, {229, 229, 229},
		{127, 127, 127}, {255, 0, 0}, {0, 255, 0}, {255, 255, 0}, {92, 92, 255}, {255, 0, 255}, {0, 255, 255}, {255, 255, 255},
	},
	"VGA": {
		{0, 0, 0}, {170, 0, 0}, {0, 170, 0}, {170, 85, 0}, {0, 0, 170}, {170, 0, 170}, {0, 170, 170}, {170, 170, 170},
		{85, 85, 85}, {255, 85, 85}, {85, 255, 85}, {255, 255, 85}, {85, 85, 255}, {255, 85, 255}, {85, 255, 255}, {255, 255, 255},
	},
}

// luminance is the relative luminance of WCAG 2.1 (W3C Recommendation, section
// "relative luminance").
func luminance(c rgb) float64 {
	lin := func(v float64) float64 {
		v /= 255
		if v <= 0.03928 {
			return v / 12.92
		}
		return math.Pow((v+0.055)/1.055, 2.4)
	}
	return 0.2126*lin(c[0]) + 0.7152*lin(c[1]) + 0.0722*lin(c[2])
}

// contrast is the contrast ratio of WCAG 2.1.
func contrast(a, b rgb) float64 {
	la, lb := luminance(a), luminance(b)
	return (math.Max(la, lb) + 0.05) / (math.Min(la, lb) + 0.05)
}

func TestContrastFormula(t *testing.T) {
	// WCAG 2.1: black on white is 21:1; equal colours are 1:1.
	if got := contrast(rgb{0, 0, 0}, rgb{255, 255, 255}); math.Abs(got-21) > 1e-9 {
		t.Errorf("black on white: %g, want 21", got)
	}
	if got := contrast(rgb{9, 9, 9}, rgb{9, 9, 9}); got != 1 {
		t.Errorf("equal colours: %g, want 1", got)
	}
}

// TestContrast asks 4.5:1 for text (success criterion 1.4.3) and 3:1 for the
// lines of charts (1.4.11), on black and on white where the background is the
// terminal's own.
func TestContrast(t *testing.T) {
	grounds := map[string]rgb{"black": {0, 0, 0}, "white": {255, 255, 255}}
	checked := 0
	for table, colours := range tables {
		for role, p := range Pairs() {
			least := 4.5
			if p.Mark {
				least = 3
			}
			if p.Back >= 0 {
				checked++
				if got := contrast(colours[p.Fore], colours[p.Back]); got < least {
					t.Errorf("%s: role %d has %.2f:1, want %g:1", table, role, got, least)
				}
				continue
			}
			for name, ground := range grounds {
				checked++
				if got := contrast(colours[p.Fore], ground); got < least {
					t.Errorf("%s: role %d on %s has %.2f:1, want %g:1", table, role, name, got, least)
				}
			}
		}
	}
	if checked < 2*int(roleCount)/2 {
		t.Errorf("only %d pairs were checked", checked)
	}
}

func TestRedOnlyForAlarms(t *testing.T) {
	for role, p := range Pairs() {
		for _, c := range []int{p.Fore, p.Back} {
			if (c == 1 || c == 9) && role != Alarm {
				t.Errorf("role %d uses red", role)
			}
		}
	}
}

var colour = regexp.MustCompile(`\x1b\[[0-9;]*(3[0-7]|4[0-7]|9[0-7]|10[0-7]|38|48)[;m]`)

func TestWithoutColour(t *testing.T) {
	full, plain, dumb := New(Options{}), New(Options{NoColour: true}), New(Options{Dumb: true})
	seen := false
	for r := Role(0); r < roleCount; r++ {
		before, _ := full.Wrap(r)
		seen = seen || colour.MatchString(before)
		before, after := plain.Wrap(r)
		if colour.MatchString(before + after) {
			t.Errorf("role %d writes a colour: %q", r, before)
		}
		if before, after := dumb.Wrap(r); before+after != "" {
			t.Errorf("role %d writes %q to a terminal without sequences", r, before+after)
		}
		if before, after := plain.Wrap(r); (before == "") != (after == "") {
			t.Errorf("role %d: %q and %q do not belong together", r, before, after)
		}
	}
	if !seen {
		t.Error("no role has a colour where colours are wanted")
	}
	if before, _ := full.Wrap(Old); !strings.Contains(before, "9") {
		t.Errorf("an old value is not struck: %q", before)
	}
}
