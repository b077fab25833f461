package conformance

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"gainwright/protocol"
)

// ErrDriven says that the board drives its motor for somebody else.
var ErrDriven = errors.New("the board is driving: end that first, nothing was sent to it but questions")

// open finds out who is there and keeps what was found.
func (s *session) open() error {
	if err := first(
		func() error { return s.send([]byte("\n")) }, // ends what the last program may have left half sent
		func() error { return s.run(100 * time.Millisecond) },
	); err != nil {
		return err
	}
	var err error
	for range tries {
		s.forget()
		s.idLines, err = s.readIdentity(true)
		if err == nil || errors.As(err, new(*lineError)) || errors.Is(err, ErrInterrupted) {
			break
		}
	}
	if errors.As(err, new(*lineError)) || errors.Is(err, ErrInterrupted) {
		return err
	}
	if err != nil {
		return errNoIdentity
	}
	s.id, _ = protocol.ParseIdentity(s.idLines) // what cannot be read fails P4.2a
	s.boots = int(s.id.Boots)
	s.restarts = 0 // opening the port may restart a board
	if t, err := s.tel(); err == nil && t.state.Moving() {
		return ErrDriven
	}
	s.n = 100
	if set, err := s.heldLimits(); err == nil { // P7.2a judges this
		s.wasLimits = set
	}
	return nil
}

// putBack brings limits and gains back to what was found, also where the checks
// were ended in the middle.
func (s *session) putBack() error {
	s.o.Interrupted = nil
	if s.limits == nil && s.wasGains == nil {
		return nil // nothing was changed
	}
	if err := first(s.settle, s.calm); err != nil {
		return err
	}
	if s.wasLimits != nil && s.limits != nil && !slices.Equal(s.limits, s.wasLimits) {
		if err := first(func() error { return s.putLimits(s.wasLimits) }, func() error { return s.limitsAre(s.wasLimits) }); err != nil {
			return fmt.Errorf("limits are not as found: %w", err)
		}
	}
	if s.wasGains == nil || s.gainsAre("run", s.wasGains) == nil && s.gainsAre("store", s.wasStored) == nil {
		return nil
	}
	if err := first(func() error { return s.storeBack(nil) }, func() error { return s.gainsAre("store", s.wasStored) }, func() error { return s.gainsAre("run", s.wasGains) }); err != nil {
		return fmt.Errorf("gains are not as found: %w", err)
	}
	return nil
}

// readIdentity asks for the identity and returns its lines, "key values…".
func (s *session) readIdentity(bare bool) ([]string, error) {
	n := uint16(0)
	line := []byte(protocol.VerbID + "\n")
	if !bare {
		n = s.number()
		line = protocol.AppendRequest(nil, protocol.VerbID, n, "")
	}
	s.forget()
	if err := s.send(line); err != nil {
		return nil, err
	}
	a, err := s.answerTo(n, 3*time.Second)
	if err != nil {
		return nil, err
	}
	if a == nil {
		return nil, errorf("id is not ended by ok %d <lines>", n)
	}
	var lines []string
	for _, l := range s.lines {
		if rest, ok := strings.CutPrefix(l.body, "id "); ok && l.good && !l.hex {
			lines = append(lines, rest)
		}
	}
	if !a.ok || a.field(0) != strconv.Itoa(len(lines)) {
		return nil, errorf("%v after %d identity lines", a, len(lines))
	}
	return lines, nil
}

// tel asks for one sample and returns it.
func (s *session) tel() (textSample, error) {
	for range tries {
		s.forget()
		if err := s.send([]byte(protocol.VerbTel + "\n")); err != nil {
			return textSample{}, err
		}
		l, err := s.wait(patience, begins("t "))
		if err != nil {
			return textSample{}, err
		}
		if l != nil {
			return parseText(l.body)
		}
	}
	return textSample{}, errors.New("tel is not answered")
}

// inState wants the board in a state.
func (s *session) inState(want protocol.State) error {
	t, err := s.tel()
	if err == nil && t.state != want {
		err = errorf("the board is %v, wanted %v", t.state, want)
	}
	return err
}

// calm brings the board to off, without relying on the cut.
func (s *session) calm() error {
	if _, err := s.ask(protocol.VerbDisarm, ""); err != nil {
		return err
	}
	for range 40 {
		t, err := s.tel()
		if err != nil {
			return err
		}
		if t.state == protocol.Off && !t.tripHeld {
			return nil
		}
		if _, err := s.ask(protocol.VerbReset, ""); err != nil {
			return err
		}
		if err := s.run(100 * time.Millisecond); err != nil {
			return err
		}
	}
	return errors.New("dis and reset do not bring the board to off")
}

// beatLimit is the heartbeat timeout of the test limits, in s.
func (s *session) beatLimit() float64 {
	return max(s.id.BeatMin.Seconds(), min(0.2, s.id.BeatMax.Seconds()))
}

// testLimits are the limits that the checks arm with: a tenth of what the board
// may do and less, each with bits in its last places, so that a value that is
// rounded on the way shows.
func (s *session) testLimits() []uint32 {
	v := map[string]float64{
		protocol.LimVolts: s.id.VoltsMax / 9.7, protocol.LimSpeed: s.id.SpeedMax / 9.7, protocol.LimCurrent: s.id.AmpsMax / 3.1,
		protocol.LimTurns: 3.3, protocol.LimStall: 0.71, protocol.LimWrong: 0.31, protocol.LimNoCount: 0.73, protocol.LimRun: 2.1, protocol.LimBeat: s.beatLimit(),
	}
	set := make([]uint32, len(s.id.LimitNames))
	for i, name := range s.id.LimitNames {
		set[i] = math.Float32bits(float32(v[name]))
	}
	return set
}

// putLimits stages a whole set, uses it and remembers it as the one in use.
func (s *session) putLimits(set []uint32) error {
	for i, bits := range set {
		if _, err := s.must(protocol.VerbLimit, fmt.Sprintf("set %d %08X", i, bits)); err != nil {
			return fmt.Errorf("limit %s: %w", at(s.id.LimitNames, i), err)
		}
	}
	crc := protocol.SetCRC(set)
	if _, err := s.must(protocol.VerbLimit, fmt.Sprintf("use %04X", crc)); err != nil {
		return err
	}
	s.limits, s.limitsCRC = slices.Clone(set), crc
	return nil
}

// putLimit changes one slot by its name.
func (s *session) putLimit(name string, v float64) error {
	i := slices.Index(s.id.LimitNames, name)
	if i < 0 {
		return leftOut("the board holds no limit " + name)
	}
	set := slices.Clone(s.limits)
	set[i] = math.Float32bits(float32(v))
	return s.putLimits(set)
}

// prepare brings the board to off with the test limits in use. What stands in
// the way leaves the check out: another one has failed for it.
func (s *session) prepare() error {
	err := first(s.settle, s.calm)
	if err == nil {
		err = s.putLimits(s.testLimits())
	}
	if err == nil || errors.Is(err, ErrInterrupted) || errors.As(err, new(*lineError)) {
		return err
	}
	return leftOut(err.Error())
}

// settling is how long after its start a board may take to find its shaft at
// rest.
const settling = 400 * time.Millisecond

// settle waits until the last start is that long ago.
func (s *session) settle() error { return s.run(s.bootAt + settling - s.line.Now()) }

// nonce asks for a one-time number.
func (s *session) nonce() (string, error) {
	a, err := s.must(protocol.VerbNonce, "")
	if err != nil {
		return "", err
	}
	if _, ok := protocol.ParseHex32([]byte(a.field(0))); !ok || len(a.fields) != 1 {
		return "", errorf("nonce: %v, wanted eight hex digits", a)
	}
	return a.field(0), nil
}

// armArgs are the arguments of arm with a number and the limits in use.
func (s *session) armArgs(number string) string { return fmt.Sprintf("%s %04X", number, s.limitsCRC) }

// arm arms the board.
func (s *session) arm() error {
	number, err := s.nonce()
	if err != nil {
		return err
	}
	a, err := s.ask(protocol.VerbArm, s.armArgs(number))
	switch {
	case err != nil:
		return err
	case !a.ok && a.code == protocol.RefInterlock:
		return leftOut("an input is not in its working position")
	case !a.ok:
		return errorf("arm: %v, wanted ok and a token", a)
	}
	token, ok := protocol.ParseHex16([]byte(a.field(0)))
	if !ok || len(a.fields) != 1 {
		return errorf("arm: %v, wanted four hex digits", a)
	}
	s.token, s.k = token, 0
	return nil
}

// beat sends a heartbeat that should be accepted.
func (s *session) beat() error {
	s.k++
	return s.send(protocol.AppendBeat(nil, s.k, s.token))
}

// alive keeps the board armed for d.
func (s *session) alive(d time.Duration) error {
	pause := time.Duration(s.beatLimit() / 4 * float64(time.Second))
	for end := s.line.Now() + d; s.line.Now() < end; {
		if err := first(s.beat, func() error { return s.run(pause) }); err != nil {
			return err
		}
	}
	return nil
}

// stopped is one entry of the stop log.
type stopped struct {
	total           int
	cause           protocol.Cause
	seen, beat, off uint32 // µs
}

// stopLog reads stop number i from the newest.
func (s *session) stopLog(i int) (stopped, error) {
	a, err := s.must(protocol.VerbLog, strconv.Itoa(i))
	if err != nil {
		return stopped{}, err
	}
	if len(a.fields) != 7 {
		return stopped{}, errorf("log: %v, wanted seven words", a)
	}
	var v [7]int64
	for j, f := range a.fields {
		n, ok := protocol.ParseInt([]byte(f))
		if !ok || j < 6 && n < 0 || n > math.MaxUint32 {
			return stopped{}, errorf("log: %v: %q is no number of its kind", a, f)
		}
		v[j] = n
	}
	if v[0] != int64(i) {
		return stopped{}, errorf("log %d: %v", i, a)
	}
	return stopped{total: int(v[1]), cause: protocol.Cause(v[2]), seen: uint32(v[3]), beat: uint32(v[4]), off: uint32(v[5])}, nil
}

// tripByBeat arms the board, beats once and waits for the timeout to trip it.
func (s *session) tripByBeat() error {
	return first(s.arm, s.beat, func() error { return s.awaitTrip(protocol.CauseBeat) })
}

// awaitTrip waits for the event of a trip.
func (s *session) awaitTrip(cause protocol.Cause) error {
	d := time.Duration(s.beatLimit()*float64(time.Second)) + 700*time.Millisecond
	l, err := s.wait(d, begins("ev trip "))
	if err != nil {
		return err
	}
	if l == nil {
		return errorf("no ev trip within %v", d.Round(time.Millisecond))
	}
	if w := strings.Split(l.body, " "); len(w) != 4 || w[2] != strconv.Itoa(int(cause)) {
		return errorf("%q, wanted cause %d", l.body, cause)
	}
	return nil
}

// moveWords says what the moving checks will do.
func (s *session) moveWords() string {
	return fmt.Sprintf("The motor may turn: up to %.2g V, up to %.0f rpm, each time for less than 1 s, about ten times.",
		s.id.VoltsMax/9.7, s.id.SpeedMax/9.7*60/(2*math.Pi))
}
