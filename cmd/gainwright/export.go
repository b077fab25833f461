package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"gainwright/tune/design"
	"gainwright/tune/job"
	"gainwright/tune/model"
	"gainwright/tune/sheet"
)

// exportFormats are the formats of each thing that can be exported, the usual
// one first.
var exportFormats = map[string][]string{
	"traces": {"csv", "json"},
	"model":  {"tf", "json"},
	"gains":  {"json", "tf", "c"},
}

// exportCommand takes data out of a record for other programs.
func exportCommand() *cobra.Command {
	var what, format, out, entry string
	c := &cobra.Command{
		Use: "export SHEET_DIR --what traces|model|gains", Short: "take traces, model or gains out of a record for other programs", Args: cobra.ExactArgs(1),
		Long: "export takes data out of a record:\n" +
			"  --what traces  --format csv (with a row of units) or json; all of them into a folder (--out DIR), or one\n" +
			"                 (--entry FILE) to standard output\n" +
			"  --what model   --format tf (one line that GNU Octave and Python 3 read) or json\n" +
			"  --what gains   --format json, tf (the feedback part of the law) or c (a header)\n" +
			"Nothing is overwritten.",
		RunE: func(c *cobra.Command, args []string) error {
			formats, ok := exportFormats[what]
			if !ok {
				return usage(fmt.Errorf("--what %q: it is traces, model or gains", what))
			}
			if format == "" {
				format = formats[0]
			}
			if !slices.Contains(formats, format) {
				return usage(fmt.Errorf("--format %q: for --what %s it is %s", format, what, strings.Join(formats, " or ")))
			}
			r, _, err := openSheet(args[0])
			if err != nil {
				return err
			}
			if what == "traces" {
				return exportTraces(c, r, format, out, entry)
			}
			text, err := exportText(r, what, format)
			if err != nil {
				return err
			}
			if out == "" {
				out = "-"
			}
			return writeNew(c, out, text)
		},
	}
	c.Flags().StringVar(&what, "what", "", "traces, model or gains")
	c.Flags().StringVar(&format, "format", "", "csv, tf, c or json; without it the usual one")
	c.Flags().StringVar(&out, "out", "", "new file (traces: folder); without it standard output")
	c.Flags().StringVar(&entry, "entry", "", "one trace by its file name")
	must(c.MarkFlagRequired("what"))
	return c
}

// exportText is the model or the gains of a record as text.
func exportText(r *sheet.Reader, what, format string) (string, error) {
	last, err := job.LastDesign(r)
	if err != nil {
		if errors.Is(err, job.ErrNothingToRecompute) {
			return "", &exitError{exitRefused, err}
		}
		return "", &exitError{exitFailed, err}
	}
	title := fmt.Sprintf("rig %q, board %q, record %s", r.Header().Rig, r.Header().BoardID, sheet.RecordName(r.Dir()))
	if r.Header().Simulated {
		title += ", SIMULATED RIG"
	}
	if what == "model" {
		if last.Model == nil {
			return "", &exitError{exitRefused, errors.New("every model of this job was refused: there is none to export; recompute shows why")}
		}
		if format == "json" {
			return indented(last.Model)
		}
		return modelLine(*last.Model, title, last.FitFile), nil
	}
	if last.Gains == nil {
		return "", &exitError{exitRefused, errors.New("this record holds no gains that could be exported")}
	}
	switch format {
	case "tf":
		return gainsLine(*last.Gains, title, last.GainsFrom), nil
	case "c":
		return cHeader(*last.Gains, title, last.GainsFrom)
	}
	return indented(last.Gains)
}

func indented(v any) (string, error) {
	b, err := json.MarshalIndent(v, "", "  ")
	return string(b) + "\n", err
}

// comment is text for a comment of another language: printable ASCII, and
// nothing that could end a C comment.
func comment(s string) string {
	ascii := strings.Map(func(r rune) rune {
		if r < 0x20 || r > 0x7e {
			return '?'
		}
		return r
	}, s)
	return strings.NewReplacer("*/", "* /", "/*", "/ *").Replace(ascii)
}

// list writes coefficients as GNU Octave and Python both read them.
func list(v []float64) string {
	var out []string
	for _, x := range v {
		out = append(out, strconv.FormatFloat(x, 'g', -1, 64))
	}
	return "[" + strings.Join(out, ", ") + "]"
}

// modelLine is a model as one line of assignments, after lines of comment.
func modelLine(m model.Linear, title, from string) string {
	unit := m.InputUnit
	if unit == "" {
		unit = model.InputVolts
	}
	return fmt.Sprintf("# model of %s; from %s\n# rad/s at the motor shaft per %s; descending powers of s; dead time in s\nnum = %s; den = %s; dead_time = %s;\n",
		comment(title), comment(from), unit, list(m.Num), list(m.Den), strconv.FormatFloat(m.DeadTime, 'g', -1, 64))
}

// gainsLine is the feedback part of a law as one line of assignments.
func gainsLine(g design.Gains, title, from string) string {
	num, den := g.TransferFunction()
	variable := "s"
	if g.SampleTime > 0 {
		variable = "z"
	}
	return fmt.Sprintf("# feedback part of the speed controller of %s; %s\n# V per rad/s; descending powers of %s; times in s; the drive limits and the setpoint weight are not in it\n"+
		"num = %s; den = %s; sample_time = %s; compute_delay = %s;\n", comment(title), comment(from), variable, list(num), list(den),
		strconv.FormatFloat(g.SampleTime, 'g', -1, 64), strconv.FormatFloat(g.ComputeDelay, 'g', -1, 64))
}

// cHeader is the gains as a C header in rad/s and V, binary32.
func cHeader(g design.Gains, title, from string) (string, error) {
	held, err := design.ToBoard(g, design.Board{SpeedUnit: 1, DriveUnit: 1})
	if err != nil {
		return "", refusedConversion(err)
	}
	body := held.CHeader("speed_gains")
	p := held.Held
	return fmt.Sprintf("/* %s; %s */\n#ifndef SPEED_GAINS_H\n#define SPEED_GAINS_H\n\n%s#define GAIN_SETPOINT_WEIGHT %.8ef\n#define GAIN_DERIVATIVE_FILTER_S %.8ef\n#define GAIN_SAMPLE_TIME_S %.8ef\n\n#endif\n",
		comment(title), comment(from), body, float32(p.SetpointWeight), float32(p.DerivativeFilter), float32(p.SampleTime)), nil
}

// exportTraces writes all traces into a folder, or one to standard output.
func exportTraces(c *cobra.Command, r *sheet.Reader, format, dir, entry string) error {
	lines := r.Find(sheet.KindTrace, "")
	if entry != "" {
		l, ok := r.ByFile(entry)
		if !ok || l.Kind != sheet.KindTrace {
			return usage(fmt.Errorf("--entry %s: the record has no such trace; without --entry they are listed", entry))
		}
		lines = []sheet.Line{l}
	}
	if len(lines) == 0 {
		return &exitError{exitRefused, errors.New("this record holds no trace")}
	}
	if dir == "" && entry == "" {
		for _, l := range lines {
			fmt.Fprintf(c.OutOrStdout(), "%9d  %s\n", l.Bytes, l.File)
		}
		fmt.Fprintln(c.ErrOrStderr(), "gainwright: name a folder (--out DIR) for all of them, or one of them (--entry FILE)")
		return nil
	}
	if dir != "" {
		if err := os.MkdirAll(dir, 0o755); err != nil {
			return usage(err)
		}
	}
	for _, l := range lines {
		text, err := traceText(r, l, format)
		if err != nil {
			return &exitError{exitFailed, err}
		}
		path := "-"
		if dir != "" {
			path = filepath.Join(dir, strings.TrimSuffix(l.File, ".csv")+"."+format)
		}
		if err := writeNew(c, path, text); err != nil {
			return err
		}
		if path != "-" {
			fmt.Fprintln(c.OutOrStdout(), path)
		}
	}
	return nil
}

// traceText is a trace as CSV as it stands in the record, or as columns in JSON.
func traceText(r *sheet.Reader, l sheet.Line, format string) (string, error) {
	if format == "csv" {
		b, err := r.Read(l)
		return string(b), err
	}
	tr, err := r.Trace(l)
	if err != nil {
		return "", err
	}
	var masks []string
	for _, m := range tr.Mask {
		masks = append(masks, m.String())
	}
	b, err := json.Marshal(map[string]any{"file": l.File, "name": tr.Name, "hold": tr.Hold.String(), "window_s": tr.Window, "rad_per_count": tr.RadPerCount,
		"time_s": tr.Time, "voltage_V": tr.Voltage, "speed_rad_s": tr.Speed, "current_A": tr.Current, "bus_V": tr.Bus, "temperature_degC": tr.Temperature,
		"setpoint_rad_s": tr.Setpoint, "counts": tr.Counts, "mask": masks})
	return string(b) + "\n", err
}
