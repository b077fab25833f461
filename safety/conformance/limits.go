package conformance

import (
	"fmt"
	"math"
	"slices"
	"strconv"

	"gainwright/protocol"
)

// heldLimits reads every slot of the limits.
func (s *session) heldLimits() ([]uint32, error) {
	return s.readSet(protocol.VerbLimit, "get ", s.id.LimitNames)
}

// readSet reads a row of slots, whose answers must name them.
func (s *session) readSet(verb, get string, names []string) ([]uint32, error) {
	set := make([]uint32, len(names))
	for i, name := range names {
		a, err := s.must(verb, get+strconv.Itoa(i))
		if err != nil {
			return nil, err
		}
		bits, ok := protocol.ParseHex32([]byte(a.field(2)))
		if !ok || len(a.fields) != 3 || a.field(0) != strconv.Itoa(i) || a.field(1) != name {
			return nil, errorf("%s %s%d: %v, wanted %d %s and eight digits", verb, get, i, a, i, name)
		}
		set[i] = bits
	}
	return set, nil
}

// equalSet names the first slot that differs.
func equalSet(names []string, got, want []uint32) error {
	for i := range want {
		if got[i] != want[i] {
			return errorf("%s is %08X, wanted %08X", names[i], got[i], want[i])
		}
	}
	return nil
}

// limitsAre wants the held limits.
func (s *session) limitsAre(want []uint32) error {
	got, err := s.heldLimits()
	if err == nil {
		err = equalSet(s.id.LimitNames, got, want)
	}
	return err
}

// slot is the slot of a limit, or -1.
func (s *session) slot(name string) int { return slices.Index(s.id.LimitNames, name) }

// stage offers a value for a slot and wants the code.
func (s *session) stage(slot int, digits string, code protocol.Refusal) error {
	if slot < 0 {
		return nil // a slot that the board has not
	}
	return s.refused(protocol.VerbLimit, fmt.Sprintf("set %d %s", slot, digits), code)
}

// foundChecks come before anything puts limits in use.
var foundChecks = []check{
	{id: "P7.2a", what: "get gives slot, name and eight digits of a number from 0 up, for each slot", run: func(s *session) error {
		set, err := s.heldLimits()
		if err != nil {
			return err
		}
		for i, bits := range set {
			if v := value(bits); math.IsNaN(v) || math.IsInf(v, 0) || v < 0 {
				return errorf("%s is %08X", s.id.LimitNames[i], bits)
			}
		}
		s.wasLimits = set
		return nil
	}},
	{id: "P12.2a", what: "no arm before limits were put in use", run: func(s *session) error {
		crc, err := s.must(protocol.VerbLimit, "crc")
		if err != nil {
			return err
		}
		number, err := s.nonce()
		if err != nil {
			return err
		}
		a, err := s.ask(protocol.VerbArm, number+" "+crc.field(0))
		switch {
		case err != nil:
			return err
		case a.ok:
			return first(s.calm, func() error { return leftOut("it arms; somebody may have put limits in use before") })
		case a.code != protocol.RefLimits:
			return leftOut("arm is refused for another cause: " + a.String())
		}
		return nil
	}},
}

var limitChecks = []check{
	{id: "P7.2b", what: "crc is over the eight digits of every slot in order", run: func(s *session) error {
		set, err := s.heldLimits()
		if err != nil {
			return err
		}
		return s.crcIs(protocol.VerbLimit, "crc", set)
	}},
	{id: "P7.2c", what: "set stages and changes nothing that is held", run: func(s *session) error {
		was, err := s.heldLimits()
		if err != nil {
			return err
		}
		if _, err := s.must(protocol.VerbLimit, fmt.Sprintf("set %d %s", s.slot(protocol.LimVolts), float(s.id.VoltsMax/3))); err != nil {
			return err
		}
		return s.limitsAre(was)
	}},
	{id: "P7.2d", what: "use with another CRC is refused and changes nothing", run: func(s *session) error {
		was, err := s.heldLimits()
		if err != nil {
			return err
		}
		next := s.testLimits()
		for i, bits := range next {
			if _, err := s.must(protocol.VerbLimit, fmt.Sprintf("set %d %08X", i, bits)); err != nil {
				return err
			}
		}
		wrong := hex4(protocol.SetCRC(next) ^ 0x0100)
		return first(func() error { return s.refused(protocol.VerbLimit, "use "+wrong, protocol.RefSetCRC) }, func() error { return s.limitsAre(was) })
	}},
	{id: "P7.2e", what: "use holds the whole staged set, bit for bit", arms: true, run: func(s *session) error {
		set := s.testLimits()
		return first(func() error { return s.limitsAre(set) }, func() error { return s.crcIs(protocol.VerbLimit, "crc", set) })
	}},
	{id: "P7.2f", what: "slots that were not staged keep their value", arms: true, run: func(s *session) error {
		set := slices.Clone(s.limits)
		i := s.slot(protocol.LimSpeed)
		set[i] -= 7
		return first(
			func() error { _, err := s.must(protocol.VerbLimit, fmt.Sprintf("set %d %08X", i, set[i])); return err },
			func() error {
				_, err := s.must(protocol.VerbLimit, "use "+hex4(protocol.SetCRC(set)))
				return err
			},
			func() error { return s.limitsAre(set) })
	}},
	{id: "P7.2g", what: "a limit over the board's own is refused", arms: true, run: func(s *session) error {
		return first(
			func() error { return s.stage(s.slot(protocol.LimVolts), float(s.id.VoltsMax*1.01), protocol.RefLimit) },
			func() error { return s.stage(s.slot(protocol.LimSpeed), float(s.id.SpeedMax*1.01), protocol.RefLimit) },
			func() error {
				if s.id.AmpsMax == 0 {
					return nil
				}
				return s.stage(s.slot(protocol.LimCurrent), float(s.id.AmpsMax*1.01), protocol.RefLimit)
			})
	}},
	{id: "P7.2h", what: "a heartbeat timeout outside its range is refused", arms: true, run: func(s *session) error {
		i := s.slot(protocol.LimBeat)
		return first(
			func() error { return s.stage(i, float(s.id.BeatMax.Seconds()*1.01), protocol.RefLimit) },
			func() error { return s.stage(i, float(s.id.BeatMin.Seconds()*0.99), protocol.RefLimit) })
	}},
	{id: "P7.2i", what: "what is no finite number from 0 up is refused", arms: true, run: func(s *session) error {
		for i := range s.id.LimitNames {
			for _, bad := range []string{"7FC00000", "7F800001", "FFC00000", "7F800000", "FF800000", "BF800000", "80000000"} {
				if err := s.stage(i, bad, protocol.RefArgument); err != nil {
					return err
				}
			}
		}
		return nil
	}},
	{id: "P7.2j", what: "a slot that is not there is refused", run: func(s *session) error {
		n := strconv.Itoa(len(s.id.LimitNames))
		return first(func() error { return s.refused(protocol.VerbLimit, "get "+n, protocol.RefArgument) },
			func() error { return s.refused(protocol.VerbLimit, "set "+n+" 3F800000", protocol.RefArgument) })
	}},
	{id: "P7.1b", what: "0 is refused for the limits that are always judged", arms: true, run: func(s *session) error {
		for _, name := range []string{protocol.LimVolts, protocol.LimSpeed, protocol.LimStall, protocol.LimWrong, protocol.LimNoCount, protocol.LimRun} {
			if err := s.stage(s.slot(name), "00000000", protocol.RefArgument); err != nil {
				return err
			}
		}
		if i := s.slot(protocol.LimBeat); i >= 0 {
			return s.refused(protocol.VerbLimit, fmt.Sprintf("set %d 00000000", i), protocol.RefArgument, protocol.RefLimit)
		}
		return nil
	}},
	{id: "P7.1c", what: "0 is taken for the limits that need not be judged", arms: true, run: func(s *session) error {
		for _, name := range []string{protocol.LimBusMax, protocol.LimBusMin, protocol.LimAccel, protocol.LimTurns, protocol.LimHeat, protocol.LimSlew, protocol.LimBreak} {
			if i := s.slot(name); i >= 0 {
				if _, err := s.must(protocol.VerbLimit, fmt.Sprintf("set %d 00000000", i)); err != nil {
					return err
				}
			}
		}
		return nil
	}},
	{id: "P7.3a", what: "set is refused while armed", arms: true, run: func(s *session) error {
		return first(s.arm, s.beat, func() error { return s.stage(0, float(s.id.VoltsMax/20), protocol.RefState) })
	}},
	{id: "P7.3b", what: "use is refused while armed, and the limits stay", arms: true, run: func(s *session) error {
		return first(s.arm, s.beat, func() error { return s.refused(protocol.VerbLimit, "use "+hex4(s.limitsCRC), protocol.RefState) },
			s.calm, func() error { return s.limitsAre(s.limits) })
	}},
}

// crcIs wants the CRC and the number of slots of a set.
func (s *session) crcIs(verb, args string, set []uint32) error {
	a, err := s.must(verb, args)
	if err == nil && (a.field(0) != hex4(protocol.SetCRC(set)) || a.field(1) != strconv.Itoa(len(set)) || len(a.fields) != 2) {
		err = errorf("%s %s: %v, wanted %04X %d", verb, args, a, protocol.SetCRC(set), len(set))
	}
	return err
}
