package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"time"

	"github.com/spf13/cobra"

	"gainwright/link"
	"gainwright/link/adapter"
	"gainwright/link/serialport"
	"gainwright/tune/trace"
)

// watchCommand looks at a board with a line format of its own. Nothing is ever
// written to the port.
func watchCommand() *cobra.Command {
	var port, file, out string
	var baud int
	var lasts time.Duration
	c := &cobra.Command{
		Use: "watch --port PATH --adapter ADAPTER.toml", Short: "look at a board with a line format of its own, and record it", Args: cobra.NoArgs,
		Long: "watch reads a board that does not speak protocol/SPEC.md, by a file that describes its lines, and shows and records\n" +
			"what it says; fit reads the record. It never writes to the port: such a board has shown neither limits nor a\n" +
			"timeout and cannot be driven.",
		RunE: func(c *cobra.Command, _ []string) error {
			a, err := adapter.Load(file)
			if err != nil {
				return usage(err)
			}
			if baud == 0 {
				baud = a.Baud
			}
			if out != "" {
				if _, err := os.Stat(out); err == nil {
					return usage(fmt.Errorf("%s is there already: a record is never overwritten", out))
				}
			}
			p, err := serialport.Open(port, baud)
			if err != nil {
				return usage(err)
			}
			defer p.Close()
			fmt.Fprintf(c.ErrOrStderr(), "look-only: %s on %s; %s. Ctrl-C ends\n", a.Name, port, p.Lines)
			ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
			defer stop()
			if lasts > 0 {
				var cancel context.CancelFunc
				ctx, cancel = context.WithTimeout(ctx, lasts)
				defer cancel()
			}
			w := &watched{r: adapter.NewReader(a), names: a.Names(), perCount: a.RadPerCount, to: c.OutOrStdout(), show: out == ""}
			err = link.NewReader(p, link.ReaderConfig{OnBytes: w.take}).Run(ctx)
			if err != nil && ctx.Err() == nil {
				fmt.Fprintln(c.ErrOrStderr(), "LINK LOST: "+err.Error())
			}
			fmt.Fprintf(c.ErrOrStderr(), "%d samples, %d other lines, %d too long, %d out of order\n", w.r.Stats.Samples, w.r.Stats.Other, w.r.Stats.TooLong, w.r.Stats.Backward)
			return w.keep(out, a.Name)
		},
	}
	f := c.Flags()
	f.StringVar(&port, "port", "", "serial port or pseudo-terminal")
	f.StringVar(&file, "adapter", "", "what its lines mean (TOML)")
	f.StringVar(&out, "out", "", "write the samples into this new trace file (CSV) instead of showing them")
	f.IntVar(&baud, "baud", 0, "line rate in bit/s; without it that of the adapter file")
	f.DurationVar(&lasts, "for", 0, "end after this time, such as 30s")
	must(c.MarkFlagRequired("port"))
	must(c.MarkFlagRequired("adapter"))
	return c
}

// watchedMax bounds what one recording holds: two hours at 1 kHz.
const watchedMax = 7_200_000

type watched struct {
	r        *adapter.Reader
	names    []string
	perCount float64 // rad
	to       io.Writer
	show     bool
	shown    time.Duration
	tr       trace.Trace
}

func (w *watched) take(at time.Duration, b []byte) {
	w.r.Feed(b, func(s adapter.Sample) {
		if !w.show {
			w.add(s)
			return
		}
		if at-w.shown < 100*time.Millisecond && w.shown > 0 {
			return // ten lines a second are as many as anybody reads
		}
		w.shown = at
		fmt.Fprintf(w.to, "%10.3f s", s.Time)
		for i, n := range w.names {
			if n != "time" {
				fmt.Fprintf(w.to, "  %s %.5g %s", n, s.Values[i], adapter.Quantities[n])
			}
		}
		fmt.Fprintln(w.to)
	})
}

func (w *watched) add(s adapter.Sample) {
	if w.tr.Len() >= watchedMax {
		return
	}
	t := &w.tr
	speed := false
	t.Time = append(t.Time, s.Time)
	for i, n := range w.names {
		v := s.Values[i]
		switch n {
		case "speed":
			speed = true
			t.Speed = append(t.Speed, v)
		case "voltage":
			t.Voltage = append(t.Voltage, v)
		case "current":
			t.Current = append(t.Current, v)
		case "bus":
			t.Bus = append(t.Bus, v)
		case "temperature":
			t.Temperature = append(t.Temperature, v)
		case "setpoint":
			t.Setpoint = append(t.Setpoint, v)
		case "counts":
			t.Counts = append(t.Counts, v)
		}
	}
	if !speed { // from the counts, one a sample
		v := 0.0
		if n := len(t.Counts); n > 1 {
			v = w.perCount * (t.Counts[n-1] - t.Counts[n-2]) / (t.Time[n-1] - t.Time[n-2])
		}
		t.Speed = append(t.Speed, v)
	}
	if len(t.Voltage) < len(t.Time) {
		t.Voltage = append(t.Voltage, 0) // not measured: a trace has the column
	}
}

func (w *watched) keep(out, name string) error {
	if out == "" {
		return nil
	}
	if w.tr.Len() == 0 {
		return &exitError{exitFailed, errors.New("no line had the form that the adapter describes: look at line rate and pattern")}
	}
	f, err := os.OpenFile(out, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o644)
	if err != nil {
		return usage(err)
	}
	w.tr.Name = name
	return errors.Join(w.tr.WriteCSV(f, "read look-only by the adapter "+name), f.Close())
}
