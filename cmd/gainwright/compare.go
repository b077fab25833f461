package main

import (
	"errors"
	"fmt"
	"math"

	"github.com/spf13/cobra"

	"gainwright/tune/design"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// compareReport is the fixed JSON form of a comparison of two jobs.
type compareReport struct {
	Old         string             `json:"old"`
	New         string             `json:"new"`
	Rows        []sheet.Row        `json:"rows"`
	Retune      []string           `json:"retune"` // why a retune is due; empty: nothing known speaks for it
	Offers      []string           `json:"offers"`
	OldGains    *design.Margins    `json:"old_gains_on_new_motor"`
	Differences []sheet.Difference `json:"left_to_found"` // the board as the old job left it, and as the new one found it
	Notes       []string           `json:"notes"`

	readers   [2]*sheet.Reader
	oldMargin float64 // deg, of the old gains on the old motor; NaN where not known
}

// compareCommand sets two records, or many, side by side.
func compareCommand() *cobra.Command {
	var asJSON bool
	var folder, rigName, board, html string
	c := &cobra.Command{
		Use: "compare OLD NEW", Short: "set two records side by side: old, new, change, allowed, verdict", Args: cobra.MaximumNArgs(2),
		Long: "compare sets the motor of a later record against that of an earlier one, says whether a retune is due and what\n" +
			"the old gains would do on the new motor, and what changed on the board between the two jobs. Change is new over\n" +
			"old less one. With --html the later verify is drawn over the earlier one. With --folder it compares all records\n" +
			"of a folder in one table: median, spread, drift, outliers.",
		RunE: func(c *cobra.Command, args []string) error {
			if folder != "" {
				if len(args) > 0 {
					return usage(errors.New("--folder compares all records of a folder: name no others"))
				}
				return compareMany(c, folder, sheet.Filter{Rig: rigName, BoardID: board}, html, asJSON)
			}
			if len(args) != 2 {
				return usage(errors.New("compare OLD NEW takes two records, compare --folder DIR all of a folder"))
			}
			rep, err := compareTwo(args[0], args[1])
			if err != nil {
				return err
			}
			if html != "" {
				if html == "-" && asJSON {
					return usage(errors.New("--html - and --json both want standard output"))
				}
				if err := writeNew(c, html, rep.page()); err != nil || html == "-" {
					return err
				}
			}
			if asJSON {
				return printJSON(c.OutOrStdout(), rep)
			}
			rep.print(c)
			return nil
		},
	}
	c.Flags().StringVar(&folder, "folder", "", "compare all records in this folder")
	c.Flags().StringVar(&rigName, "rig", "", "with --folder: only records of this rig")
	c.Flags().StringVar(&board, "board", "", "with --folder: only records of this board")
	c.Flags().StringVar(&html, "html", "", "write table and plots into this new file; - for standard output")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	return c
}

func compareTwo(oldDir, newDir string) (compareReport, error) {
	rep := compareReport{Old: oldDir, New: newDir, Retune: []string{}, Offers: []string{}, Notes: []string{}, Differences: []sheet.Difference{}}
	readers := &rep.readers
	var motors [2]sheet.MotorRecord
	for i, dir := range []string{oldDir, newDir} {
		r, problems, err := openSheet(dir)
		if err != nil {
			return rep, err
		}
		for _, p := range problems {
			rep.Notes = append(rep.Notes, fmt.Sprintf("%s: %s", dir, p))
		}
		if r.Header().Simulated {
			rep.Notes = append(rep.Notes, dir+": SIMULATED RIG, nothing in it was measured on a motor")
		}
		if motors[i], err = r.Motor(); errors.Is(err, sheet.ErrNoEntry) {
			return rep, &exitError{exitRefused, fmt.Errorf("%s: the job did not come as far as a fit of its motor: there is nothing to compare; take a record of a finished job", dir)}
		} else if err != nil {
			return rep, &exitError{exitFailed, fmt.Errorf("%s: %w", dir, err)}
		}
		readers[i] = r
	}
	if a, b := readers[0].Header().Rig, readers[1].Header().Rig; a != b {
		rep.Notes = append(rep.Notes, fmt.Sprintf("these are records of two rigs: %q and %q", a, b))
	}
	rep.oldMargin = math.NaN()
	if pm := motors[0].PhaseMarginDeg; pm != nil {
		rep.oldMargin = *pm
	}
	rep.Rows = sheet.Compare(motors[0], motors[1])
	if m, err := job.OldGains(readers[0], readers[1]); err == nil {
		rep.OldGains = &m
	} else {
		rep.Notes = append(rep.Notes, "the old gains are not judged on the new motor: "+err.Error())
	}
	rep.Retune = append(rep.Retune, job.RetuneReasons(rep.Rows, rep.oldMargin, rep.OldGains)...)
	rep.Offers = append(rep.Offers, job.Offers(rep.Rows, rep.Retune)...)
	if was, err := job.LastDesign(readers[0]); err == nil && was.Gains != nil {
		if now, err := job.LastDesign(readers[1]); err == nil && now.Gains != nil {
			rep.Notes = append(rep.Notes, job.PeriodSets(*was.Gains, now.Gains.SampleTime)...)
		}
	}
	rep.Differences = append(rep.Differences, leftToFound(readers[0], readers[1])...)
	return rep, nil
}

// leftToFound is what happened to the board between two jobs.
func leftToFound(old, new *sheet.Reader) []sheet.Difference {
	var left, found sheet.Snapshot
	if old.LastJSON(sheet.KindAsLeft, "", &left) != nil {
		return nil
	}
	l, ok := new.First(sheet.KindAsFound)
	if !ok || new.JSON(l, &found) != nil {
		return nil
	}
	return sheet.Differences(left, found)
}

// page is the comparison as one HTML page.
func (rep compareReport) page() string {
	var words []string
	for _, w := range rep.Retune {
		words = append(words, "retune is due: "+w)
	}
	words = append(append(words, rep.Offers...), rep.Notes...)
	return sheet.CompareReport(rep.readers[0], rep.readers[1], rep.Rows, words)
}

func (rep compareReport) print(c *cobra.Command) {
	out := c.OutOrStdout()
	fmt.Fprintln(out, shown("old  %s", rep.Old))
	fmt.Fprintln(out, shown("new  %s", rep.New))
	for _, n := range rep.Notes {
		fmt.Fprint(out, sheet.Wrap(n, "  "))
	}
	fmt.Fprintf(out, "\n%s\n", sheet.CompareText(rep.Rows))
	if m := rep.OldGains; m != nil && m.Stable {
		fmt.Fprintf(out, "the old gains on the new motor: phase margin %.0f deg, Ms %.2f, overshoot %s\n", float64(m.PhaseMargin), float64(m.Ms), percent(m.Step.Overshoot))
	} else if m != nil {
		fmt.Fprintln(out, "the old gains on the new motor: NOT STABLE")
	}
	for _, w := range rep.Retune {
		fmt.Fprint(out, sheet.Wrap("retune is due: "+w, ""))
	}
	for _, o := range rep.Offers {
		fmt.Fprint(out, sheet.Wrap(o, ""))
	}
	if len(rep.Differences) > 0 {
		fmt.Fprintln(out, "\nthe board, as the old job left it and as the new one found it:")
	}
	for _, d := range rep.Differences {
		fmt.Fprint(out, sheet.Wrap(fmt.Sprintf("%s: %s, now %s", d.What, d.Old, d.New), "  "))
	}
}

func percent(v design.Value) string {
	if !v.Known() || math.IsInf(float64(v), 0) {
		return "not known"
	}
	return fmt.Sprintf("%.0f %%", float64(v))
}

// compareMany compares all records of a folder.
func compareMany(c *cobra.Command, dir string, f sheet.Filter, html string, asJSON bool) error {
	if html == "-" && asJSON {
		return usage(errors.New("--html - and --json both want standard output"))
	}
	list, err := sheet.List(dir, f)
	if err != nil {
		return usage(err)
	}
	members, leftOut := sheet.Members(list)
	if len(members) == 0 {
		return &exitError{exitRefused, fmt.Errorf("%s holds no record that came as far as a motor's values (%d looked at)", dir, len(list))}
	}
	if html != "" {
		if err := writeNew(c, html, sheet.FleetReport(members, leftOut)); err != nil {
			return err
		}
	}
	rows := sheet.Fleet(members)
	if asJSON {
		return printJSON(c.OutOrStdout(), map[string]any{"folder": dir, "sheets": len(members), "left_out": leftOut, "rows": rows})
	}
	if html == "-" {
		return nil
	}
	fmt.Fprintf(c.OutOrStdout(), "%d records compared, %d left out\n", len(members), leftOut)
	fmt.Fprint(c.OutOrStdout(), sheet.FleetText(rows))
	return nil
}
