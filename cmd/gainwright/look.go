package main

import (
	"errors"
	"fmt"
	"os"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"gainwright/tune/bench"
	"gainwright/tune/job"
	"gainwright/tune/jobfile"
	"gainwright/tune/sheet"
)

// readOrder reads a job file; "" is none.
func readOrder(path string) (*job.Order, error) {
	if path == "" {
		return nil, nil
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, usage(err)
	}
	f, err := jobfile.Parse(path, text)
	if err != nil {
		return nil, usage(err)
	}
	return f.Order(), nil
}

// lookEach is how often an unattended job looks how far it is, and lookMost how long
// one of its steps may take.
const (
	lookEach = 20 * time.Millisecond
	lookMost = 30 * time.Second
)

// lookCommand does a look-only job with nobody at the terminal: nothing is written to
// the board and nothing is armed.
func lookCommand() *cobra.Command {
	var f consoleFlags
	var asJSON bool
	c := &cobra.Command{
		Use: "look --port PATH --rig RIG.toml --job JOB.toml --out DIR", Short: "do a look-only job with nobody at the terminal", Args: cobra.NoArgs,
		Long: "look does a job file of mode look-only: identity, what the board holds, and a record of it. Nothing is written to\n" +
			"the board, nothing is armed, nothing moves. A job file that drives is refused here: no script arms a board.",
		RunE: func(c *cobra.Command, _ []string) error {
			o := bench.Options{Open: f.open, Program: "gainwright " + versionWords()}
			r, text, err := readRig(f.rigFile)
			if err != nil {
				return err
			}
			if o.Job.Order, err = readOrder(f.jobFile); err != nil {
				return err
			}
			if !o.Job.Order.LookOnly {
				return &exitError{exitRefused, fmt.Errorf("%s drives: no script arms a board; open it with gainwright console --job, at a terminal, or make its mode %q", f.jobFile, jobfile.LookOnly)}
			}
			o.Job.Rig, o.Job.RigText, o.Job.Version, o.Job.Operator = r, text, o.Program, f.operator
			o.NewSheet = f.newSheet(&o)
			rec, dir, err := lookAt(f.port, o)
			if asJSON {
				err = errors.Join(err, printJSON(c.OutOrStdout(), map[string]any{"job_file": rec, "sheet": dir}))
			} else {
				for _, s := range rec.Steps {
					fmt.Fprintf(c.OutOrStdout(), "%-11s %-8s %s\n", s.Do, s.Status, s.Words)
				}
				fmt.Fprintf(c.OutOrStdout(), "record: %s\n", dir)
			}
			if err == nil && !rec.Complete {
				return quiet(exitRefused)
			}
			return err
		},
	}
	c.Flags().StringVar(&f.port, "port", "", "serial port or pseudo-terminal")
	c.Flags().StringVar(&f.rigFile, "rig", "", "rig file")
	c.Flags().StringVar(&f.jobFile, "job", "", "job file of mode look-only")
	c.Flags().StringVar(&f.out, "out", "", "folder for the record; without it one in the data directory")
	c.Flags().StringVar(&f.operator, "operator", "", "for whom it is done, for the record")
	c.Flags().IntVar(&f.baud, "baud", 115200, "line rate in bit/s")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	for _, name := range []string{"port", "rig", "job"} {
		must(c.MarkFlagRequired(name))
	}
	return c
}

// lookAt does the steps of a look-only order on a port.
func lookAt(port string, o bench.Options) (rec sheet.OrderRecord, dir string, err error) {
	live := bench.NewLive(o)
	live.Connect(port)
	rec = sheet.OrderRecord{Name: o.Job.Order.Name, Mode: jobfile.LookOnly, Complete: true}
	for _, s := range o.Job.Order.Steps {
		if s.Step != job.StepPort && s.Step != job.StepIdentity { // those come with the connection
			live.Post(job.DoStep{Step: s.Step})
		}
		st := awaited(live, s.Step)
		line := sheet.OrderStep{Do: string(s.Step), Status: string(st.Status), Words: st.Result}
		if st.Status != job.Done {
			line.Words = st.Reason
			if r := live.View().Refusal; r != nil && line.Words == "" {
				line.Words = strings.Join([]string{r.What, r.Cause, r.Remedy}, ": ")
			}
		}
		rec.Complete = rec.Complete && (st.Status == job.Done || s.GoOn)
		rec.Steps = append(rec.Steps, line)
		if st.Status != job.Done && !s.GoOn {
			break
		}
	}
	dir, err = live.Close()
	return rec, dir, err
}

// awaited waits until a step was done or refused.
func awaited(live *bench.Live, id job.StepID) (st job.StepView) {
	for end := time.Now().Add(lookMost); time.Now().Before(end); time.Sleep(lookEach) {
		v := live.View()
		for _, s := range v.Steps {
			if s.ID == id {
				st = s
			}
		}
		if st.Status == job.Done || st.Status == job.Refused || v.Refusal != nil && !v.Doing {
			return st
		}
	}
	return st
}
