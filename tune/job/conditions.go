package job

import (
	"fmt"
	"strconv"
	"strings"

	"gainwright/tune/sheet"
)

// What an ambient temperature may be, in degC: a typing mistake is outside.
const ambientMin, ambientMax = -40, 85

// askConditions asks for the ambient temperature and the load state, once a job;
// every run and the as-left carry both.
func (j *Job) askConditions() error {
	if j.conditions || !j.opt.Attended {
		return nil
	}
	q := Question{Kind: AskNumber, Text: "Ambient temperature at the motor", Unit: "degC", Blank: true, Detail: []string{"enter alone: not known"}}
	for j.Ambient == nil {
		a, err := j.h.Ask(q)
		if err != nil {
			return err
		}
		s := strings.ReplaceAll(strings.TrimSpace(a.Text), ",", ".")
		if s == "" {
			break
		}
		if v, err := strconv.ParseFloat(s, 64); err == nil && v >= ambientMin && v <= ambientMax {
			j.Ambient = sheet.Known(v)
			break
		}
		q.Detail = []string{fmt.Sprintf("%q is not a temperature from %d to %d degC; enter alone: not known", s, ambientMin, ambientMax)}
	}
	a, err := j.h.Ask(Question{Kind: AskText, Text: "Load state of the shaft now", Default: j.Rig.Load.State,
		Detail: []string{"bare, disc, coupled, or as it is called here; enter alone takes what stands there"}})
	if err != nil {
		return err
	}
	said := "as the rig file has it"
	if s := strings.TrimSpace(a.Text); s != "" && s != j.Rig.Load.State {
		said = fmt.Sprintf("the rig file says %q", j.Rig.Load.State)
		j.Rig.Load.State = s
	}
	j.conditions = true
	ambient := "ambient not known"
	if j.Ambient != nil {
		ambient = fmt.Sprintf("ambient %.3g degC", *j.Ambient)
	}
	return j.h.Keep("event", sheet.NameConditions, sheet.EventRecord{What: "ambient and load state, as the operator says",
		Detail: fmt.Sprintf("%s; load state %s (%s)", ambient, orUnknown(j.Rig.Load.State), said)})
}
