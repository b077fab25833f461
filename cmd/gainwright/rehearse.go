package main

import (
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"gainwright/link/simrig/family"
	"gainwright/tune/bench"
)

// rehearseCommand does the whole job on every simulated rig of a folder.
func rehearseCommand() *cobra.Command {
	var jobs, generate int
	var seed uint64
	var asJSON, rules bool
	var out string
	c := &cobra.Command{
		Use: "rehearse DIR", Short: "do the whole job on every simulated rig of a folder", Args: cobra.MaximumNArgs(1),
		Long: "rehearse does the whole job, unattended and in virtual time, on every simulated rig (*.toml, not *.rig.toml) of a folder\n" +
			"and prints a table: outcome, errors of the model against the rig's own physics, margins on the true plant, and why.\n" +
			"The same seed gives the same results on any number of cores. It exits 0 when all ran, whatever came of them.\n\n" +
			"rehearse --generate N --seed S --out DIR draws a family of N simulated rigs, a fifth of them faulty, into a folder.\n" +
			"--rules also judges SIMC and the Ziegler-Nichols step rule, read off by hand, on the same rigs.",
		RunE: func(c *cobra.Command, args []string) error {
			if generate > 0 {
				if len(args) > 0 || out == "" {
					return usage(fmt.Errorf("--generate needs --out DIR and no other folder"))
				}
				return generateFamily(generate, seed, out)
			}
			if len(args) != 1 {
				return usage(fmt.Errorf("which folder? give DIR, or --generate N --out DIR"))
			}
			o := bench.Rehearsal{Dir: args[0], Jobs: jobs, Seed: seed, Rules: rules, Program: "gainwright " + versionWords(),
				Progress: func(done, of int, r bench.RigReport) {
					fmt.Fprintf(c.ErrOrStderr(), "%d/%d %s: %s\n", done, of, r.File, r.Outcome)
				}}
			f, err := o.Do()
			if err != nil {
				return usage(err)
			}
			if asJSON {
				return printJSON(c.OutOrStdout(), f)
			}
			return fleetTable(c.OutOrStdout(), f, rules)
		},
	}
	f := c.Flags()
	f.IntVar(&jobs, "jobs", runtime.NumCPU(), "jobs at the same time")
	f.Uint64Var(&seed, "seed", 1, "start of all random numbers")
	f.BoolVar(&asJSON, "json", false, "print one JSON object")
	f.BoolVar(&rules, "rules", false, "judge other rules on the same rigs as well")
	f.IntVar(&generate, "generate", 0, "draw a family of so many rigs and end")
	f.StringVar(&out, "out", "", "folder for --generate; it must not exist or be empty")
	return c
}

// generateFamily writes a drawn family into a folder.
func generateFamily(n int, seed uint64, dir string) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return usage(err)
	}
	if e, err := os.ReadDir(dir); err != nil || len(e) > 0 {
		return usage(fmt.Errorf("%s is not empty: give another folder", dir))
	}
	for _, r := range family.Make(n, seed) {
		if err := os.WriteFile(filepath.Join(dir, r.Name+".toml"), r.Text, 0o644); err != nil {
			return usage(err)
		}
	}
	return nil
}

// fleetTable prints a row a rig, then the sums.
func fleetTable(w io.Writer, f bench.Fleet, rules bool) error {
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(t, "rig\toutcome\tK %\ttau %\tdead, loops\tbreak %\tMs\tload IAE\tmotor s\tviol\t")
	for _, r := range f.Rigs {
		k, tau, dead, brk := "-", "-", "-", "-"
		if e := r.Truth.Errors; e != nil {
			k, dead, tau, brk = fmt.Sprintf("%+.1f", e.Gain), fmt.Sprintf("%+.2f", e.DeadLoops), cell(e.Tau, "%+.1f"), cell(e.Break, "%+.1f")
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\t%.0f\t%d\t\n", r.Name(), r.Outcome, k, tau, dead, brk, cell(r.Truth.Ms, "%.2f"), cell(r.Truth.LoadIAERatio, "%.2f"), r.Motor, r.Violations)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for _, r := range f.Rigs {
		if !r.AsExpected {
			fmt.Fprintf(w, "NOT AS EXPECTED %s (%s %s): %s, %s\n", r.Name(), r.Expect, r.ExpectCause, r.Outcome, r.Reason)
		}
	}
	if rules {
		ruleTable(w, f)
	}
	_, err := fmt.Fprintf(w, "%d rigs: %d accepted, %d no adjustment, %d refused, %d tripped, %d failed; %d not as expected; %d violations; %.0f simulated seconds in %.1f s\n",
		len(f.Rigs), f.Accepted, f.NoAdjustment, f.Refused, f.Tripped, f.Failed, f.Unexpected, f.Violations, f.Simulated, f.WallSeconds)
	return err
}

func cell(v *float64, format string) string {
	if v == nil {
		return "-"
	}
	return fmt.Sprintf(format, *v)
}

// ruleTable compares the rules over the fleet, on the rigs where ours has gains.
func ruleTable(w io.Writer, f bench.Fleet) {
	type tally struct {
		ms, iae                   []float64
		n, refused, unstable, off int
	}
	by := map[string]*tally{}
	add := func(rule string, refused, stable bool, ms, iae *float64) {
		t := by[rule]
		if t == nil {
			t = &tally{}
			by[rule] = t
		}
		t.n++
		switch {
		case refused:
			t.refused++
		case !stable:
			t.unstable++
		case ms != nil:
			if t.ms = append(t.ms, *ms); *ms > 1.15*1.6 {
				t.off++
			}
			if iae != nil {
				t.iae = append(t.iae, *iae)
			}
		}
	}
	for _, r := range f.Rigs {
		if len(r.Truth.Rules) == 0 || r.Truth.Ms == nil {
			continue
		}
		add("ours (largest-ki)", false, !math.IsInf(*r.Truth.Ms, 0), r.Truth.Ms, r.Truth.LoadIAERatio)
		for _, x := range r.Truth.Rules {
			add(x.Rule, x.Refused != "", x.Stable, x.Ms, x.LoadIAERatio)
		}
	}
	names := make([]string, 0, len(by))
	for n := range by {
		names = append(names, n)
	}
	slices.Sort(names)
	t := tabwriter.NewWriter(w, 0, 8, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(t, "rule\trigs\trefused\tnot stable\tMs over 1.84\tMs median\tMs worst\tload IAE median\tload IAE worst\t")
	for _, n := range names {
		x := by[n]
		fmt.Fprintf(t, "%s\t%d\t%d\t%d\t%d\t%s\t%s\t%s\t%s\t\n", n, x.n, x.refused, x.unstable, x.off, quantileWords(x.ms, 0.5), quantileWords(x.ms, 1), quantileWords(x.iae, 0.5), quantileWords(x.iae, 1))
	}
	_ = t.Flush()
}

func quantileWords(v []float64, q float64) string {
	if len(v) == 0 {
		return "-"
	}
	v = slices.Sorted(slices.Values(v))
	return fmt.Sprintf("%.2f", v[int(q*float64(len(v)-1)+0.5)])
}
