package bench

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"time"

	"gainwright/link/simrig"
	"gainwright/protocol"
	"gainwright/tune/job"
)

// wrongWrites stands between job and board: as long as there are some left, a set
// that is swapped in has another first gain than was asked for, and the board is
// content with it.
type wrongWrites struct {
	job.Hands
	left   *int
	staged map[int]uint32
}

func (h wrongWrites) Request(verb, args string) (protocol.Answer, error) {
	var slot int
	var bits uint32
	if n, _ := fmt.Sscanf(args, "set %d %X", &slot, &bits); verb == protocol.VerbGain && n == 2 {
		if slot == 0 && *h.left > 0 {
			bits ^= 1
		}
		h.staged[slot] = bits
		args = fmt.Sprintf("set %d %08X", slot, bits)
	}
	if verb == protocol.VerbGain && strings.HasPrefix(args, "use ") && *h.left > 0 {
		*h.left--
		s := job.GainSet{}
		for i := range len(h.staged) {
			s.Bits = append(s.Bits, h.staged[i])
		}
		args = fmt.Sprintf("use %04X", s.CRC())
	}
	return h.Hands.Request(verb, args)
}

// A push that does not come out equal puts all old values back and says so; where
// that fails as well it says not to close the loop.
func TestAPushThatDiffersIsTakenBack(t *testing.T) {
	for _, c := range []struct{ wrong, refusal int }{{1, 744}, {2, 743}} {
		cfg, err := simrig.Load("../../testdata/rigs/benchtop.toml")
		if err != nil {
			t.Fatal(err)
		}
		r, text, err := RigOf(cfg)
		if err != nil {
			t.Fatal(err)
		}
		v := NewVirtual(simrig.New(cfg, 1), time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC))
		none := 0
		h := wrongWrites{Hands: v.Hands(nil), left: &none, staged: map[int]uint32{}}
		j := job.New(h, job.Options{Rig: r, RigText: text, Version: "test"})
		for _, s := range job.Path {
			if s.ID == job.StepPush {
				break
			}
			if s.Optional || j.StatusOf(s.ID) == job.Skipped {
				continue
			}
			if err := j.Do(s.ID); err != nil {
				t.Fatalf("%s: %v", s.ID, err)
			}
		}
		*h.left = c.wrong
		err = j.Do(job.StepPush)
		var ref *job.RefusedError
		if !errors.As(err, &ref) || ref.Number != c.refusal {
			t.Fatalf("%d wrong writes: %v, want refusal %d", c.wrong, err, c.refusal)
		}
		if j.Pushed || j.StatusOf(job.StepPush) == job.Done {
			t.Errorf("%d wrong writes: the push counts as done", c.wrong)
		}
		// What the board itself runs, asked over the wire.
		for i, want := range j.Found.Bits {
			a, err := h.Hands.Request(protocol.VerbGain, fmt.Sprintf("get run %d", i))
			if err != nil {
				t.Fatal(err)
			}
			if got, same := a.Field(2), fmt.Sprintf("%08X", want); (got == same) != (c.wrong == 1 || i > 0) {
				t.Errorf("%d wrong writes: gain %d is %s, as found was %s", c.wrong, i, got, same)
			}
		}
		if err := j.Do(job.StepFirstLoop); err == nil {
			t.Errorf("%d wrong writes: the loop is closed all the same", c.wrong)
		}
	}
}
