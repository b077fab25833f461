package conformance

import (
	"fmt"
	"slices"
	"strconv"

	"gainwright/protocol"
)

func (s *session) gains(which string) ([]uint32, error) {
	return s.readSet(protocol.VerbGain, "get "+which+" ", s.id.GainNames)
}

// gainsAre wants a set bit for bit.
func (s *session) gainsAre(which string, want []uint32) error {
	got, err := s.gains(which)
	if err == nil {
		err = equalSet(s.id.GainNames, got, want)
	}
	if err != nil {
		err = fmt.Errorf("gains %s: %w", which, err)
	}
	return err
}

// otherGains is the set as found with one bit changed: the smallest step of one
// gain that is not 0, so that nobody could feel it.
func (s *session) otherGains() []uint32 {
	set := slices.Clone(s.wasGains)
	for i, bits := range set {
		if bits != 0 {
			set[i] ^= 1
			return set
		}
	}
	if len(set) > 0 {
		set[0] = 0x358637BD // all 0: a millionth
		if s.id.Number == "int" {
			set[0] = 1
		}
	}
	return set
}

func (s *session) stageGains(set []uint32) error {
	for i, bits := range set {
		if _, err := s.must(protocol.VerbGain, fmt.Sprintf("set %d %08X", i, bits)); err != nil {
			return err
		}
	}
	return nil
}

// putGains stages and uses a set.
func (s *session) putGains(set []uint32) error {
	return first(func() error { return s.stageGains(set) }, func() error {
		_, err := s.must(protocol.VerbGain, "use "+hex4(protocol.SetCRC(set)))
		return err
	})
}

// storeGains stores the running set, whose CRC is given, and returns the count
// of writes.
func (s *session) storeGains(set []uint32) (int64, error) {
	crc := hex4(protocol.SetCRC(set))
	a, err := s.must(protocol.VerbGain, "store "+crc)
	if err != nil {
		return 0, err
	}
	n, ok := protocol.ParseUint([]byte(a.field(1)), 1<<31)
	if !ok || a.field(0) != crc || len(a.fields) != 2 {
		return 0, errorf("store: %v, wanted %s and the writes so far", a, crc)
	}
	return n, nil
}

// asFound wants what was read at the start, without which nothing is changed.
func (s *session) asFound() error {
	if s.wasGains == nil || s.wasStored == nil {
		return leftOut("the gains as found could not be read")
	}
	return s.calm()
}

var gainChecks = []check{
	{id: "P8.3a", what: "get gives slot, name and eight digits, of running and stored set", run: func(s *session) error {
		run, err := s.gains("run")
		if err != nil {
			return err
		}
		store, err := s.gains("store")
		if err != nil {
			return err
		}
		s.wasGains, s.wasStored = run, store
		return nil
	}},
	{id: "P8.3b", what: "crc is over the eight digits of every slot in order", needs: "P8.3a", run: func(s *session) error {
		return first(func() error { return s.crcIs(protocol.VerbGain, "crc run", s.wasGains) },
			func() error { return s.crcIs(protocol.VerbGain, "crc store", s.wasStored) })
	}},
	{id: "P8.3c", what: "set stages and changes nothing that runs", needs: "P8.3a", run: func(s *session) error {
		return first(s.asFound, func() error { return s.stageGains(s.otherGains()) }, func() error { return s.gainsAre("run", s.wasGains) })
	}},
	{id: "P8.3d", what: "use with another CRC is refused and changes nothing", needs: "P8.3a", run: func(s *session) error {
		set := s.otherGains()
		return first(s.asFound, func() error { return s.stageGains(set) },
			func() error {
				return s.refused(protocol.VerbGain, "use "+hex4(protocol.SetCRC(set)^0x0100), protocol.RefSetCRC)
			},
			func() error { return s.gainsAre("run", s.wasGains) })
	}},
	{id: "P8.3e", what: "use swaps the whole set in, bit for bit; the stored one stays", needs: "P8.3a", run: func(s *session) error {
		set := s.otherGains()
		err := first(s.asFound, func() error { return s.putGains(set) }, func() error { return s.gainsAre("run", set) },
			func() error { return s.crcIs(protocol.VerbGain, "crc run", set) }, func() error { return s.gainsAre("store", s.wasStored) })
		return s.backTo(err)
	}},
	{id: "P8.3f", what: "a slot that is not there, or digits that cannot be read, are refused", needs: "P8.3a", run: func(s *session) error {
		n := strconv.Itoa(len(s.id.GainNames))
		bad := []string{"get run " + n, "get store " + n, "set " + n + " 3F800000", "set 0 3f800000", "set 0 1.5", "crc both", "use 12"}
		if s.id.Number == "float" {
			bad = append(bad, "set 0 7F800000", "set 0 7FC00000")
		}
		for _, b := range bad {
			if err := s.refused(protocol.VerbGain, b, protocol.RefArgument); err != nil {
				return err
			}
		}
		return nil
	}},
	{id: "P8.3g", what: "store with another CRC is refused", needs: "P8.3a", run: func(s *session) error {
		wrong := hex4(protocol.SetCRC(s.wasGains) ^ 0x0100)
		return first(s.asFound, func() error { return s.refused(protocol.VerbGain, "store "+wrong, protocol.RefSetCRC) },
			func() error { return s.gainsAre("store", s.wasStored) })
	}},
	{id: "P8.3h", what: "store keeps the running set bit for bit", needs: "P8.3e", run: func(s *session) error {
		set := s.otherGains()
		err := first(s.asFound, func() error { return s.putGains(set) }, func() error { _, err := s.storeGains(set); return err },
			func() error { return s.gainsAre("store", set) }, func() error { return s.crcIs(protocol.VerbGain, "crc store", set) })
		return s.storeBack(err)
	}},
	{id: "P8.3i", what: "writes are counted up by one; a repeated line writes nothing", needs: "P8.3e", run: storeCount},
	{id: "P8.4a", what: "set, use and store are refused while armed", needs: "P8.3a", arms: true, run: func(s *session) error {
		crc := hex4(protocol.SetCRC(s.wasGains))
		return first(s.arm, s.beat,
			func() error {
				return s.refused(protocol.VerbGain, fmt.Sprintf("set 0 %08X", s.wasGains[0]), protocol.RefState)
			},
			s.beat, func() error { return s.refused(protocol.VerbGain, "use "+crc, protocol.RefState) },
			s.beat, func() error { return s.refused(protocol.VerbGain, "store "+crc, protocol.RefState) })
	}},
}

// backTo runs the gains as found again, whatever the check found.
func (s *session) backTo(err error) error {
	after := s.putGains(s.wasGains)
	return first(func() error { return err }, func() error { return after })
}

// storeBack stores what was stored as found and runs what ran.
func (s *session) storeBack(err error) error {
	after := first(func() error { return s.putGains(s.wasStored) }, func() error { _, err := s.storeGains(s.wasStored); return err })
	return s.backTo(first(func() error { return err }, func() error { return after }))
}

func storeCount(s *session) error {
	set := s.otherGains()
	var was int64
	err := first(s.asFound, func() error { return s.putGains(set) }, func() error { var err error; was, err = s.storeGains(set); return err })
	if err == nil {
		n := s.number()
		line := protocol.AppendRequest(nil, protocol.VerbGain, n, "store "+hex4(protocol.SetCRC(set)))
		for i := range 2 {
			var a answer
			if a, err = s.askLine(line, n); err == nil && a.field(1) != strconv.FormatInt(was+1, 10) {
				err = errorf("%d writes, then %v after one store sent %d times", was, a, i+1)
			}
			if err != nil {
				break
			}
		}
	}
	return s.storeBack(err)
}
