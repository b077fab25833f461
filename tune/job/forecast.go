package job

import (
	"fmt"

	"gainwright/safety"
	"gainwright/tune/sheet"
)

// forecast is what the person sees of a plan before it is armed.
func (j *Job) forecast(p safety.Plan) (PlanView, []sheet.Quantity) {
	mode, unit := modeWords(p)
	v := PlanView{Name: p.Name, Purpose: p.Purpose, Segments: len(p.Segments), Mode: mode, Unit: unit, Drive: profile(p), Size: 1}
	v.Facts = append(v.Facts, Fact{Name: "time", Value: fmt.Sprintf("%.1f s", p.Duration().Seconds())})
	return v, nil
}

func (j *Job) nameplateGain() float64 {
	if ke := j.Rig.Motor.Ke; ke > 0 {
		return 1 / ke
	}
	return float64(j.Env.SpeedMax) / float64(j.Env.VoltsMax)
}
