package main

import (
	"errors"
	"fmt"
	"io"
	"os"

	"github.com/spf13/cobra"

	"gainwright/tune/job"
	"gainwright/tune/sheet"
	"gainwright/tune/sheet/plain"
)

// openSheet opens a folder that has to be a sheet.
func openSheet(dir string) (*sheet.Reader, []sheet.Problem, error) {
	info, err := os.Stat(dir)
	if err != nil {
		return nil, nil, usage(err)
	}
	if !info.IsDir() {
		return nil, nil, usage(fmt.Errorf("%s is a file: name the folder of the record", dir))
	}
	r, problems := sheet.Open(dir)
	if len(r.Lines()) == 0 {
		return nil, nil, usage(fmt.Errorf("%s is no record: there is no index.txt with entries in it", dir))
	}
	return r, problems, nil
}

// recomputeReport is the fixed JSON form, with identical null where nothing
// could be computed.
type recomputeReport struct {
	Identical *bool `json:"identical"`
	job.Recomputed
	Program string `json:"computed_by"`
	Chain   string `json:"chain"` // "agrees", or the first problem
	Error   string `json:"error,omitempty"`
}

// recomputeCommand does the analysis of a record again.
func recomputeCommand() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use: "recompute SHEET_DIR", Short: "compute model and gains again from a record's own data", Args: cobra.ExactArgs(1),
		Long: "recompute does the newest fit and proposal of a record again, from its traces and settings alone, and compares\n" +
			"model, margins, worst case and gains bit for bit with what was recorded. It exits with 1 where they differ, and\n" +
			"says what differs and by how much; with 4 where the job did not come as far as a fit.",
		RunE: func(c *cobra.Command, args []string) error {
			r, _, err := openSheet(args[0])
			if err != nil {
				return err
			}
			rep := recomputeReport{Program: "gainwright " + versionWords(), Chain: "agrees"}
			if problems, _ := sheet.Check(args[0]); len(problems) > 0 {
				rep.Chain = problems[0].String()
			}
			rep.Recomputed, err = job.Recompute(r)
			code := exitDone
			switch {
			case errors.Is(err, job.ErrNothingToRecompute):
				rep.Error, code = err.Error(), exitRefused
			case err != nil:
				no := false
				rep.Identical, rep.Error, code = &no, err.Error(), exitFailed
			default:
				rep.Identical = &rep.Recomputed.Identical
				if !rep.Recomputed.Identical {
					code = exitFailed
				}
			}
			if asJSON {
				if err := printJSON(c.OutOrStdout(), rep); err != nil {
					return err
				}
			} else {
				rep.print(c.OutOrStdout())
			}
			return quiet(code)
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	return c
}

// differencesShown bounds the list for people; the JSON has them all.
const differencesShown = 20

func (r recomputeReport) print(out io.Writer) {
	line := func(format string, args ...any) { fmt.Fprintln(out, plain.Visible(fmt.Sprintf(format, args...), 0)) }
	line("recorded by  %s", r.Recorded)
	line("computed by  %s", r.Program)
	line("chain        %s", r.Chain)
	for _, f := range r.Inputs {
		line("from         %s", f)
	}
	if r.Error != "" {
		if r.Identical == nil {
			line("NOTHING TO COMPUTE: %s", r.Error)
		} else {
			line("NOT IDENTICAL: %s", r.Error)
		}
		return
	}
	if r.Model != nil {
		line("model        %s", r.ModelWords())
	} else {
		line("model        none: every model is refused")
	}
	switch {
	case r.Gains != nil:
		g := r.Gains.Parallel()
		note := ""
		if r.NoChange {
			note = " (as found: no adjustment)"
		}
		line("gains        Kp %.9g V/(rad/s), Ki %.9g V/rad, Kd %.9g V·s²/rad%s", g.Kp, g.Ki, g.Kd, note)
	case r.Refused != "":
		line("gains        none: %s", r.Refused)
	default:
		line("gains        none: nothing was proposed")
	}
	if *r.Identical {
		line("IDENTICAL: %d numbers and words came out as recorded, bit for bit", r.Compared)
		return
	}
	line("NOT IDENTICAL: %d of %d came out otherwise", len(r.Differences), r.Compared)
	for i, d := range r.Differences {
		if i == differencesShown {
			line("  and %d more; --json lists them", len(r.Differences)-i)
			break
		}
		line("  %s", d)
	}
}
