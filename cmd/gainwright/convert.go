package main

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"github.com/spf13/cobra"

	"gainwright/safety/rig"
	"gainwright/tune/design"
)

// convertFlags say how a board holds its gains, where that is not plain.
type convertFlags struct {
	gains, to, rig            string
	speedUnit, driveUnit      string
	window, dacStep           float64
	integer, perSample, whole bool
	shift, bits, accumulator  int
	asJSON                    bool
}

// convertCommand turns gains into another form or into a board's numbers.
func convertCommand() *cobra.Command {
	var f convertFlags
	c := &cobra.Command{
		Use: "convert --gains G.json --to FORM", Short: "turn gains into another form, or into a board's units and numbers", Args: cobra.NoArgs,
		Long: "convert turns gains into the parallel, ideal or series form, or into what a board holds (--to board, which needs\n" +
			"the rig file for its scales). Without more flags a board holds binary32 in rad/s and V. What it prints for a form\n" +
			"can be read again by margins and convert.",
		RunE: func(c *cobra.Command, _ []string) error { return f.run(c) },
	}
	s := c.Flags()
	s.StringVar(&f.gains, "gains", "", "gains file (JSON)")
	s.StringVar(&f.to, "to", "", "parallel, ideal, series or board")
	s.StringVar(&f.rig, "rig", "", "rig file, for board: counts, gear, bus and limits")
	s.StringVar(&f.speedUnit, "speed-unit", "rad/s", "unit of the board's speed: rad/s, rpm or counts (in --window)")
	s.StringVar(&f.driveUnit, "drive-unit", "V", "unit of the board's drive: V, duty (0 to 1 of the bus) or dac (of --dac-step)")
	s.Float64Var(&f.window, "window", 0, "speed window in s, for --speed-unit counts")
	s.Float64Var(&f.dacStep, "dac-step", 0, "drive volts of one step of the DAC")
	s.BoolVar(&f.integer, "integer", false, "the board holds integers")
	s.IntVar(&f.shift, "shift", 16, "bits behind the point of an integer gain, 0 to 62")
	s.IntVar(&f.bits, "bits", 32, "width of an integer gain with its sign, 2 to 64")
	s.IntVar(&f.accumulator, "accumulator-bits", 32, "width of the integral with its sign, 2 to 64")
	s.BoolVar(&f.whole, "whole-product", false, "the board adds gain times error to the integral before it shifts")
	s.BoolVar(&f.perSample, "per-sample", false, "the board holds ki times and kd over the sample time")
	s.BoolVar(&f.asJSON, "json", false, "print one JSON object")
	must(c.MarkFlagRequired("gains"))
	must(c.MarkFlagRequired("to"))
	return c
}

func (f convertFlags) run(c *cobra.Command) error {
	if !slices.Contains([]string{design.FormParallel, design.FormIdeal, design.FormSeries, "board"}, f.to) {
		return usage(fmt.Errorf("--to %q: it is parallel, ideal, series or board", f.to))
	}
	var g design.Gains
	if err := readJSON(f.gains, &g); err != nil {
		return err
	}
	var r rig.Rig
	if f.rig != "" {
		var err error
		if r, _, err = readRig(f.rig); err != nil {
			return err
		}
	}
	if f.to == "board" {
		if f.rig == "" {
			return usage(errors.New("--to board needs --rig RIG.toml: the scales come from it"))
		}
		return f.board(c, g, r)
	}
	to, err := g.To(f.to)
	if err != nil {
		return refusedConversion(err)
	}
	if f.asJSON {
		return printJSON(c.OutOrStdout(), to)
	}
	printGains(c, to)
	return nil
}

// refusedConversion is exit 4: the gains are well-formed, but that form or board
// cannot hold them.
func refusedConversion(err error) error { return &exitError{exitRefused, err} }

func printGains(c *cobra.Command, g design.Gains) {
	row := func(name string, v float64, unit string) {
		text := fmt.Sprintf("%.9g", v)
		if math.IsInf(v, 1) {
			text = "none (no integral)"
			unit = ""
		}
		fmt.Fprintf(c.OutOrStdout(), "%-18s %s %s\n", name, text, unit)
	}
	fmt.Fprintf(c.OutOrStdout(), "%-18s %s\n", "form", g.Form)
	switch g.Form {
	case design.FormSeries:
		row("kc", g.Kc, "V/(rad/s)")
	default:
		row("kp", g.Kp, "V/(rad/s)")
	}
	if g.Form == design.FormParallel {
		row("ki", g.Ki, "V/rad")
		row("kd", g.Kd, "V·s²/rad")
	} else {
		row("ti", g.Ti, "s")
		row("td", g.Td, "s")
	}
	row("derivative filter", g.DerivativeFilter, "s")
	row("setpoint weight", g.SetpointWeight, "")
	row("sample time", g.SampleTime, "s")
}

// units finds the sizes of the board's units in rad/s and V.
func (f convertFlags) units(r rig.Rig) (speed, drive float64, err error) {
	switch f.speedUnit {
	case "rad/s":
		speed = 1
	case "rpm":
		speed = design.RPMUnit
	case "counts":
		if !(f.window > 0) {
			return 0, 0, usage(errors.New("--speed-unit counts needs --window: the seconds over which the board counts"))
		}
		speed = design.CountUnit(2*math.Pi/r.CountsPerMotorTurn(), f.window)
	default:
		return 0, 0, usage(fmt.Errorf("--speed-unit %q: it is rad/s, rpm or counts", f.speedUnit))
	}
	switch f.driveUnit {
	case "V":
		drive = 1
	case "duty":
		drive = r.Drive.BusNominal
	case "dac":
		if !(f.dacStep > 0) {
			return 0, 0, usage(errors.New("--drive-unit dac needs --dac-step: the drive volts of one step"))
		}
		drive = f.dacStep
	default:
		return 0, 0, usage(fmt.Errorf("--drive-unit %q: it is V, duty or dac", f.driveUnit))
	}
	return speed, drive, nil
}

// boardReport is a board's numbers with the units they are in.
type boardReport struct {
	design.BoardGains
	SpeedUnit    string  `json:"speed_unit"`
	SpeedUnitSI  float64 `json:"speed_unit_rad_s"`
	DriveUnit    string  `json:"drive_unit"`
	DriveUnitSI  float64 `json:"drive_unit_V"`
	PerSample    bool    `json:"per_sample"`
	CountsPerRev float64 `json:"counts_per_motor_turn"`
}

func (f convertFlags) board(c *cobra.Command, g design.Gains, r rig.Rig) error {
	speed, drive, err := f.units(r)
	if err != nil {
		return err
	}
	if f.bits < 2 || f.bits > 64 || f.accumulator < 2 || f.accumulator > 64 {
		return usage(errors.New("--bits and --accumulator-bits are 2 to 64"))
	}
	e := r.Envelope()
	b := design.Board{SpeedUnit: speed, DriveUnit: drive, PerSample: f.perSample, Integer: f.integer, Bits: f.bits, AccumulatorBits: f.accumulator,
		WholeProduct: f.whole, SpeedMax: float64(e.SpeedMax), DriveMax: float64(e.VoltsMax)}
	if f.integer {
		b.Shift = f.shift
	}
	held, err := design.ToBoard(g, b)
	if err != nil {
		return refusedConversion(err)
	}
	rep := boardReport{held, f.speedUnit, speed, f.driveUnit, drive, f.perSample, r.CountsPerMotorTurn()}
	if f.asJSON {
		return printJSON(c.OutOrStdout(), rep)
	}
	out := c.OutOrStdout()
	fmt.Fprintf(out, "board's units: speed %s = %.9g rad/s, drive %s = %.9g V\n", f.speedUnit, speed, f.driveUnit, drive)
	row := func(name string, v float64, n *int64) {
		if n != nil {
			fmt.Fprintf(out, "%-4s %-15.9g held as %d / 2^%d\n", name, v, *n, held.Shift)
			return
		}
		fmt.Fprintf(out, "%-4s %-15.9g held as binary32 %08X\n", name, v, math.Float32bits(float32(v)))
	}
	row("kp", held.Kp, held.KpInt)
	row("ki", held.Ki, held.KiInt)
	row("kd", held.Kd, held.KdInt)
	fmt.Fprintf(out, "largest rounding error %.3g %%\n", held.Rounding*100)
	if held.SmallestError.Known() {
		note := ""
		if top := float64(e.SpeedMax); float64(held.SmallestError) > 0.01*top {
			note = fmt.Sprintf(": COARSE, that is %.0f %% of top speed; use a larger shift, or --whole-product", 100*float64(held.SmallestError)/top)
		}
		fmt.Fprintf(out, "smallest error that moves the integral %.4g rad/s%s\n", float64(held.SmallestError), note)
	}
	fmt.Fprintln(out, "what the board then runs, in SI:")
	printGains(c, held.Held)
	return nil
}
