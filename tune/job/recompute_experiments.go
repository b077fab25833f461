package job

import (
	"encoding/json"
	"fmt"

	"gainwright/tune/sheet"
	"gainwright/tune/trace"
)

// experiments does the analysis of every optional experiment again from its own
// traces and settings.
func (c *recomputing) experiments() error {
	for _, l := range c.r.Find(sheet.KindExperiment, "") {
		var rec sheet.ExperimentRecord
		if err := c.r.JSON(l, &rec); err != nil {
			return err
		}
		var set ExperimentSettings
		if err := json.Unmarshal(rec.Settings, &set); err != nil {
			return fmt.Errorf("%s: settings: %w", l.File, err)
		}
		var traces []*trace.Trace
		for _, f := range rec.InputFiles {
			tr, err := c.trace(f)
			if err != nil {
				return err
			}
			traces = append(traces, tr)
		}
		again, err := set.Analyse(traces)
		if err != nil {
			c.differ(l.File, rec.Finding, "nothing: "+err.Error())
			continue
		}
		again.InputFiles, again.Settings = rec.InputFiles, rec.Settings
		if err := c.entry(l, again); err != nil {
			return err
		}
	}
	return nil
}
