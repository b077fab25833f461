package job

// ExperimentView is what an experiment showed. Breakaway and staircase have no facts
// here: theirs are on the page of the model.
type ExperimentView struct {
	Step    StepID
	Title   string
	Verdict string
	Reasons []string
	Finding string
	Facts   []Fact
	Series  []SeriesView
	Charts  []ChartView
}

// SeriesView is a column of numbers of an experiment; NaN where not known.
type SeriesView struct {
	Name, Unit string
	Values     []float64
}
