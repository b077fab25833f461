package job

import (
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
}

// CRC is the set's own check code.
func (s GainSet) CRC() uint16 { return protocol.SetCRC(s.Bits) }

// Equal reports whether two sets are equal bit for bit.
func (s GainSet) Equal(t GainSet) bool {
	return slices.Equal(s.Names, t.Names) && slices.Equal(s.Bits, t.Bits)
}

// Clone copies the set.
func (s GainSet) Clone() GainSet {
	return GainSet{Names: slices.Clone(s.Names), Bits: slices.Clone(s.Bits)}
}

// Value returns a gain of a float board as a number.
func (s GainSet) Value(name string) (float64, bool) {
	i := slices.Index(s.Names, name)
	if i < 0 {
		return 0, false
	}
	return float64(math.Float32frombits(s.Bits[i])), true
}

// set rounds v to the board's binary32 and puts it into a slot, if there is one.
func (s GainSet) set(name string, v float64) bool {
	i := slices.Index(s.Names, name)
	if i >= 0 {
		s.Bits[i] = math.Float32bits(float32(v))
	}
	return i >= 0
}

// gainUnits are the units of SPEC.md P8.1.
var gainUnits = map[string]string{"kp": "V/(rad/s)", "ki": "V/rad", "kd": "V·s²/rad", "tf": "s", "b": "1", "tt": "s",
	"kv": "V/(rad/s)", "ks": "V", "kc": "V/(rad/s)", "ti": "s", "td": "s"}

// Words returns the set as name, eight digits and the decimal beside it.
func (s GainSet) Words() map[string]string {
	w := map[string]string{}
	for i, n := range s.Names {
		w[n] = fmt.Sprintf("%08X %.9g %s", s.Bits[i], math.Float32frombits(s.Bits[i]), gainUnits[n])
	}
	return w
}

// Finite reports whether every slot is a finite number.
func (s GainSet) Finite() error {
	for i, n := range s.Names {
		if v := float64(math.Float32frombits(s.Bits[i])); math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("the board holds %v as gain %s", v, n)
		}
	}
	return nil
}

// Design returns the set as gains of the law that the identity declares, under
// the limit uMax in V.
func (s GainSet) Design(id protocol.Identity, uMax float64) (design.Gains, error) {
	if id.Number == "int" {
		return design.Gains{}, fmt.Errorf("the board holds integer gains: reading them is not supported yet; use convert with its scaling")
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
		v := float64(math.Float32frombits(s.Bits[i]))
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
	put := func(name string, v float64, needed bool) {
		if !t.set(name, v) && needed {
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
	return t, t.Finite()
}
