package job

// ExperimentView is what an optional experiment showed.
type ExperimentView struct {
	Step    StepID
	Title   string
	Verdict string
	Reasons []string
	Finding string
	Facts   []Fact
	Series  []SeriesView
}

// SeriesView is a column of numbers of an experiment; NaN where not known.
type SeriesView struct {
	Name, Unit string
	Values     []float64
}
