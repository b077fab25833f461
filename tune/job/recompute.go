package job

import (
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"strconv"
	"strings"

	"gainwright/protocol"
	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// ErrNothingToRecompute says that a job did not come as far as a fit.
var ErrNothingToRecompute = errors.New("the job did not come as far as a fit: there is nothing to compute again")

// Recomputed is what the data of a sheet give when the analysis is done again.
type Recomputed struct {
	Identical   bool            `json:"identical"`
	Gains       *design.Gains   `json:"gains"` // nil where nothing was proposed
	Model       *identify.Fit   `json:"model"` // nil where every model is refused
	Margins     *design.Margins `json:"margins"`
	Worst       *design.Worst   `json:"worst"`
	NoChange    bool            `json:"no_change"` // Gains are those found
	Refused     string          `json:"refused,omitempty"`
	Compared    int             `json:"compared"` // numbers and words
	Differences []Difference    `json:"differences"`
	Inputs      []string        `json:"inputs"`
	Recorded    string          `json:"recorded_by"` // program of the sheet
}

// Recompute does the newest analysis of a sheet again from its traces and
// settings and compares what comes out bit for bit with what was recorded. It
// wraps ErrNothingToRecompute where there was none. Any other error is an entry
// that cannot be read or was changed: nothing is computed from such.
func Recompute(r *sheet.Reader) (Recomputed, error) {
	c := recomputing{r: r}
	c.out.Recorded, c.out.Differences = r.Header().Program, []Difference{}
	fits, err := c.fits()
	if err != nil {
		return c.out, err
	}
	res, err := c.identify(fits)
	if err != nil {
		return c.out, err
	}
	if best := res.Best(); best != nil {
		c.out.Model = best
		if err := c.design(*best, fits); err != nil {
			return c.out, err
		}
	}
	if err := c.experiments(); err != nil {
		return c.out, err
	}
	c.out.Identical = len(c.out.Differences) == 0
	return c.out, nil
}

// ModelWords are the parameters of the model with the halves of their 95 %
// intervals, "" where every model is refused.
func (r Recomputed) ModelWords() string {
	if r.Model == nil {
		return ""
	}
	return fmt.Sprintf("%s, %s: %s", r.Model.Model.Kind, r.Model.Verdict, paramWords(*r.Model))
}

type recomputing struct {
	r   *sheet.Reader
	out Recomputed
}

// kept is an entry with what it holds.
type kept[T any] struct {
	line sheet.Line
	rec  T
}

func (c *recomputing) differ(what, recorded, recomputed string) {
	c.out.Differences = append(c.out.Differences, Difference{What: what, Recorded: recorded, Recomputed: recomputed})
}

// newest reads the entries of a kind and returns the last run of them that
// share what same says; only those that keep wants are looked at.
func newest[T any](r *sheet.Reader, kind sheet.Kind, wanted func(T) bool, same func(a, b T) bool) ([]kept[T], error) {
	var out []kept[T]
	for _, l := range r.Find(kind, "") {
		var v T
		if l.Name() == sheet.NameBreakaway || l.Name() == sheet.NameStaircase || l.Name() == sheet.NameMotor {
			continue
		}
		if err := r.JSON(l, &v); err != nil {
			return nil, err
		}
		if !wanted(v) {
			continue
		}
		if len(out) > 0 && (!same(out[0].rec, v) || named(out, l.Name())) {
			out = nil
		}
		out = append(out, kept[T]{l, v})
	}
	return out, nil
}

// named reports whether one of the entries has that name: a second of it begins
// a new run.
func named[T any](list []kept[T], name string) bool {
	return slices.ContainsFunc(list, func(k kept[T]) bool { return k.line.Name() == name })
}

// fits are the records of the newest fit, one a model.
func (c *recomputing) fits() ([]kept[sheet.FitRecord], error) {
	list, err := newest(c.r, sheet.KindFit, func(f sheet.FitRecord) bool { return f.Kind != "" && len(f.InputFiles) == 1 },
		func(a, b sheet.FitRecord) bool {
			return string(a.Settings) == string(b.Settings) && slices.Equal(a.InputFiles, b.InputFiles) && slices.Equal(a.HoldoutFiles, b.HoldoutFiles)
		})
	if err == nil && len(list) == 0 {
		err = ErrNothingToRecompute
	}
	return list, err
}

func (c *recomputing) trace(file string) (*trace.Trace, error) {
	l, ok := c.r.ByFile(file)
	if !ok {
		return nil, fmt.Errorf("%w: the fit names the trace %s", sheet.ErrNoEntry, file)
	}
	c.out.Inputs = append(c.out.Inputs, file)
	return c.r.Trace(l)
}

func (c *recomputing) identify(fits []kept[sheet.FitRecord]) (identify.Result, error) {
	first := fits[0].rec
	var set FitSettings
	if err := json.Unmarshal(first.Settings, &set); err != nil {
		return identify.Result{}, fmt.Errorf("%s: settings: %w", fits[0].line.File, err)
	}
	step, err := c.trace(first.InputFiles[0])
	if err != nil {
		return identify.Result{}, err
	}
	var second *trace.Trace
	if len(first.HoldoutFiles) > 0 {
		if second, err = c.trace(first.HoldoutFiles[0]); err != nil {
			return identify.Result{}, err
		}
	}
	res, err := set.Identify(step, second)
	if err != nil {
		c.differ(fits[0].line.File, "a model", "no fit: "+err.Error())
		return identify.Result{}, nil
	}
	for _, k := range fits {
		if err := c.model(k, res, step); err != nil {
			return res, err
		}
	}
	for i := range res.Models {
		if !c.r.Closed() {
			break // a job that was broken off may lack its last entries
		}
		if kind := res.Models[i].Model.Kind; !slices.ContainsFunc(fits, func(k kept[sheet.FitRecord]) bool { return k.rec.Kind == kind }) {
			c.differ("model "+kind, "not there", "fitted")
		}
	}
	return res, nil
}

// model compares one recorded fit with its like, in all that it says.
func (c *recomputing) model(k kept[sheet.FitRecord], res identify.Result, step *trace.Trace) error {
	i := slices.IndexFunc(res.Models, func(f identify.Fit) bool { return f.Model.Kind == k.rec.Kind })
	if i < 0 {
		c.differ(k.line.File, "model "+k.rec.Kind, "not fitted")
		return nil
	}
	f := &res.Models[i]
	if f != res.Best() {
		step = nil
	}
	second := ""
	if len(k.rec.HoldoutFiles) > 0 {
		second = k.rec.HoldoutFiles[0]
	}
	var set FitSettings
	if err := json.Unmarshal(k.rec.Settings, &set); err != nil {
		return fmt.Errorf("%s: settings: %w", k.line.File, err)
	}
	rec, err := fitRecord(f, set, k.rec.InputFiles[0], second, step)
	if err != nil {
		return err
	}
	return c.entry(k.line, rec)
}

// entry compares a whole entry with what it should hold.
func (c *recomputing) entry(l sheet.Line, rec any) error {
	raw, err := c.r.Read(l)
	if err != nil {
		return err
	}
	c.compare(l.File+" ", raw, rec)
	return nil
}

// design does the newest proposal again and compares every rule's answer.
func (c *recomputing) design(f identify.Fit, fits []kept[sheet.FitRecord]) error {
	list, err := newest(c.r, sheet.KindProposal, func(p sheet.ProposalRecord) bool { return len(p.InputFiles) == 1 },
		func(a, b sheet.ProposalRecord) bool {
			return string(a.Settings) == string(b.Settings) && slices.Equal(a.InputFiles, b.InputFiles)
		})
	if err != nil || len(list) == 0 {
		return err
	}
	file := fileOfKind(fits, f.Model.Kind)
	if in := list[0].rec.InputFiles; len(in) != 1 || in[0] != file {
		if len(in) == 1 && fileNumber(in[0]) < fileNumber(fits[0].line.File) {
			return nil // a proposal on an earlier fit; the newest has none yet
		}
		c.differ(list[0].line.File+" input_files", strings.Join(in, ", "), file)
	}
	var set DesignSettings
	if err := json.Unmarshal(list[0].rec.Settings, &set); err != nil {
		return fmt.Errorf("%s: settings: %w", list[0].line.File, err)
	}
	if err := c.settings(list[0].line.File, set); err != nil {
		return err
	}
	d, err := set.Design(f)
	if err != nil {
		c.out.Refused = err.Error()
	} else {
		c.out.Gains, c.out.Margins, c.out.Worst, c.out.NoChange = d.Gains, d.Margins, d.Worst, d.NoChange
	}
	if len(list) != len(d.Proposals) && c.r.Closed() {
		c.differ("proposals", strconv.Itoa(len(list)), strconv.Itoa(len(d.Proposals)))
	}
	if err != nil {
		d.Gains = nil
	}
	for _, k := range list {
		if err := c.proposal(k, d, set, LoopModel(f.Model, set.Window)); err != nil {
			return err
		}
	}
	return c.pushed(list[0].line, d)
}

// pushed holds the words of the newest push of the proposal against those that
// come out again.
func (c *recomputing) pushed(after sheet.Line, d Designed) error {
	l, ok := c.r.Last(sheet.KindPush, namePush)
	if !ok || l.Number < after.Number || d.Set == nil {
		return nil
	}
	var rec sheet.PushRecord
	if err := c.r.JSON(l, &rec); err != nil {
		return err
	}
	raw, err := rawJSON(rec.Words)
	if err == nil {
		c.compare(l.File+" words", raw, d.Set.Words())
	}
	return err
}

func (c *recomputing) proposal(k kept[sheet.ProposalRecord], d Designed, set DesignSettings, loop model.Linear) error {
	i := slices.IndexFunc(d.Proposals, func(p design.Proposal) bool { return p.Rule == k.rec.Rule })
	if i < 0 {
		c.differ(k.line.File, "rule "+k.rec.Rule, "not tried")
		return nil
	}
	rec, err := proposalRecord(d, i, set, loop, k.rec.InputFiles[0])
	if err != nil {
		return err
	}
	return c.entry(k.line, rec)
}

// settings holds what the proposal was told against where it came from: the
// board's identity, what was found, the staircase.
func (c *recomputing) settings(file string, set DesignSettings) error {
	ids := map[string]string{}
	if err := c.r.LastJSON(sheet.KindIdentity, "", &ids); err == nil {
		var lines []string
		for k, v := range ids {
			lines = append(lines, k+" "+v)
		}
		id, err := protocol.ParseIdentity(lines)
		if err != nil {
			return fmt.Errorf("identity: %w", err)
		}
		raw, err := rawJSON(set.Law)
		if err != nil {
			return err
		}
		c.compare(file+" settings (against the board's identity) ", raw, LawOf(id))
	} else if !errors.Is(err, sheet.ErrNoEntry) {
		return err
	}
	if err := c.found(file, set); err != nil {
		return err
	}
	var stairs sheet.StaircaseRecord
	if err := c.r.LastJSON(sheet.KindFit, sheet.NameStaircase, &stairs); err != nil {
		if errors.Is(err, sheet.ErrNoEntry) {
			return nil
		}
		return err
	}
	if levels := levelsOf(stairs); levels != nil {
		s, err := identify.FitStaircase(levels)
		if err != nil {
			return fmt.Errorf("staircase: %w", err)
		}
		low, high := gainSpread(&s)
		raw, err := rawJSON([]float64{set.GainMin, set.GainMax})
		if err != nil {
			return err
		}
		c.compare(file+" settings worst_gain (against the staircase)", raw, []float64{low, high})
	}
	return nil
}

// found holds the words that were judged as found against the as-found entry.
func (c *recomputing) found(file string, set DesignSettings) error {
	l, ok := c.r.First(sheet.KindAsFound)
	if !ok {
		return nil
	}
	var snap sheet.Snapshot
	if err := c.r.JSON(l, &snap); err != nil {
		return err
	}
	var running struct {
		Words map[string]string `json:"words"`
	}
	if err := json.Unmarshal(snap.Running, &running); err != nil {
		return fmt.Errorf("%s: running: %w", l.File, err)
	}
	for i, name := range set.Slots {
		word, _, _ := strings.Cut(running.Words[name], " ")
		c.out.Compared++
		if i >= len(set.Found) || word != set.Found[i] {
			c.differ(fmt.Sprintf("%s settings found_words %s (against %s)", file, name, l.File), strings.Join(set.Found, " "), word)
		}
	}
	return nil
}

func fileOfKind(fits []kept[sheet.FitRecord], kind string) string {
	for _, k := range fits {
		if k.rec.Kind == kind {
			return k.line.File
		}
	}
	return ""
}

// fileNumber is the number at the front of an entry's file name, 0 if there is
// none.
func fileNumber(file string) int {
	head, _, _ := strings.Cut(file, "-")
	n, err := strconv.Atoi(head)
	if err != nil {
		return 0
	}
	return n
}
