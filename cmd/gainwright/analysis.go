package main

import (
	"errors"
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"gainwright/tune/design"
	"gainwright/tune/identify"
	"gainwright/tune/model"
	"gainwright/tune/trace"
)

// fitCommand fits models to a trace in a file.
func fitCommand() *cobra.Command {
	var kind, hold string
	var holdout, window float64
	var asJSON bool
	c := &cobra.Command{
		Use: "fit TRACE.csv", Short: "fit models to a recorded trace and judge them", Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			tr, err := trace.ReadFile(args[0])
			if err != nil {
				return usage(err)
			}
			if tr.Hold, err = trace.ParseHold(orDefault(c, "hold", hold, tr.Hold.String())); err != nil {
				return usage(err)
			}
			if c.Flags().Changed("window") {
				tr.Window = window
			}
			res, err := identify.Run(tr, identify.Options{Kind: kind, Holdout: holdout})
			if err != nil {
				if errors.Is(err, identify.ErrData) {
					return &exitError{exitRefused, err}
				}
				return usage(err)
			}
			if asJSON {
				err = printJSON(c.OutOrStdout(), res)
			} else {
				printFit(c, res)
			}
			if err != nil {
				return err
			}
			if res.Chosen == nil {
				return quiet(exitRefused)
			}
			return nil
		},
	}
	c.Flags().StringVar(&kind, "kind", "auto", "first-order, second-order, integrating, motor or auto")
	c.Flags().StringVar(&hold, "hold", "since", "voltage of a row was applied since the row before, or from it on: since or from")
	c.Flags().Float64Var(&holdout, "holdout", 0.5, "share at the end of the record that is kept for judging, 0 to 0.9")
	c.Flags().Float64Var(&window, "window", 0, "speed is the mean over so many seconds before its time; 0: at its time")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	return c
}

// orDefault is the flag's value if it was given, else what the file says.
func orDefault(c *cobra.Command, name, value, file string) string {
	if c.Flags().Changed(name) {
		return value
	}
	return file
}

func printFit(c *cobra.Command, res identify.Result) {
	out := c.OutOrStdout()
	for i := range res.Models {
		f := &res.Models[i]
		mark := " "
		if f == res.Best() {
			mark = "*"
		}
		fmt.Fprintf(out, "%s %-13s %-8s NRMSE %.4f, on data not seen %.4f, AICc %.1f, %d samples\n", mark, f.Model.Kind, f.Verdict, f.NRMSE, f.HoldoutNRMSE, f.AICc, f.Used)
		for _, p := range f.Params {
			fmt.Fprintf(out, "    %-18s %12.6g ± %-10.3g %s\n", p.Name, p.Value, 1.96*p.SD, p.Unit)
		}
		for _, r := range f.Reasons {
			fmt.Fprintf(out, "    - %s\n", r)
		}
		if f.Helps != "" {
			fmt.Fprintf(out, "    would help: %s\n", f.Helps)
		}
	}
	for reason, n := range res.Masked {
		fmt.Fprintf(out, "  left out: %d samples, %s\n", n, reason)
	}
	if res.Chosen == nil {
		fmt.Fprintln(out, "every model is refused")
	}
}

// marginsCommand judges one loop.
func marginsCommand() *cobra.Command {
	var modelFile, gainsFile string
	var asJSON bool
	c := &cobra.Command{
		Use: "margins --model M.json --gains G.json", Short: "exact margins and responses of a loop", Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			var m model.Linear
			var g design.Gains
			if err := readJSON(modelFile, &m); err != nil {
				return err
			}
			if err := readJSON(gainsFile, &g); err != nil {
				return err
			}
			res, err := design.Judge(m, g)
			if err != nil {
				return usage(err)
			}
			if asJSON {
				err = printJSON(c.OutOrStdout(), res)
			} else {
				printMargins(c, res)
			}
			if err == nil && !res.Stable {
				return quiet(exitRefused)
			}
			return err
		},
	}
	c.Flags().StringVar(&modelFile, "model", "", "model file (JSON)")
	c.Flags().StringVar(&gainsFile, "gains", "", "gains file (JSON)")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	must(c.MarkFlagRequired("model"))
	must(c.MarkFlagRequired("gains"))
	return c
}

func printMargins(c *cobra.Command, m design.Margins) {
	out := c.OutOrStdout()
	if !m.Stable {
		fmt.Fprintln(out, "not stable: these gains on this model run away or swing up")
		return
	}
	row := func(name string, v design.Value, format string) {
		text := "none"
		if v.Known() {
			text = fmt.Sprintf(format, float64(v))
		}
		fmt.Fprintf(out, "%-22s %s\n", name, text)
	}
	row("gain margin", m.GainMarginDB, "%.2f dB")
	row("phase margin", m.PhaseMargin, "%.2f deg")
	row("delay margin", m.DelayMargin, "%.4g s")
	row("gain crossover", m.Crossover, "%.4g rad/s")
	row("Ms", m.Ms, "%.4f")
	row("Mt", m.Mt, "%.4f")
	row("step: rise 10-90 %", m.Step.RiseTime, "%.4g s")
	row("step: overshoot", m.Step.Overshoot, "%.2f %%")
	row("step: settling 2 %", m.Step.SettlingTime, "%.4g s")
	row("step: IAE", m.Step.IAE, "%.4g")
	row("load step: IAE", m.LoadStep.IAE, "%.4g")
	row("load step: peak", m.LoadStep.Peak, "%.4g rad/s per V")
}

// designCommand proposes gains for a model.
func designCommand() *cobra.Command {
	var modelFile string
	var o design.Options
	var asJSON bool
	c := &cobra.Command{
		Use: "design --model M.json", Short: "propose gains for a model", Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			var m model.Linear
			if err := readJSON(modelFile, &m); err != nil {
				return err
			}
			proposals, chosen, err := design.Propose(m, o)
			if err != nil {
				return usage(err)
			}
			var pick *int
			if chosen >= 0 {
				pick = &chosen
			}
			if asJSON {
				err = printJSON(c.OutOrStdout(), map[string]any{"proposals": proposals, "chosen": pick})
			} else {
				printProposals(c, proposals, chosen)
			}
			if err == nil && pick == nil && o.Rule != "all" {
				return quiet(exitRefused)
			}
			return err
		},
	}
	f := c.Flags()
	f.StringVar(&modelFile, "model", "", "model file (JSON)")
	f.StringVar(&o.Rule, "rule", "", "a rule by name, or all; without it our own beside a few")
	f.Float64Var(&o.MsMax, "ms-max", design.DefaultMsMax, "bound on Ms, 1.1 to 3")
	f.Float64Var(&o.SampleTime, "sample-time", 0, "loop period in s; 0: continuous")
	f.Float64Var(&o.ComputeDelay, "compute-delay", 0, "from latched speed to drive, in s")
	f.StringVar(&o.Law, "law", "pi", "pi or pid")
	f.Float64Var(&o.Noise, "noise", 0, "bound on the noise gain, V of drive per rad/s of speed noise; 0: none")
	f.Float64Var(&o.UMax, "u-max", 0, "drive in V that a setpoint step must not exceed; 0: no bound")
	f.BoolVar(&asJSON, "json", false, "print one JSON object")
	must(c.MarkFlagRequired("model"))
	return c
}

func printProposals(c *cobra.Command, proposals []design.Proposal, chosen int) {
	out := c.OutOrStdout()
	fmt.Fprintf(out, "  %-22s %10s %10s %6s %8s %8s %9s %9s\n", "rule", "kp", "ki", "Ms", "PM deg", "GM dB", "over %", "settle s")
	for i, p := range proposals {
		mark := " "
		if i == chosen {
			mark = "*"
		}
		if p.Refused != "" {
			fmt.Fprintf(out, "%s %-22s refused: %s\n", mark, p.Rule, p.Refused)
			continue
		}
		g, m := p.Gains.Parallel(), p.Margins
		fmt.Fprintf(out, "%s %-22s %10.4g %10.4g %6.3f %8.1f %8.1f %9.1f %9.3g\n", mark, p.Rule, g.Kp, g.Ki, m.Ms, m.PhaseMargin, m.GainMarginDB, m.Step.Overshoot, m.Step.SettlingTime)
		for _, n := range p.Notes {
			fmt.Fprintf(out, "      %s\n", n)
		}
	}
}

func must(err error) {
	if err != nil {
		fmt.Fprintln(os.Stderr, err)
		panic("gainwright: " + err.Error())
	}
}
