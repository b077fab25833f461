package main

import (
	"errors"
	"fmt"
	"os"
	"slices"
	"time"

	"github.com/spf13/cobra"

	"gainwright/link/simrig"
	"gainwright/tune/bench"
	"gainwright/tune/job"
)

// dryrunCommand does the whole job unattended on a simulated rig in virtual time.
func dryrunCommand() *cobra.Command {
	var simFile, rigFile, out, jobFile, twin string
	var also []string
	var seed uint64
	var asJSON bool
	c := &cobra.Command{
		Use: "dryrun --sim BOARD.toml|--twin SHEET_DIR --out DIR", Short: "do the whole job unattended on a simulated rig", Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			if (simFile == "") == (twin == "") {
				return usage(errors.New("give one of --sim and --twin"))
			}
			o := bench.DryRun{Seed: seed, Dir: out, Program: "gainwright " + versionWords(), Start: time.Now()}
			var err error
			if twin != "" {
				t, err := readTwin(twin)
				if err != nil {
					return err
				}
				o.Config, o.Rig, o.RigText = t.Config, t.Rig, t.RigText
			} else if o.Config, err = simrig.Load(simFile); err != nil {
				return usage(err)
			}
			if o.Also, err = optionalSteps(also); err != nil {
				return usage(err)
			}
			if o.Order, err = readOrder(jobFile); err != nil {
				return err
			}
			if rigFile != "" {
				if o.Rig, o.RigText, err = readRig(rigFile); err != nil {
					return err
				}
			}
			if !asJSON {
				o.Progress = func(at time.Duration, step job.StepID, words string) {
					fmt.Fprintf(c.OutOrStdout(), "%8.2f s  %-11s %s\n", at.Seconds(), step, words)
				}
			}
			res, err := o.Do()
			if err != nil {
				return usage(err)
			}
			if asJSON {
				err = printJSON(c.OutOrStdout(), res)
			} else {
				fmt.Fprintf(c.OutOrStdout(), "%s: %s\n", res.Outcome, res.Reason)
				fmt.Fprintf(c.OutOrStdout(), "record: %s\n", res.Sheet)
			}
			if err != nil {
				return err
			}
			return quiet(exitOf(res.Outcome))
		},
	}
	f := c.Flags()
	f.StringVar(&simFile, "sim", "", "simulated board (TOML)")
	f.StringVar(&twin, "twin", "", "record: do the job on a simulated rig made of its model, its friction and its board")
	f.StringVar(&rigFile, "rig", "", "rig file; without it the nameplate of the simulated board is the envelope")
	f.StringVar(&out, "out", "", "folder for the record; it must not exist or be empty")
	f.StringVar(&jobFile, "job", "", "job file: which steps in which order; without it the whole path")
	f.StringSliceVar(&also, "also", nil, "optional steps to be done as well, by their ids; all does every one")
	f.Uint64Var(&seed, "seed", 1, "start of all random numbers")
	f.BoolVar(&asJSON, "json", false, "print one JSON object")
	must(c.MarkFlagRequired("out"))
	return c
}

// optionalSteps finds optional steps by their ids.
func optionalSteps(ids []string) ([]job.StepID, error) {
	var known, out []job.StepID
	for _, p := range job.Path {
		if p.Optional {
			known = append(known, p.ID)
		}
	}
	for _, id := range ids {
		switch {
		case id == "all":
			out = append(out, known...)
		case slices.Contains(known, job.StepID(id)):
			out = append(out, job.StepID(id))
		default:
			return nil, fmt.Errorf("--also %s: no such optional step; there are %v", id, known)
		}
	}
	return out, nil
}

// exitOf is the exit code of an outcome.
func exitOf(o bench.Outcome) int {
	switch o {
	case bench.Accepted, bench.NoAdjustment:
		return exitDone
	case bench.Tripped:
		return exitTripped
	case bench.Refused:
		return exitRefused
	}
	return exitFailed
}

// simCommand serves a simulated board in real time.
func simCommand() *cobra.Command {
	var link string
	var seed uint64
	c := &cobra.Command{
		Use: "sim BOARD.toml", Short: "serve a simulated board on a pseudo-terminal", Args: cobra.ExactArgs(1),
		Long: "sim serves a simulated board in real time on a pseudo-terminal and prints its path on the first line.\n" +
			"Typed on its standard input: turn (the shaft, by hand, one turn), power (off and on), state, quit.",
		RunE: func(c *cobra.Command, args []string) error {
			cfg, err := simrig.Load(args[0])
			if err != nil {
				return usage(err)
			}
			sim, err := bench.ServePTY(simrig.New(cfg, seed))
			if err != nil {
				return err
			}
			defer sim.Close()
			if link != "" {
				if err := os.Symlink(sim.Path, link); err != nil {
					return usage(err)
				}
				defer os.Remove(link)
			}
			fmt.Fprintln(c.OutOrStdout(), sim.Path)
			return serveUntil(sim, c.InOrStdin(), c.OutOrStdout())
		},
	}
	c.Flags().StringVar(&link, "pty-link", "", "make a symbolic link of this name to the pseudo-terminal")
	c.Flags().Uint64Var(&seed, "seed", 1, "start of all random numbers")
	return c
}
