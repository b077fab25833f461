package tui

import (
	"fmt"
	"math"
	"time"

	"gainwright/protocol/si"
)

const rpmPerRad = 60 / (2 * math.Pi)

// number writes v with a fixed number of decimals, or a dash where there is no
// value.
func number(v float64, decimals int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "-"
	}
	if math.Abs(v) >= 1e7 {
		return fmt.Sprintf("%.3g", v)
	}
	s := fmt.Sprintf("%.*f", decimals, v)
	if s == "-0" || s == "-0.0" || s == "-0.00" {
		s = s[1:]
	}
	return s
}

func rpm(w si.RadPerSec) string { return number(w.RPM(), 0) }

func volts(v si.Volts) string { return number(float64(v), 1) }

// seconds writes a duration as seconds, finer while it is short.
func seconds(d time.Duration) string {
	s := d.Seconds()
	switch a := math.Abs(s); {
	case a < 1:
		return number(s, 2) + " s"
	case a < 10:
		return number(s, 1) + " s"
	case a < 600:
		return number(s, 0) + " s"
	case a < 36000:
		return number(s/60, 0) + " min"
	}
	return number(s/3600, 0) + " h"
}

// whole writes the whole seconds that are left, rounded up, so that nothing
// shows 0 while it still runs.
func whole(d time.Duration) string {
	return fmt.Sprintf("%d s", int(math.Ceil(max(0, d.Seconds()))))
}

// clock writes a time since the start of the session as min:s.
func clock(d time.Duration) string {
	t := int(max(0, d.Seconds()))
	return fmt.Sprintf("%3d:%02d", t/60, t%60)
}

func percent(share float64) string { return number(100*share, 0) + " %" }
