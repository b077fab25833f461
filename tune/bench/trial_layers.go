package bench

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"time"

	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/tune/job"
)

// Layers are the limiters that judge in a trial.
type Layers struct{ Console, Board bool }

// BothLayers is the usual case.
var BothLayers = Layers{Console: true, Board: true}

func (l Layers) String() string {
	switch l {
	case BothLayers:
		return "both limiters"
	case Layers{Console: true}:
		return "console limiter only"
	case Layers{Board: true}:
		return "board limiter only"
	}
	return "no limiter"
}

// trialHands gives the console another envelope than the one that the board is
// told to hold.
type trialHands struct {
	job.Hands
	env     func(safety.Envelope) safety.Envelope
	console bool
}

// Run leaves the band of the forecast away where the console is not to judge.
func (h trialHands) Run(r job.Run) (job.Result, error) {
	if !h.console {
		r.Band = nil
	}
	return h.Hands.Run(r)
}

func (h trialHands) Rig(env safety.Envelope) { h.Hands.Rig(h.env(env)) }

// hands lends hands under which only these layers judge. The board's timeout,
// inputs and cut, and the console's heartbeats, work in every case.
func (l Layers) hands(h job.Hands, style safety.StopStyle) job.Hands {
	return trialHands{h, func(env safety.Envelope) safety.Envelope {
		env.Stop = style
		if !l.Console {
			env = permissive(env)
		}
		return env
	}, l.Console}
}

// permissive is an envelope that admits the same drive and judges nothing.
func permissive(env safety.Envelope) safety.Envelope {
	const far = 1e6
	env.SpeedMax, env.CurrentMax, env.BusMax, env.BusMin = far, far, 0, 0
	env.AccelMax, env.TurnsMax, env.TempMax = math.MaxFloat32, far, 0
	env.StallTime, env.WrongWayTime = time.Hour, time.Hour
	env.CurrentContinuous, env.HeatTau = far, time.Hour
	env.Ke, env.Resistance, env.Look = 0, 0, safety.LookAhead{}
	return env
}

// LayerRow is one fault under one set of limiters.
type LayerRow struct {
	Fault     string   `json:"fault"`
	When      string   `json:"when"`
	Layers    string   `json:"layers"`
	StoppedBy string   `json:"stopped_by"`
	Cause     string   `json:"cause"`
	OffMS     *float64 `json:"off_ms"` // null: it stayed on
	TopSpeed  float64  `json:"top_speed_rad_s"`
	TopAmps   float64  `json:"top_current_A"`
	Inside    bool     `json:"inside"`        // no limit passed by more than Slack; SlackAlone for one limiter alone
	Kept      bool     `json:"to_be_kept"`    // what SAFETY.md says of this row
	Bad       string   `json:"bad,omitempty"` // where the two differ
}

// SlackAlone is Slack for one limiter alone: the console's judgement comes a
// sample, a line and a wire later than the board's.
const SlackAlone = 0.15

// layerCase is a fault that runs a motor away unless somebody judges.
type layerCase struct {
	faultCase
	boardAlone bool // the board's limiter alone keeps the rig inside
}

func layerCases() []layerCase {
	inject := func(kind string, value float64) func(*trial, *Virtual) {
		return func(_ *trial, v *Virtual) { v.rig.Inject(kind, value) }
	}
	return []layerCase{
		{faultCase{name: "encoder channels swap", when: inLoop, do: inject(simrig.FaultReversed, 0)}, true},
		{faultCase{name: "shaft jams", when: inLoop, do: inject(simrig.FaultStalled, 0)}, true},
		// The board looks at counts only: a dead encoder runs the motor up for as long
		// as its no-counts time is, and a slipping one is not seen at all.
		{faultCase{name: "encoder dies", when: inLoop, do: inject(simrig.FaultDeadEncoder, 0)}, false},
		{faultCase{name: "encoder coupling slips by 90 %", when: inLoop, do: inject(simrig.FaultSlip, 0.9)}, false},
	}
}

// LayerTrials runs faults with limiters taken away one at a time: with either one
// the shaft stays inside, with none the rig sees its limits passed.
func LayerTrials(cfg simrig.Config) ([]LayerRow, error) {
	dir, err := os.MkdirTemp("", "gainwright-layers-")
	if err != nil {
		return nil, err
	}
	defer os.RemoveAll(dir)
	cases, layers := layerCases(), []Layers{BothLayers, {Board: true}, {Console: true}, {}}
	return inOrder(len(cases)*len(layers), func(i int) (LayerRow, error) {
		c, l := cases[i/len(layers)], layers[i%len(layers)]
		row, seen, err := c.layered(cfg, filepath.Join(dir, fmt.Sprint(i)), l)
		out := LayerRow{Fault: c.name, When: string(c.when), Layers: l.String(), StoppedBy: row.StoppedBy, Cause: row.Cause,
			OffMS: row.OffMS, TopSpeed: seen.Speed, TopAmps: seen.Amps, Kept: l.Console || l.Board && c.boardAlone}
		slack := Slack
		if l.Console != l.Board {
			slack = SlackAlone
		}
		if out.Inside, _ = inside(seen, slack); out.Inside != out.Kept {
			out.Bad = "SAFETY.md says otherwise"
		}
		return out, err
	}, nil)
}
