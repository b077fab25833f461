package job

import (
	"fmt"

	"gainwright/tune/design"
)

// PeriodSets show one set of gains at the loop period that it was made for and at
// another, in s: in SI they are the same numbers, per sample they are not. Nothing
// is said where the periods agree.
func PeriodSets(g design.Gains, now float64) []string {
	was := g.SampleTime
	if was <= 0 || now <= 0 || was == now {
		return nil
	}
	p := g.Parallel()
	line := func(word string, h float64) string {
		return fmt.Sprintf("  %-5s kp %s V/(rad/s), ki·T %s V/(rad/s), kd/T %s V/(rad/s)", word, number(p.Kp), number(p.Ki*h), number(p.Kd/h))
	}
	return []string{fmt.Sprintf("loop period %.4g ms then, %.4g ms now: kp %s, ki %s V/rad, kd %s V·s²/rad stay in SI; per sample", 1000*was, 1000*now, number(p.Kp), number(p.Ki), number(p.Kd)),
		line("then", was), line("now", now), "the margins do not stay: the hold is another; judge them, and propose anew where they are lost"}
}

// smallestError says which error still moves the integral of a board in binary32
// near full drive; what integer boards add with is their own.
func (j *Job) smallestError(g design.Gains) string {
	if j.ID.Number == "int" {
		return ""
	}
	b, err := design.ToBoard(g, design.Board{SpeedUnit: 1, DriveUnit: 1, DriveMax: float64(j.Env.VoltsMax)})
	if err != nil || !b.SmallestError.Known() {
		return ""
	}
	return fmt.Sprintf("; the smallest error that still moves the integral near full drive is %.2g rad/s, one step of the speed is %.2g", float64(b.SmallestError), j.sizing().SpeedStep)
}
