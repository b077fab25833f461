package sheet

import (
	"math"
	"strconv"
	"strings"

	"gainwright/protocol/si"
	"gainwright/tune/sheet/plain"
)

// blank stands where a value is not known: room for a pen, and never a 0.
const blank = "____"

// digits returns x with three significant digits and no exponent, blank if it
// is not known.
func digits(x *float64) string {
	if x == nil || !si.Finite(*x) {
		return blank
	}
	return significant(*x, 3)
}

// significant returns x with n significant digits, trailing zeros kept: they say
// how much is known. Below 1e-4 and from 1e7 on an exponent is shorter.
func significant(x float64, n int) string {
	if x == 0 {
		return "0"
	}
	abs := math.Abs(x)
	if abs < 1e-4 || abs >= 1e7 {
		return strconv.FormatFloat(x, 'e', n-1, 64)
	}
	// Rounding first: 9.996 has three digits before it is known that it shows as 10.0.
	rounded, err := strconv.ParseFloat(strconv.FormatFloat(x, 'e', n-1, 64), 64)
	if err != nil {
		return blank
	}
	decimals := n - 1 - int(math.Floor(math.Log10(math.Abs(rounded))))
	return strconv.FormatFloat(rounded, 'f', max(0, decimals), 64)
}

// rpm returns a speed for display.
func rpm(x *float64) *float64 {
	if x == nil {
		return nil
	}
	return Known(si.RadPerSec(*x).RPM())
}

// scaled returns x·k, nil if x is not known.
func scaled(x *float64, k float64) *float64 {
	if x == nil {
		return nil
	}
	return Known(*x * k)
}

// with puts a unit behind a known value; an unknown one stays a blank.
func with(x *float64, unit string) string {
	if unit == "1" || unit == "" {
		return digits(x)
	}
	return digits(x) + " " + unit
}

// text returns s fit to show in at most n columns, blank if it is empty.
func text(s string, n int) string {
	if strings.TrimSpace(s) == "" {
		return strings.Repeat("_", min(n, 12))
	}
	return plain.Visible(s, n)
}

// pad fills s with blanks up to n columns.
func pad(s string, n int) string {
	return s + strings.Repeat(" ", max(0, n-plain.Width(s)))
}

// box is a tick that can be made with a pen where it is not known.
func box(b *bool) string {
	if b != nil && *b {
		return "[x]"
	}
	return "[ ]"
}
