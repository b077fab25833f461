package job

// The optional experiments, by the names they keep for good.
const (
	StepTiming     StepID = "timing"
	StepReversal   StepID = "reversal"
	StepResistance StepID = "resistance"
	StepWarmUp     StepID = "warm-up"
	StepCoast      StepID = "coast"
	StepRelay      StepID = "relay"
	StepFrequency  StepID = "frequency"
	StepMap        StepID = "map"
	StepMethods    StepID = "methods"
)

// optional are their procedures.
func (j *Job) optional(id StepID) func() (result, error) {
	return map[StepID]func() (result, error){
		StepSwap: j.doSwap, StepRunUp: j.doRunUp, StepAcceptance: j.doAcceptance, StepCoast: j.doCoast, StepRelay: j.doRelay, StepFrequency: j.doFrequency, StepMap: j.doMap, StepTiming: j.doTiming,
		StepResistance: j.doResistance, StepReversal: j.doReversal, StepWarmUp: j.doWarmUp,
	}[id]
}
