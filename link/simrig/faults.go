package simrig

import (
	"slices"
	"time"
)

// The kinds of fault a BOARD.toml may name.
const (
	FaultReversed      = "encoder-reversed"
	FaultDeadEncoder   = "encoder-dead"
	FaultSlip          = "encoder-slips"
	FaultStalled       = "stalled"
	FaultSupplyFolds   = "supply-folds"
	FaultRestarts      = "restarts"
	FaultMute          = "mute"
	FaultDeaf          = "deaf"
	FaultNoTimeout     = "no-timeout"
	FaultIgnoresCut    = "ignores-cut"
	FaultGainsDiffer   = "stored-gains-differ"
	FaultLimitsLie     = "lies-about-limits"
	FaultResetsItself  = "resets-itself"
	FaultWrongCRC      = "wrong-crc"
	FaultOldNumber     = "arms-on-old-number"
	FaultStaleSequence = "stale-sequence"
	FaultIgnoresInputs = "ignores-inputs"
	FaultUnjudged      = "limits-not-judged"
	FaultLoose         = "load-loose"
	FaultPushed        = "load-pushes"
)

// faultKind says what a fault does and what its value means.
type faultKind struct {
	does  string
	value string  // meaning and unit, "" where it has none
	def   float64 // used where the file gives 0
}

var faultKinds = map[string]faultKind{
	FaultReversed:      {does: "counts fall where positive drive turns the shaft"},
	FaultDeadEncoder:   {does: "the counter stays where it is"},
	FaultSlip:          {does: "the encoder's coupling loses a share of the rotation", value: "share lost", def: 0.3},
	FaultStalled:       {does: "the shaft is jammed"},
	FaultSupplyFolds:   {does: "the supply gives no more than this current and folds back", value: "A; default a tenth of the nameplate's current", def: 0},
	FaultRestarts:      {does: "the board restarts once, as from a dip of the supply"},
	FaultMute:          {does: "nothing more comes from the board, which works on"},
	FaultDeaf:          {does: "the board hears nothing more"},
	FaultNoTimeout:     {does: "a missing heartbeat does not stop the board"},
	FaultIgnoresCut:    {does: "the cut byte does nothing"},
	FaultGainsDiffer:   {does: "a store keeps the first gain with its lowest bit changed"},
	FaultLimitsLie:     {does: "limits are taken, even above the hard ones, and not judged"},
	FaultResetsItself:  {does: "the board restarts again and again", value: "s between restarts", def: 5},
	FaultWrongCRC:      {does: "every line has a wrong CRC"},
	FaultOldNumber:     {does: "arming takes any one-time number that was ever given out"},
	FaultIgnoresInputs: {does: "inputs are reported and not judged"},
	FaultStaleSequence: {does: "telemetry repeats its number"},
	FaultUnjudged:      {does: "limits are held and read back, and from then on not judged; timeout, inputs and cut work on"},
	FaultLoose:         {does: "the load comes off: inertia and friction fall to this share", value: "share left", def: 0.2},
	FaultPushed:        {does: "the load drives the shaft forward", value: "N·m; default three times Coulomb friction", def: 0},
}

// FaultKinds lists the kinds of fault, sorted.
func FaultKinds() []string {
	k := make([]string, 0, len(faultKinds))
	for name := range faultKinds {
		k = append(k, name)
	}
	slices.Sort(k)
	return k
}

// fault is one fault of the running rig.
type fault struct {
	kind  string
	at    int64 // ns from which it is there
	value float64
	begun bool
}

func makeFaults(specs []FaultSpec) []fault {
	var fs []fault
	for _, s := range specs {
		v := s.Value
		if v == 0 {
			v = faultKinds[s.Kind].def
		}
		at := s.AtS
		if s.Kind == FaultResetsItself && at == 0 {
			at = v
		}
		fs = append(fs, fault{kind: s.Kind, at: int64(at * 1e9), value: v})
	}
	slices.SortStableFunc(fs, func(a, b fault) int { return int(min(max(a.at-b.at, -1), 1)) })
	return fs
}

// Inject brings a fault about from now on, as a drill does. An unknown kind is a
// mistake of the caller and panics.
func (r *Rig) Inject(kind string, value float64) {
	k, ok := faultKinds[kind]
	if !ok {
		panic("simrig: unknown fault " + kind)
	}
	if value == 0 {
		value = k.def
	}
	r.faults = append(r.faults, fault{kind: kind, at: r.now, value: value})
	r.beginFaults()
}

// Cure takes away faults that the board has until they are cured: mute, deaf and the
// like. What was broken in the rig stays broken.
func (r *Rig) Cure(kinds ...string) {
	for _, k := range kinds {
		delete(r.wrong, k)
	}
}

// nextFault is the instant of the next fault that has not begun, or horizon.
func (r *Rig) nextFault(horizon int64) int64 {
	for i := range r.faults {
		if f := &r.faults[i]; !f.begun && f.at < horizon {
			horizon = f.at
		}
	}
	return horizon
}

// beginFaults brings about every fault whose time has come.
func (r *Rig) beginFaults() {
	for i := range r.faults {
		f := &r.faults[i]
		if f.begun || f.at > r.now {
			continue
		}
		f.begun = true
		r.begin(f)
	}
}

func (r *Rig) begin(f *fault) {
	r.sync()
	switch f.kind {
	case FaultReversed:
		r.enc.reverse()
	case FaultDeadEncoder:
		r.enc.dead = true
	case FaultSlip:
		r.enc.slip = f.value
	case FaultStalled:
		r.plant.jam()
	case FaultSupplyFolds:
		if f.value == 0 {
			f.value = r.cfg.Nameplate.AmpsMax / 10
		}
		r.plant.supply.limit, r.plant.supply.fold = f.value, f.value/4
	case FaultLoose:
		m := &r.plant.motor
		for _, x := range []*float64{&m.j, &m.fwd.coulomb, &m.fwd.static, &m.fwd.viscous, &m.rev.coulomb, &m.rev.static, &m.rev.viscous} {
			*x *= f.value
		}
		r.plant.forget()
	case FaultPushed:
		if f.value == 0 {
			f.value = 3 * r.plant.motor.fwd.coulomb
		}
		r.plant.motor.load -= f.value
		r.plant.forget()
	case FaultRestarts:
		r.Restart("brownout")
	case FaultResetsItself:
		r.Restart("watchdog")
		f.begun = false
		f.at = r.now + int64(f.value*float64(time.Second))
	default:
		r.wrong[f.kind] = true
	}
}
