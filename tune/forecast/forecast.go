// Package forecast says what a plan will do before it is run: how fast, how
// much current, how hot, how far the bus rises, how many turns, how long. It uses
// the best model there is, or the nameplate, and says which. It permits nothing;
// the envelope does.
//
// Speeds are in rad/s at the motor shaft, times in float64 seconds.
package forecast

import (
	"errors"
	"fmt"
	"math"
	"time"

	"gainwright/protocol/si"
	"gainwright/safety"
	"gainwright/tune/model"
)

// ErrUnknown is what a forecast wraps that cannot be made from what is known.
var ErrUnknown = errors.New("forecast: not enough is known")

// Known is what a forecast may use. Zero means not known.
type Known struct {
	// Model is the fitted model from volts to speed; nil before there is one.
	Model *model.Linear

	// Numbers of the nameplate and the rig file.
	VoltsRated float64 // V
	SpeedMax   float64 // rad/s
	Resistance float64 // Ω
	Ke         float64 // V per rad/s
	Inertia    float64 // kg·m²

	// Dry friction in volts at the drive, all positive.
	CoulombForward, CoulombReverse     float64
	BreakawayForward, BreakawayReverse float64

	// DeadBand is the part of the Coulomb volts that the driver loses: it draws no
	// current, and a motor that slows down under drive gives back all the more.
	DeadBand float64

	BusNominal     float64 // V
	BusCapacitance float64 // F
	SupplyCanSink  bool    // the supply takes energy back
	CanBrake       bool    // the drive brakes (two or four quadrants)
	RadPerCount    float64 // rad
	Loop           float64 // s, period of the board's loop, which makes the patterns

	// The closed loop on the board, for plans in speed.
	LoopTau       float64 // s, its time constant
	LoopOvershoot float64 // of a step, as a part: 0.1 is 10 %
}

// Forecast is what a plan is expected to do. A number that what is known does
// not give is Unknown.
type Forecast struct {
	TopSpeed model.Value `json:"top_speed_rad_s"` // largest |speed|
	// TopSpeedUnloaded is the largest |speed| without friction and if no segment
	// ends early: what a coupling that lets go would bring.
	TopSpeedUnloaded model.Value   `json:"top_speed_unloaded_rad_s"`
	PeakCurrent      model.Value   `json:"peak_current_A"`
	Energy           model.Value   `json:"energy_J"`   // from the supply
	Heat             model.Value   `json:"heat_J"`     // in the winding
	BusRise          model.Value   `json:"bus_rise_V"` // of what braking returns, or of all ½·J·ω² where that is not known
	Turns            model.Value   `json:"turns"`      // largest distance from the start, either way
	CoastTurns       model.Value   `json:"coast_turns"`
	Duration         time.Duration `json:"duration_ns"`
	// Band is the half-width of what may be expected, as a part of the speed.
	Band float64 `json:"band"`
	// Basis says in words what the forecast rests on.
	Basis string `json:"basis"`
	Line  Line   `json:"-"`
}

// Line is the expected course of the run. Drive is in V.
type Line struct{ Time, Speed, Drive []float64 }

// Bands by basis. A nameplate is good for ±30 % (*our choice*: ±10 % of the maker
// on each of two numbers, and friction); a fit for its own interval, never
// under 5 %.
const (
	bandNameplate = 0.3
	bandLeast     = 0.05
)

// quickTau stands in for an unknown time constant: short, so that the top speed
// is not forecast too low.
const quickTau = 1e-3

// Of forecasts a plan. Errors: an ill-formed plan, or ErrUnknown.
func Of(p safety.Plan, k Known) (Forecast, error) {
	if err := check(p); err != nil {
		return Forecast{}, err
	}
	s, err := newSystem(k)
	if err != nil {
		return Forecast{}, err
	}
	free := s.run(p, true) // also a lock that slips is let go here
	s.locked = p.Locked
	loaded := s.run(p, false)
	f := Forecast{
		TopSpeed: model.Value(loaded.top), TopSpeedUnloaded: model.Value(math.Max(free.top, loaded.top)),
		PeakCurrent: model.Unknown, Energy: model.Unknown, Heat: model.Unknown, BusRise: model.Unknown,
		Turns: model.Value(loaded.far / (2 * math.Pi)), CoastTurns: model.Unknown,
		Duration: p.Duration(), Band: s.band, Basis: s.basis, Line: loaded.line,
	}
	if k.Resistance > 0 {
		f.PeakCurrent, f.Energy, f.Heat = model.Value(loaded.peak), model.Value(loaded.energy), model.Value(loaded.heat)
	}
	f.BusRise = s.busRise(f.TopSpeedUnloaded, loaded.back)
	f.CoastTurns = s.coast(loaded.last)
	return f, nil
}

func check(p safety.Plan) error {
	if len(p.Segments) == 0 {
		return fmt.Errorf("forecast: the plan has no segments")
	}
	for i, s := range p.Segments {
		if !si.Finite(s.From) || !si.Finite(s.To) || s.Duration <= 0 {
			return fmt.Errorf("forecast: segment %d: from %g to %g in %v: give finite values and a duration above 0", i+1, s.From, s.To, s.Duration)
		}
		if s.Mode != safety.ModeVolts && s.Mode != safety.ModeSpeed {
			return fmt.Errorf("forecast: segment %d has no mode", i+1)
		}
	}
	return nil
}

// system is the motor as far as it is known.
type system struct {
	k        Known
	m        model.Linear
	gain     float64 // rad/s per V; 0 for an integrating model
	slope    float64 // rad/s² per V of an integrating model
	tau      float64 // s, slowest lag
	tauKnown bool
	ke       float64
	inertia  float64 // kg·m², 0 if not known
	band     float64
	basis    string
	locked   bool
}

func newSystem(k Known) (*system, error) {
	s := &system{k: k, inertia: k.Inertia, ke: k.Ke}
	if k.Model != nil {
		return s, s.fromModel(*k.Model)
	}
	switch {
	case k.Ke > 0:
		s.gain, s.basis = 1/k.Ke, "back-EMF constant of the nameplate"
	case k.SpeedMax > 0 && k.VoltsRated > 0:
		s.gain, s.basis = k.SpeedMax/k.VoltsRated, "top speed over rated voltage of the nameplate"
		s.ke = 1 / s.gain
	default:
		return nil, fmt.Errorf("%w: give the back-EMF constant, or rated voltage and top speed, or a model", ErrUnknown)
	}
	s.tau, s.band = quickTau, bandNameplate
	if s.inertia > 0 && k.Resistance > 0 {
		s.tau, s.tauKnown = s.inertia*k.Resistance/(s.ke*s.ke), true
	}
	s.m = model.FirstOrder(s.gain, s.tau, 0)
	return s, nil
}

func (s *system) fromModel(m model.Linear) error {
	if err := m.Validate(); err != nil {
		return err
	}
	if m.InputUnit == model.InputAmps {
		return fmt.Errorf("%w: the model is from current, and drives in current mode are not driven", ErrUnknown)
	}
	s.m, s.basis, s.band = m, "fitted model", bandLeast
	last := len(m.Den) - 1
	if m.Den[last] == 0 {
		s.slope = m.Num[len(m.Num)-1] / m.Den[last-1]
	} else {
		s.gain = m.DCGain()
		s.tau, s.tauKnown = slowest(m), true
		if s.ke == 0 {
			s.ke = math.Abs(1 / s.gain) // friction that grows with speed is small against the back-EMF
		}
		if s.inertia == 0 && s.k.Resistance > 0 {
			s.inertia = s.tau * s.ke * s.ke / s.k.Resistance
		}
	}
	for _, name := range []string{"gain", "slope"} {
		if ci, ok := m.CI95[name]; ok && ci[0]+ci[1] != 0 {
			s.band = math.Max(s.band, math.Abs((ci[1]-ci[0])/(ci[1]+ci[0])))
		}
	}
	return nil
}

func slowest(m model.Linear) (tau float64) {
	for _, p := range m.Poles() {
		if real(p) < 0 {
			tau = math.Max(tau, -1/real(p))
		}
	}
	return tau
}

// busRise is what the capacitance of the bus makes of the energy that comes back.
// Where resistance and time constant are known that is what braking returns in
// the course of the plan: output off lets the motor coast, which returns none.
// Else the whole kinetic energy of the top speed is the bound.
func (s *system) busRise(top model.Value, back float64) model.Value {
	k := s.k
	switch {
	case !k.CanBrake || k.SupplyCanSink:
		return 0
	case k.BusCapacitance <= 0 || k.BusNominal <= 0:
		return model.Unknown
	case k.Resistance <= 0 || !s.tauKnown:
		if s.inertia <= 0 {
			return model.Unknown
		}
		w := float64(top)
		back = s.inertia * w * w / 2
	}
	return model.Value(math.Sqrt(k.BusNominal*k.BusNominal+2*back/k.BusCapacitance) - k.BusNominal)
}

// coast returns the turns from a speed to rest with the output off, by dry
// friction alone: the deceleration is K·Fc/τ, with Fc in volts. Back-EMF does not
// brake, because no current flows.
func (s *system) coast(speed float64) model.Value {
	fc := s.k.CoulombForward
	if speed < 0 {
		fc = s.k.CoulombReverse
	}
	switch {
	case speed == 0:
		return 0
	case fc <= 0 || !s.tauKnown || s.gain == 0:
		return model.Unknown
	}
	return model.Value(speed * speed * s.tau / (2 * math.Abs(s.gain) * fc) / (2 * math.Pi))
}
