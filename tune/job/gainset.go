package job

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"gainwright/protocol"
	"gainwright/tune/design"
)

// GainSet is a set of gains as the board holds it: 32 bits a slot.
type GainSet struct {
	Names []string
	Bits  []uint32
	LSB   []float64 // of a board with integer gains: what one unit stands for; nil: binary32
}

// newGainSet is an empty set of the board's slots.
func newGainSet(id protocol.Identity) GainSet {
	s := GainSet{Names: id.GainNames}
	if id.Number == "int" && len(id.GainLSB) == len(id.GainNames) {
		s.LSB = id.GainLSB
	}
	return s
}

// at is the value of slot i in SI units.
func (s GainSet) at(i int) float64 {
	if s.LSB != nil {
		return float64(int32(s.Bits[i])) * s.LSB[i]
	}
	return float64(math.Float32frombits(s.Bits[i]))
}

// rounded is v as slot i holds it. An integer that would be too large, or nothing
// where something is wanted, is an error.
func (s GainSet) rounded(i int, v float64) (uint32, error) {
	if s.LSB == nil {
		return math.Float32bits(float32(v)), nil
	}
	n := math.RoundToEven(v / s.LSB[i])
	switch {
	case math.IsNaN(n) || math.Abs(n) > math.MaxInt32:
		return 0, fmt.Errorf("gain %s = %.6g does not fit into the board's integer: one unit is %.3g", s.Names[i], v, s.LSB[i])
	case n == 0 && v != 0:
		return 0, fmt.Errorf("gain %s = %.6g rounds to 0 on this board: one unit is %.3g", s.Names[i], v, s.LSB[i])
	}
	return uint32(int32(n)), nil
}

// CRC is the set's own check code.
func (s GainSet) CRC() uint16 { return protocol.SetCRC(s.Bits) }

// Equal reports whether two sets are equal bit for bit.
func (s GainSet) Equal(t GainSet) bool {
	return slices.Equal(s.Names, t.Names) && slices.Equal(s.Bits, t.Bits)
}

// Clone copies the set.
func (s GainSet) Clone() GainSet {
	return GainSet{Names: slices.Clone(s.Names), Bits: slices.Clone(s.Bits), LSB: s.LSB}
}

// Value returns a gain of a float board as a number.
func (s GainSet) Value(name string) (float64, bool) {
	i := slices.Index(s.Names, name)
	if i < 0 {
		return 0, false
	}
	return s.at(i), true
}

// set rounds v to what the board holds and puts it into a slot, if there is one.
func (s GainSet) set(name string, v float64) (there bool, err error) {
	i := slices.Index(s.Names, name)
	if i < 0 {
		return false, nil
	}
	bits, err := s.rounded(i, v)
	if err == nil {
		s.Bits[i] = bits
	}
	return true, err
}

// gainUnits are the units of SPEC.md P8.1.
var gainUnits = map[string]string{"kp": "V/(rad/s)", "ki": "V/rad", "kd": "V·s²/rad", "tf": "s", "b": "1", "tt": "s",
	"kv": "V/(rad/s)", "ks": "V", "kc": "V/(rad/s)", "ti": "s", "td": "s"}

// Words returns the set as name, eight digits and the decimal beside it.
func (s GainSet) Words() map[string]string {
	w := map[string]string{}
	for i, n := range s.Names {
		if s.LSB != nil {
			w[n] = fmt.Sprintf("%08X %d × %.9g %s", s.Bits[i], int32(s.Bits[i]), s.LSB[i], gainUnits[n])
			continue
		}
		w[n] = fmt.Sprintf("%08X %.9g %s", s.Bits[i], math.Float32frombits(s.Bits[i]), gainUnits[n])
	}
	return w
}

// Finite reports whether every slot is a finite number.
func (s GainSet) Finite() error {
	for i, n := range s.Names {
		if v := s.at(i); math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("the board holds %v as gain %s", v, n)
		}
	}
	return nil
}

// Design returns the set as gains of the law that the identity declares, under
// the limit uMax in V.
func (s GainSet) Design(id protocol.Identity, uMax float64) (design.Gains, error) {
	if id.Number == "int" && s.LSB == nil {
		return design.Gains{}, fmt.Errorf("the board holds integer gains and does not say what one unit of each stands for")
	}
	g := design.Gains{Form: id.Form, SetpointWeight: 1, SampleTime: id.Loop.Seconds(), ComputeDelay: id.ComputeDelay.Seconds(),
		DerivativeOn: id.Derivative, Discretisation: id.Discretisation, AntiWindup: id.AntiWindup}
	lo := -uMax
	if id.Quadrants == 1 {
		lo = 0
	}
	g.UMin, g.UMax = &lo, &uMax
	var ff design.Feedforward
	for i, n := range s.Names {
		v := s.at(i)
		switch n {
		case "kp":
			g.Kp = v
		case "ki":
			g.Ki = v
		case "kd":
			g.Kd = v
		case "kc":
			if id.Form == design.FormIdeal {
				g.Kp = v
			} else {
				g.Kc = v
			}
		case "ti":
			if g.Ti = v; v == 0 {
				g.Ti = math.Inf(1)
			}
		case "td":
			g.Td = v
		case "tf":
			g.DerivativeFilter = v
		case "b":
			g.SetpointWeight = v
		case "tt":
			g.TrackingTime = v
		case "kv":
			ff.Speed = v
		case "ks":
			ff.StaticForward, ff.StaticReverse = v, v
		}
	}
	if ff != (design.Feedforward{}) {
		g.Feedforward = &ff
	}
	return g, nil
}

// With returns a copy of the set that holds g, rounded as the board rounds. Slots
// that g says nothing of keep what they hold. It fails where g needs a slot that
// the board has not.
func (s GainSet) With(g design.Gains, id protocol.Identity) (GainSet, error) {
	t := s.Clone()
	p := g.Parallel()
	var missing []string
	var coarse []error
	put := func(name string, v float64, needed bool) {
		there, err := t.set(name, v)
		if err != nil {
			coarse = append(coarse, err)
		}
		if !there && needed {
			missing = append(missing, name)
		}
	}
	switch id.Form {
	case design.FormParallel:
		put("kp", p.Kp, true)
		put("ki", p.Ki, true)
		put("kd", p.Kd, p.Kd != 0)
	default:
		if p.Ki == 0 || p.Kd != 0 {
			return t, fmt.Errorf("gains without integral or with derivative are not written in the form %q", id.Form)
		}
		put("kc", p.Kp, true)
		put("ti", p.Kp/p.Ki, true)
		put("td", 0, false)
	}
	put("tf", g.DerivativeFilter, g.DerivativeFilter != 0)
	put("b", g.SetpointWeight, g.SetpointWeight != 1)
	put("tt", g.TrackingTime, g.TrackingTime != 0)
	var ff design.Feedforward
	if g.Feedforward != nil {
		ff = *g.Feedforward
	}
	put("kv", ff.Speed, ff.Speed != 0)
	put("ks", ff.StaticForward, ff.StaticForward != 0)
	if missing != nil {
		return t, fmt.Errorf("the board has no slot for %s", strings.Join(missing, ", "))
	}
	return t, errors.Join(append(coarse, t.Finite())...)
}
