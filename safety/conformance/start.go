package conformance

import (
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
)

// startMax is how long a board may take to be back after a restart: a person
// has to pull a plug.
const startMax = 60 * time.Second

// restart has the board restarted and waits for its first line.
func (s *session) restart() (string, error) {
	if s.o.Restart == nil {
		return "", leftOut("the board would have to be restarted")
	}
	s.forget()
	s.started = true
	if err := s.o.Restart(); err != nil {
		s.started = false
		return "", leftOut(err.Error())
	}
	l, err := s.wait(startMax, begins("ev boot "))
	s.started = false
	if err != nil {
		return "", err
	}
	if l == nil {
		return "", errorf("no ev boot within %v of the restart", startMax)
	}
	return l.body, s.settle()
}

var startChecks = []check{
	{id: "P9.1a", what: "a start is told by ev boot with the count and the cause", run: func(s *session) error {
		was := s.boots
		body, err := s.restart()
		if err != nil {
			return err
		}
		w := strings.Split(body, " ")
		causes := " power pin watchdog brownout soft unknown "
		if len(w) != 4 || w[2] != strconv.Itoa((was+1)%65536) || !strings.Contains(causes, " "+w[3]+" ") {
			return errorf("%q after boot %d", body, was)
		}
		return nil
	}},
	{id: "P5.7a", what: "a board starts silent", run: func(s *session) error {
		if _, err := s.must(protocol.VerbRate, "20 x t"); err != nil {
			return err
		}
		if _, err := s.restart(); err != nil {
			_, _ = s.ask(protocol.VerbRate, "0 x t")
			return err
		}
		s.forget()
		if err := s.run(500 * time.Millisecond); err != nil {
			return err
		}
		if len(s.lines) > 0 {
			return errorf("%q came", s.lines[0].text)
		}
		return nil
	}},
	{id: "P6.1e", what: "a one-time number from before a restart is refused, and does not come again", arms: true, run: func(s *session) error {
		old, err := s.nonce()
		if err != nil {
			return err
		}
		if _, err := s.restart(); err != nil {
			return err
		}
		if err := s.putLimits(s.testLimits()); err != nil {
			return err
		}
		for range 8 {
			fresh, err := s.nonce()
			if err != nil {
				return err
			}
			if fresh == old {
				return errorf("%s came before and after the restart", old)
			}
		}
		return s.refused(protocol.VerbArm, s.armArgs(old), protocol.RefOldNumber)
	}},
	{id: "P12.1c", what: "after a start from armed the board is off, and its old token is void", arms: true, run: func(s *session) error {
		if s.o.Restart == nil {
			return leftOut("the board would have to be restarted")
		}
		if err := first(s.arm, s.beat); err != nil {
			return err
		}
		if _, err := s.restart(); err != nil {
			return err
		}
		return first(func() error { return s.put("dv 2 " + hex4(s.token) + " 0") }, func() error { return s.run(50 * time.Millisecond) },
			func() error { return s.inState(protocol.Off) })
	}},
	{id: "P12.2b", what: "limits have to be put in use again after a start", arms: true, run: func(s *session) error {
		if _, err := s.restart(); err != nil {
			return err
		}
		a, err := s.must(protocol.VerbLimit, "crc")
		if err != nil {
			return err
		}
		number, err := s.nonce()
		if err != nil {
			return err
		}
		return s.refused(protocol.VerbArm, number+" "+a.field(0), protocol.RefLimits)
	}},
	{id: "P12.2c", what: "after a start vmax and wmax are the hard limits", run: func(s *session) error {
		if _, err := s.restart(); err != nil {
			return err
		}
		set, err := s.heldLimits()
		if err != nil {
			return err
		}
		for name, hard := range map[string]float64{protocol.LimVolts: s.id.VoltsMax, protocol.LimSpeed: s.id.SpeedMax} {
			if i := s.slot(name); i >= 0 && value(set[i]) != float64(float32(hard)) {
				return errorf("%s is %g, the hard limit %g", name, value(set[i]), hard)
			}
		}
		return nil
	}},
	{id: "P8.4b", what: "after a start the running gains are the stored ones", needs: "P8.3e", run: func(s *session) error {
		if s.o.Restart == nil {
			return leftOut("the board would have to be restarted")
		}
		err := first(s.asFound, func() error { return s.putGains(s.otherGains()) },
			func() error { _, err := s.restart(); return err },
			func() error {
				stored, err := s.gains("store")
				if err != nil {
					return err
				}
				return s.gainsAre("run", stored)
			})
		return s.backTo(err)
	}},
}

// closingChecks judge what was heard all along, and what is left behind.
var closingChecks = []check{
	{id: "P12.1a", what: "the board is off when all is done", run: func(s *session) error {
		return first(s.calm, func() error { return s.inState(protocol.Off) })
	}},
	{id: "P7.2k", what: "limits and gains are left as they were found", run: func(s *session) error {
		if s.wasLimits == nil || s.wasGains == nil {
			return leftOut("they could not be read at the start")
		}
		return first(func() error { return s.putLimits(s.wasLimits) }, func() error { return s.limitsAre(s.wasLimits) },
			func() error { return s.gainsAre("run", s.wasGains) })
	}},
	{id: "P1.1d", what: "every line from the board is printable and at most 128 bytes", run: func(s *session) error {
		if len(s.ugly) > 0 {
			return errorf("%d are not, such as %s", len(s.ugly), visible([]byte(s.ugly[0])))
		}
		return nil
	}},
	{id: "P1.2a", what: "every line from the board has the right CRC", run: func(s *session) error {
		if len(s.badCRC) > 0 {
			return errorf("%d have not, such as %s", len(s.badCRC), visible([]byte(s.badCRC[0])))
		}
		return nil
	}},
	{id: "P3.4a", what: "lines that nobody asked for are events, telemetry or answers to a cut", run: func(s *session) error {
		if len(s.strange) > 0 {
			return errorf("%d are not, such as %s", len(s.strange), visible([]byte(s.strange[0])))
		}
		return nil
	}},
	{id: "P12.3a", what: "the board does not restart by itself", run: func(s *session) error {
		if s.restarts > 0 {
			return errorf("it restarted %d times", s.restarts)
		}
		return nil
	}},
}
