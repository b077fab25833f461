package job

import (
	"fmt"
	"math"

	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// ExperimentSettings is what the analysis of an optional experiment was told. With
// the traces it is all that the analysis depends on: both are in the record.
type ExperimentSettings struct {
	Experiment StepID             `json:"experiment"`
	Numbers    map[string]float64 `json:"numbers"` // by name, in SI units
	Model      *model.Linear      `json:"model,omitempty"`
}

// analyses are the pure analyses by their step.
var analyses = map[StepID]func(ExperimentSettings, []*trace.Trace, *sheet.ExperimentRecord) error{
	StepNoise: analyseNoise, StepMethods: analyseMethods, StepMotor: analyseMotor, StepMap: analyseMap, StepCoast: analyseCoast, StepRelay: analyseRelay, StepFrequency: analyseFrequency, StepTiming: analyseTiming,
	StepResistance: analyseResistance, StepReversal: analyseReversal, StepWarmUp: analyseWarmUp,
}

// Analyse computes what an experiment shows from its traces.
func (set ExperimentSettings) Analyse(traces []*trace.Trace) (sheet.ExperimentRecord, error) {
	rec := sheet.ExperimentRecord{Experiment: string(set.Experiment), Verdict: string(identify.Believed)}
	f := analyses[set.Experiment]
	if f == nil {
		return rec, fmt.Errorf("job: no experiment %q", set.Experiment)
	}
	return rec, f(set, traces, &rec)
}

// doubt lowers the verdict of a record and says why.
func doubt(rec *sheet.ExperimentRecord, v identify.Verdict, format string, args ...any) {
	if v == identify.Refused || rec.Verdict == string(identify.Believed) {
		rec.Verdict = string(v)
	}
	rec.Reasons = append(rec.Reasons, fmt.Sprintf(format, args...))
}

// quantity adds a number with half of its 95 % interval; sd 0 or NaN: not known.
func quantity(rec *sheet.ExperimentRecord, name, unit string, v, sd float64, why string) {
	q := sheet.Quantity{Name: name, Value: sheet.Known(v), Unit: unit, Why: why}
	if sd > 0 && !math.IsNaN(sd) {
		q.PlusMinus = sheet.Known(1.96 * sd)
	}
	rec.Params = append(rec.Params, q)
}

// paramOf finds a number of a record by its name.
func paramOf(rec sheet.ExperimentRecord, name string) (v, sd float64, ok bool) {
	for _, q := range rec.Params {
		if q.Name == name && q.Value != nil {
			if q.PlusMinus != nil {
				sd = *q.PlusMinus / 1.96
			}
			return *q.Value, sd, true
		}
	}
	return 0, 0, false
}

// experiment analyses traces that were kept as files, keeps what came out and
// shows it.
func (j *Job) experiment(set ExperimentSettings, traces []*trace.Trace, files []string) (result, error) {
	title := titleOf(set.Experiment)
	rec, err := set.Analyse(traces)
	if err != nil {
		return "", refuse(770, title, err.Error(), "look at the traces in the record; do it again")
	}
	rec.InputFiles = files
	if rec.Settings, err = rawJSON(set); err != nil {
		return "", err
	}
	if err := j.h.Keep(string(sheet.KindExperiment), string(set.Experiment), rec); err != nil {
		return "", err
	}
	if j.Experiments == nil {
		j.Experiments = map[StepID]sheet.ExperimentRecord{}
	}
	j.Experiments[set.Experiment] = rec
	if draw := pictures[set.Experiment]; draw != nil {
		if j.charts == nil {
			j.charts = map[StepID][]ChartView{}
		}
		j.charts[set.Experiment] = draw(set, traces, rec)
	}
	j.showExperiments()
	switch set.Experiment {
	case StepRelay, StepFrequency, StepCoast:
		if err := j.methods(); err != nil {
			return "", err
		}
	}
	words := rec.Finding
	if len(rec.Reasons) > 0 {
		words += "; " + rec.Verdict + ": " + rec.Reasons[0]
	}
	return result(words), nil
}

// experimentOrder is the order in which they are shown.
var experimentOrder = []StepID{StepMotor, StepMethods, StepNoise, StepTiming, StepResistance, StepReversal, StepWarmUp, StepCoast, StepRelay, StepFrequency, StepMap}

// titleOf is a step's title, also of what has no step of its own.
func titleOf(id StepID) string {
	switch id {
	case StepNoise:
		return "Noise"
	case StepMotor:
		return "Motor equations"
	case StepMethods:
		return "Methods"
	}
	return info(id).Title
}

// showExperiments puts all that was found on the screens, in the order of the path.
func (j *Job) showExperiments() {
	var list []ExperimentView
	for _, id := range []StepID{StepBreakaway, StepStaircase} {
		if c := j.charts[id]; c != nil {
			list = append(list, ExperimentView{Step: id, Title: titleOf(id), Finding: j.findings[id], Charts: c})
		}
	}
	for _, id := range experimentOrder {
		rec, ok := j.Experiments[id]
		if !ok {
			continue
		}
		x := ExperimentView{Step: id, Title: titleOf(id), Verdict: rec.Verdict, Reasons: rec.Reasons, Finding: rec.Finding, Charts: j.charts[id]}
		for _, q := range rec.Params {
			x.Facts = append(x.Facts, Fact{Name: q.Name, Value: quantityWords(q), Why: q.Why})
		}
		for _, c := range rec.Columns {
			s := SeriesView{Name: c.Name, Unit: c.Unit}
			for _, v := range c.Values {
				if v == nil {
					s.Values = append(s.Values, math.NaN())
				} else {
					s.Values = append(s.Values, *v)
				}
			}
			x.Series = append(x.Series, s)
		}
		list = append(list, x)
	}
	j.h.Show(func(v *View) { v.Experiments = list })
}

// quantityWords is a quantity as people read it.
func quantityWords(q sheet.Quantity) string {
	if q.Value == nil {
		return "not known"
	}
	s := fmt.Sprintf("%.4g", *q.Value)
	if q.PlusMinus != nil {
		s += fmt.Sprintf(" ± %.2g", *q.PlusMinus)
	}
	if q.Unit != "" && q.Unit != "1" {
		s += " " + q.Unit
	}
	return s
}

// untilRest watches the shaft come to rest with the output off, at most longest
// seconds, and returns the samples.
func (j *Job) untilRest(longest float64) ([]Sample, error) {
	var out []Sample
	still := 0
	for at := 0.0; at < longest && still < 2; at += restPiece {
		s, err := j.h.Watch(seconds(restPiece))
		if err != nil {
			return out, err
		}
		moved := false
		for i := range s {
			out = append(out, Sample{Sample: s[i]})
			moved = moved || s[i].Speed != 0
		}
		still++
		if moved || len(s) == 0 {
			still = 0
		}
	}
	return out, nil
}

// restPiece is how long the shaft is watched at a time, in s.
const restPiece = 0.25

// follow puts samples behind those of a run, as far as they are newer.
func follow(run, rest []Sample) []Sample {
	out := append([]Sample(nil), run...)
	last := uint64(0)
	if len(run) > 0 {
		last = run[len(run)-1].BoardUS
	}
	for _, s := range rest {
		if s.BoardUS > last {
			out = append(out, s)
		}
	}
	return out
}

// hasCurrent reports whether the board measures the current.
func (j *Job) hasCurrent() bool { return j.ID.Scales.CurrentLSB > 0 }
