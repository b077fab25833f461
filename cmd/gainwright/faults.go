package main

import (
	"fmt"
	"io"

	"github.com/spf13/cobra"

	"gainwright/link/simrig"
	"gainwright/tune/bench"
)

// faultsCommand makes the table of faults: what stopped the motor, how soon, what
// the screen said and what the record holds, on a simulated rig in virtual time.
func faultsCommand() *cobra.Command {
	var simFile, out string
	var asJSON bool
	c := &cobra.Command{
		Use: "faults [--sim BOARD.toml] [--out DIR]", Short: "bring about every fault of the table on a simulated rig", Args: cobra.NoArgs,
		Long: "faults brings about one fault after another on a simulated rig, each in a job of its own in virtual time, and says\n" +
			"what stopped the motor, in what time, what the screen said and what the record holds. Then it takes the limiters\n" +
			"away one at a time. It exits with 1 where a row is not as it should be.",
		RunE: func(c *cobra.Command, _ []string) error {
			cfg, err := demoConfig(simFile)
			if err != nil {
				return usage(err)
			}
			if simFile == "" {
				cfg.Board.Inputs = []string{"estop"} // so that one can open
			}
			return faults(c.OutOrStdout(), cfg, out, asJSON)
		},
	}
	c.Flags().StringVar(&simFile, "sim", "", "simulated board (TOML); without it that of the demo")
	c.Flags().StringVar(&out, "out", "", "keep the records of all rows in this folder")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	return c
}

func faults(w io.Writer, cfg simrig.Config, dir string, asJSON bool) error {
	rows, err := bench.Trials(cfg, dir, func(r bench.TrialRow) {
		if !asJSON {
			writeTrial(w, r)
		}
	})
	if err != nil {
		return usage(err)
	}
	layers, err := bench.LayerTrials(cfg)
	if err != nil {
		return usage(err)
	}
	bad := 0
	for _, r := range rows {
		if r.Bad != "" {
			bad++
		}
	}
	for _, r := range layers {
		if !asJSON {
			writeLayer(w, r)
		}
		if r.Bad != "" {
			bad++
		}
	}
	if asJSON {
		if err := printJSON(w, map[string]any{"faults": rows, "layers": layers, "bad": bad}); err != nil {
			return err
		}
	} else {
		fmt.Fprintf(w, "%d faults, %d rows of limiters taken away, %d not as they should be\n", len(rows), len(layers), bad)
	}
	if bad > 0 {
		return quiet(exitFailed)
	}
	return nil
}

func millis(v *float64, none string) string {
	if v == nil {
		return none
	}
	return fmt.Sprintf("%.0f ms", *v)
}

func writeTrial(w io.Writer, r bench.TrialRow) {
	fmt.Fprintf(w, "%2d  %s (%s)  %s\n", r.Number, r.Fault, r.Where, r.When)
	fmt.Fprintf(w, "    stopped by  %s: %s\n", r.StoppedBy, r.Cause)
	fmt.Fprintf(w, "    time        off after %s, at rest after %s", millis(r.OffMS, "-"), millis(r.RestMS, "-"))
	if r.Worst != "" {
		fmt.Fprintf(w, "; %s", r.Worst)
	}
	fmt.Fprintf(w, "\n    screen      %s\n    record      %s\n", r.Screen, r.Record)
	if r.Bad != "" {
		fmt.Fprintf(w, "    NOT AS IT SHOULD BE: %s\n", r.Bad)
	}
}

func writeLayer(w io.Writer, r bench.LayerRow) {
	word := "inside"
	if !r.Inside {
		word = "LIMIT PASSED"
	}
	fmt.Fprintf(w, "%s, %s\n    %-22s %-12s top %.0f rad/s, %.1f A, off after %s: %s\n", r.Fault, r.When, r.Layers, word, r.TopSpeed, r.TopAmps, millis(r.OffMS, "never"), r.Cause)
	if r.Bad != "" {
		fmt.Fprintf(w, "    NOT AS IT SHOULD BE: %s\n", r.Bad)
	}
}
