package conformance

import (
	"math"
	"slices"
	"strings"

	"gainwright/protocol"
)

var identityChecks = []check{
	{id: "P4.1a", what: "bare id is answered by its lines and ok 0 with their number", run: func(s *session) error {
		_, err := s.readIdentity(true)
		return err
	}},
	{id: "P4.1b", what: "id with a number is answered under that number", run: func(s *session) error {
		_, err := s.readIdentity(false)
		return err
	}},
	{id: "P4.1c", what: "both forms say the same", run: func(s *session) error {
		bare, err := s.readIdentity(true)
		if err != nil {
			return err
		}
		lines, err := s.readIdentity(false)
		if err == nil && !slices.Equal(lines, bare) {
			err = errorf("%q, and bare %q", lines, bare)
		}
		return err
	}},
	{id: "P4.2a", what: "the identity can be read, each key once", run: func(s *session) error {
		seen := map[string]bool{}
		for _, l := range s.idLines {
			key, _, _ := strings.Cut(l, " ")
			if seen[key] && key != "limits" {
				return errorf("%s comes twice", key)
			}
			seen[key] = true
		}
		_, err := protocol.ParseIdentity(s.idLines)
		return err
	}},
	{id: "P4.2b", what: "every key that a board to be driven must have is there", run: func(s *session) error {
		need := strings.Fields("proto fw board boot baud loop delay win law form deriv disc windup num gains limits input bus quad off enc scale max beat")
		for _, l := range s.idLines {
			key, rest, _ := strings.Cut(l, " ")
			if strings.TrimSpace(rest) != "" {
				need = slices.DeleteFunc(need, func(k string) bool { return k == key })
			}
		}
		if len(need) > 0 {
			return errorf("missing: %s", strings.Join(need, " "))
		}
		return nil
	}},
	{id: "P4.2c", what: "the protocol version is one that this program speaks", run: func(s *session) error {
		if s.id.ProtoMajor != protocol.Major {
			return errorf("the board speaks %d.%d, this program %d.x", s.id.ProtoMajor, s.id.ProtoMinor, protocol.Major)
		}
		return nil
	}},
	{id: "P4.2d", what: "loop, delay and window fit together", run: func(s *session) error {
		if s.id.Loop <= 0 || s.id.ComputeDelay > s.id.Loop || s.id.WindowLoops < 1 {
			return errorf("loop %v, delay %v, window %d loops", s.id.Loop, s.id.ComputeDelay, s.id.WindowLoops)
		}
		return nil
	}},
	{id: "P4.2e", what: "the scales carry every speed and voltage up to the hard limits", run: func(s *session) error {
		sc := s.id.Scales
		if sc.SpeedLSB <= 0 || sc.VoltsLSB <= 0 || sc.SpeedLSB*math.MaxInt16 < s.id.SpeedMax || sc.VoltsLSB*math.MaxInt16 < s.id.VoltsMax ||
			sc.CurrentLSB > 0 && sc.CurrentLSB*math.MaxInt16 < s.id.AmpsMax {
			return errorf("%+v over 16 bits, hard limits %g V, %g rad/s, %g A", sc, s.id.VoltsMax, s.id.SpeedMax, s.id.AmpsMax)
		}
		if s.id.BusMeasured != (sc.BusLSB > 0) {
			return errorf("bus measured: %t, but its scale is %g V", s.id.BusMeasured, sc.BusLSB)
		}
		return nil
	}},
	{id: "P4.2f", what: "encoder, gear, bus and quadrants have values that can be", run: func(s *session) error {
		if s.id.CountsPerTurn <= 0 || s.id.GearRatio <= 0 || s.id.BusNominal <= 0 || !slices.Contains([]int{1, 2, 4}, s.id.Quadrants) {
			return errorf("%g counts a turn, gear %g, bus %g V, %d quadrants", s.id.CountsPerTurn, s.id.GearRatio, s.id.BusNominal, s.id.Quadrants)
		}
		return nil
	}},
	{id: "P4.2g", what: "hard limits and the range of the timeout are given", run: func(s *session) error {
		if s.id.VoltsMax <= 0 || s.id.SpeedMax <= 0 || s.id.BeatMin <= 0 || s.id.BeatMin > s.id.BeatMax {
			return errorf("%g V, %g rad/s, timeout %v to %v", s.id.VoltsMax, s.id.SpeedMax, s.id.BeatMin, s.id.BeatMax)
		}
		return nil
	}},
	{id: "P4.2h", what: "capture memory is given if and only if the board can capture", run: func(s *session) error {
		if s.id.Can("capture") != (s.id.CaptureN > 0) {
			return errorf("can %q, capture memory %d samples", s.id.Powers, s.id.CaptureN)
		}
		return nil
	}},
	{id: "P7.1a", what: "the limits have known names, each once, with vmax, wmax and beat among them", run: func(s *session) error {
		known := strings.Fields("vmax wmax imax bmax bmin amax turns stall wrong nocnt vbreak heat run beat slew")
		return names(s.id.LimitNames, known, []string{protocol.LimVolts, protocol.LimSpeed, protocol.LimBeat})
	}},
	{id: "P8.1a", what: "the gains have the names of law and form", run: func(s *session) error {
		need, extra := []string{"kp", "ki"}, "kd"
		if s.id.Form != "parallel" {
			need, extra = []string{"kc", "ti"}, "td"
		}
		if s.id.Law == "pid" {
			need = append(need, extra)
		}
		known := append(strings.Fields("tf b tt kv ks"), need...)
		return names(s.id.GainNames, known, need)
	}},
}

// names wants a list of known names without doubles that holds the needed ones.
func names(got, known, need []string) error {
	for i, n := range got {
		if slices.Contains(got[:i], n) {
			return errorf("%s comes twice", n)
		}
		if !slices.Contains(known, n) {
			return errorf("%q is none of %s", n, strings.Join(known, " "))
		}
	}
	for _, n := range need {
		if !slices.Contains(got, n) {
			return errorf("%s is missing in %q", n, got)
		}
	}
	return nil
}
