package job

import (
	"encoding/json"
	"fmt"

	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
)

// Last is what a record ends with: the model that was chosen and the gains that
// the board was left with. What it does not hold is nil.
type Last struct {
	Model     *model.Linear
	FitFile   string
	Window    float64 // s, of the board's speed; 0 where not known
	Gains     *design.Gains
	GainsFrom string // which entry, in words
}

// LastDesign reads what a record ends with. The error wraps
// ErrNothingToRecompute where there is neither a fit nor a gain.
func LastDesign(r *sheet.Reader) (Last, error) {
	var out Last
	var proposal *sheet.ProposalRecord
	for _, l := range r.Find(sheet.KindProposal, "") {
		var p sheet.ProposalRecord
		if err := r.JSON(l, &p); err != nil {
			return out, err
		}
		if len(p.InputFiles) == 1 {
			out.FitFile, out.Window = p.InputFiles[0], windowOf(p.Settings)
		}
		if p.Chosen {
			proposal, out.GainsFrom = &p, "proposed, "+l.File
		}
	}
	if err := out.model(r); err != nil {
		return out, err
	}
	if proposal != nil {
		out.Gains = new(design.Gains)
		if err := json.Unmarshal(proposal.Gains, out.Gains); err != nil {
			return out, fmt.Errorf("%s: %w", out.GainsFrom, err)
		}
	}
	if err := out.left(r); err != nil {
		return out, err
	}
	if out.Model == nil && out.Gains == nil && len(r.Find(sheet.KindFit, "")) == 0 {
		return out, ErrNothingToRecompute
	}
	return out, nil
}

func windowOf(settings json.RawMessage) float64 {
	var set DesignSettings
	if json.Unmarshal(settings, &set) != nil {
		return 0
	}
	return set.Window
}

// model takes the fit that the newest proposal came from, else the newest that
// was chosen: its entry is the one with the curve.
func (o *Last) model(r *sheet.Reader) error {
	for _, l := range r.Find(sheet.KindFit, "") {
		var f sheet.FitRecord
		if err := r.JSON(l, &f); err != nil {
			return err
		}
		if len(f.Model) == 0 || f.Verdict == string(identify.Refused) || f.Curve == nil && l.File != o.FitFile {
			continue
		}
		m := new(model.Linear)
		if err := json.Unmarshal(f.Model, m); err != nil {
			return fmt.Errorf("%s: %w", l.File, err)
		}
		o.Model, o.FitFile = m, l.File
	}
	return nil
}

// left takes the gains that the board was left with, if it holds a law.
func (o *Last) left(r *sheet.Reader) error {
	l, ok := r.Last(sheet.KindAsLeft, "")
	if !ok {
		return nil
	}
	var s sheet.Snapshot
	if err := r.JSON(l, &s); err != nil {
		return err
	}
	var g design.Gains
	if json.Unmarshal(s.Running, &g) == nil {
		o.Gains, o.GainsFrom = &g, "as left, "+l.File
	}
	return nil
}

// OldGains judges the gains that an earlier job left on the motor that a later
// one found.
func OldGains(old, new *sheet.Reader) (design.Margins, error) {
	was, err := LastDesign(old)
	if err != nil {
		return design.Margins{}, fmt.Errorf("old: %w", err)
	}
	is, err := LastDesign(new)
	if err != nil {
		return design.Margins{}, fmt.Errorf("new: %w", err)
	}
	if was.Gains == nil || is.Model == nil {
		return design.Margins{}, fmt.Errorf("%w, or without a model that is believed", ErrNothingToRecompute)
	}
	return design.Judge(LoopModel(*is.Model, is.Window), linear(*was.Gains))
}
