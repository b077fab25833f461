package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"gainwright/link/tape"
	"gainwright/protocol"
	"gainwright/tune/sheet"
	"gainwright/tune/sheet/plain"
	"gainwright/tune/trace"
)

// replayCommand decodes a tape by the code that a live session uses.
func replayCommand() *cobra.Command {
	var csv string
	var brief, asJSON bool
	var from, to float64
	c := &cobra.Command{
		Use: "replay TAPE", Short: "decode a tape: samples, lines, losses, each with its time", Args: cobra.ExactArgs(1),
		Long: "replay decodes every byte of a tape (or of the tape in a record's folder) by the code that a live session uses,\n" +
			"and prints what it finds with its time since the start of the session. With --brief, samples that follow one\n" +
			"another are counted on one line. With --csv the samples become a trace that fit reads.",
		RunE: func(c *cobra.Command, args []string) error {
			path, err := tapeOf(args[0])
			if err != nil {
				return err
			}
			if csv == "-" && asJSON {
				return usage(errors.New("--csv - and --json both want standard output"))
			}
			file, err := os.Open(path)
			if err != nil {
				return usage(err)
			}
			defer file.Close()
			p := &replay{out: c.OutOrStdout(), errs: c.ErrOrStderr(), path: path, brief: brief, quiet: asJSON || csv == "-", from: from, to: to}
			if err := p.read(file); err != nil {
				return err
			}
			if csv != "" {
				if err := p.writeTrace(c, csv); err != nil {
					return err
				}
			}
			if asJSON {
				err = printJSON(c.OutOrStdout(), p.summary())
			} else if !p.quiet {
				p.printSummary()
			}
			if err == nil && p.badRecords > 0 {
				return quiet(exitFailed)
			}
			return err
		},
	}
	f := c.Flags()
	f.StringVar(&csv, "csv", "", "write the samples as a trace into this new file; - for standard output")
	f.BoolVar(&brief, "brief", false, "count samples that follow one another on one line")
	f.Float64Var(&from, "from", 0, "leave out what came before so many seconds")
	f.Float64Var(&to, "to", 0, "leave out what came after so many seconds; 0: to the end")
	f.BoolVar(&asJSON, "json", false, "print one JSON object with the counts")
	return c
}

// tapeOf finds the tape in a record's folder, or takes the file named.
func tapeOf(path string) (string, error) {
	info, err := os.Stat(path)
	if err != nil {
		return "", usage(err)
	}
	if !info.IsDir() {
		return path, nil
	}
	r, _, err := openSheet(path)
	if err != nil {
		return "", err
	}
	l, ok := r.Last(sheet.KindTape, "")
	if !ok {
		for _, f := range r.Loose() { // a job that was broken off never entered its tape
			if f == "tape-session.txt" {
				return filepath.Join(path, f), nil
			}
		}
		return "", usage(fmt.Errorf("%s holds no tape: a dry run keeps none", path))
	}
	return filepath.Join(path, l.File), nil
}

// replay is one tape being decoded. It takes what the two framers find: one for
// each direction.
type replay struct {
	out, errs    io.Writer
	path         string
	brief, quiet bool
	from, to     float64

	now      time.Duration
	start    time.Time
	board    protocol.Framer
	console  protocol.Framer
	toBoard  bool
	ids      []string
	identity protocol.Identity

	samples              []protocol.Sample
	run                  sampleRun
	records, badRecords  int
	lines, requests      int
	motion               int
	bad, cuts, losses    int
	remarks              int
	firstSample, endTime time.Duration
	cut                  bool
}

// sampleRun is samples that follow one another.
type sampleRun struct {
	n, motion      int // samples; lines of the motion lane between them
	begin          time.Duration
	state          protocol.State
	slow, fast     float64 // rad/s
	voltLo, voltHi float64 // V
}

// read decodes the whole tape.
func (p *replay) read(file io.Reader) error {
	t, err := tape.NewReader(file)
	if err != nil {
		return usage(fmt.Errorf("%s: %w", p.path, err))
	}
	p.start = t.Start
	for {
		rec, err := t.Next()
		var place *tape.ParseError
		switch {
		case err == nil:
			p.record(rec)
			continue
		case errors.As(err, &place):
			p.badRecords++
			fmt.Fprintln(p.errs, shown("gainwright: %s: %v", p.path, err))
			continue
		case err != io.EOF:
			return &exitError{exitFailed, err}
		}
		break
	}
	p.endRun()
	if p.cut = t.Cut(); p.cut {
		fmt.Fprintln(p.errs, shown("gainwright: %s: the tape ends in the middle of a line", p.path))
	}
	return nil
}

func (p *replay) record(rec tape.Record) {
	p.records++
	p.now, p.endTime = rec.Time, max(p.endTime, rec.Time)
	switch rec.Dir {
	case tape.FromBoard:
		p.toBoard = false
		p.board.Feed(rec.Bytes, p)
	case tape.ToBoard:
		if n := bytes.Count(rec.Bytes, []byte{protocol.Cut}); n > 0 {
			p.cuts += n
			p.say(">", "CUT x%d", n)
		}
		p.toBoard = true
		p.console.Feed(bytes.ReplaceAll(rec.Bytes, []byte{protocol.Cut}, nil), p)
	case tape.Loss:
		p.losses++
		p.say("!", "%s", rec.Bytes)
	case tape.Remark:
		p.remarks++
		p.say("#", "%s", rec.Bytes)
	}
}

// inside reports whether now is in the part that was asked for.
func (p *replay) inside() bool {
	t := p.now.Seconds()
	return t >= p.from && (p.to <= 0 || t <= p.to)
}

func (p *replay) say(dir, format string, args ...any) {
	p.endRun()
	if !p.quiet && p.inside() {
		fmt.Fprintf(p.out, "%12.6f %s %s\n", p.now.Seconds(), dir, plain.Visible(fmt.Sprintf(format, args...), 0))
	}
}

// Sample takes a sample of either direction; a console sends none.
func (p *replay) Sample(s protocol.Sample) {
	if !p.inside() {
		return
	}
	if len(p.samples) == 0 {
		p.firstSample = p.now
	}
	p.samples = append(p.samples, s)
	if p.quiet {
		return
	}
	if p.brief {
		p.extend(s)
		return
	}
	text := fmt.Sprintf("sample %3d  %11.6f s  %-8s %9.2f rpm %8.3f V", s.Seq, float64(s.BoardUS)*1e-6, s.State, s.Speed.RPM(), float64(s.Volts))
	if s.Has&protocol.HasCurrent != 0 {
		text += fmt.Sprintf(" %7.3f A", float64(s.Current))
	}
	if s.Has&protocol.HasBus != 0 {
		text += fmt.Sprintf(" bus %.2f V", float64(s.Bus))
	}
	if s.Has&protocol.HasCounts != 0 {
		text += fmt.Sprintf(" count %d", s.Counts)
	}
	if s.Saturated {
		text += " SATURATED"
	}
	if s.TripHeld {
		text += " TRIPPED"
	}
	fmt.Fprintf(p.out, "%12.6f < %s\n", p.now.Seconds(), text)
}

func (p *replay) extend(s protocol.Sample) {
	if p.run.n > 0 && p.run.state != s.State {
		p.endRun()
	}
	w, v := s.Speed.RPM(), float64(s.Volts)
	if r := &p.run; r.n == 0 {
		*r = sampleRun{motion: r.motion, begin: p.now, state: s.State, slow: w, fast: w, voltLo: v, voltHi: v}
	}
	r := &p.run
	r.n++
	r.slow, r.fast, r.voltLo, r.voltHi = min(r.slow, w), max(r.fast, w), min(r.voltLo, v), max(r.voltHi, v)
}

func (p *replay) endRun() {
	if r := p.run; r.n > 0 {
		fmt.Fprintf(p.out, "%12.6f < %d samples, %s, %.1f to %.1f rpm, %.3f to %.3f V", r.begin.Seconds(), r.n, r.state, r.slow, r.fast, r.voltLo, r.voltHi)
		if r.motion > 0 {
			fmt.Fprintf(p.out, "; %d heartbeats or drive values to the board", r.motion)
		}
		fmt.Fprintln(p.out)
	}
	p.run = sampleRun{}
}

// Line takes any other good line. Identity lines set the scales.
func (p *replay) Line(body []byte) {
	dir := "<"
	if p.toBoard {
		dir = ">"
		if isMotion(body) {
			p.motion++
			if p.brief {
				p.run.motion++
				return
			}
		} else {
			p.requests++
		}
	} else {
		p.lines++
		if rest, ok := bytes.CutPrefix(body, []byte("id ")); ok && len(p.ids) < 1000 {
			p.ids = append(p.ids, string(rest))
			p.identify()
		}
	}
	p.say(dir, "%s", body)
}

// isMotion reports whether a line to the board is a heartbeat or a drive value,
// of which a run has hundreds.
func isMotion(body []byte) bool {
	verb, _, _ := bytes.Cut(body, []byte(" "))
	switch string(verb) {
	case protocol.VerbBeat, protocol.VerbVolts, protocol.VerbSpeed:
		return true
	}
	return false
}

// identify reads the identity as far as it came. A board that tells it again
// after a restart begins with its protocol line.
func (p *replay) identify() {
	last := p.ids[len(p.ids)-1]
	if bytes.HasPrefix([]byte(last), []byte("proto ")) {
		p.ids = p.ids[len(p.ids)-1:]
	}
	id, err := protocol.ParseIdentity(p.ids)
	if err != nil {
		return
	}
	p.identity = id
	if id.Scales.SpeedLSB > 0 && id.Scales.VoltsLSB > 0 {
		p.board.Scales = id.Scales
	}
}

// Bad takes a line that was dropped.
func (p *replay) Bad(raw []byte, err error) {
	p.bad++
	dir := "<"
	if p.toBoard {
		dir = ">"
	}
	p.say(dir, "BAD %q: %v", raw, err)
}

func (p *replay) summary() map[string]any {
	st := p.board.Stats
	var start any
	if !p.start.IsZero() {
		start = p.start.Format(time.RFC3339Nano)
	}
	return map[string]any{"tape": p.path, "start": start, "seconds": p.endTime.Seconds(), "records": p.records, "bad_records": p.badRecords,
		"samples": st.Samples, "lines": p.lines, "requests": p.requests, "motion_lines": p.motion, "bad_lines": p.bad, "samples_lost": st.Lost, "samples_stale": st.Stale,
		"noise_bytes": st.Noise, "time_jumps": st.TimeJumps, "cuts": p.cuts, "losses": p.losses, "remarks": p.remarks, "cut_short": p.cut,
		"board": p.identity.Board, "firmware": p.identity.Firmware}
}

func (p *replay) printSummary() {
	st := p.board.Stats
	fmt.Fprint(p.out, sheet.Wrap(fmt.Sprintf("%.3f s, %d records: board %s, %d samples (%d lost, %d stale), %d lines, %d requests, %d heartbeats or drive values, %d cuts, %d bad lines, %d noise bytes, %d losses on the tape",
		p.endTime.Seconds(), p.records, orWord(p.identity.Board), st.Samples, st.Lost, st.Stale, p.lines, p.requests, p.motion, p.cuts, p.bad, st.Noise, p.losses), ""))
	if p.identity.Scales.SpeedLSB == 0 && st.Samples > 0 {
		fmt.Fprintln(p.out, "the tape holds no identity: speeds and volts above are in the wire's own units")
	}
}

// writeTrace makes a trace of the samples, time from the first one.
func (p *replay) writeTrace(c *cobra.Command, path string) error {
	if p.identity.Scales.SpeedLSB == 0 {
		return &exitError{exitRefused, errors.New("the tape holds no identity, so the scales of its samples are not known: no trace is made of it")}
	}
	tr := &trace.Trace{Name: filepath.Base(p.path), Window: p.identity.Window().Seconds(), RadPerCount: p.identity.RadPerCount()}
	var left int
	first := true
	var begin, last uint64
	for _, s := range p.samples {
		if !first && s.BoardUS <= last || s.Has&protocol.HasCounts == 0 {
			left++
			continue
		}
		if first {
			begin, first = s.BoardUS, false
		}
		last = s.BoardUS
		tr.Time = append(tr.Time, float64(s.BoardUS-begin)*1e-6)
		tr.Voltage = append(tr.Voltage, float64(s.Volts))
		tr.Speed = append(tr.Speed, float64(s.Speed))
		tr.Counts = append(tr.Counts, float64(s.Counts))
		tr.Setpoint = append(tr.Setpoint, float64(s.Setpoint))
		if p.identity.Scales.CurrentLSB > 0 {
			tr.Current = append(tr.Current, float64(s.Current))
		}
		if p.identity.Scales.BusLSB > 0 && p.identity.BusMeasured {
			tr.Bus = append(tr.Bus, float64(s.Bus))
		}
		m := trace.Used
		if s.Saturated {
			m = trace.Saturated
		}
		tr.Mask = append(tr.Mask, m)
	}
	if tr.Len() == 0 {
		return &exitError{exitRefused, errors.New("the tape holds no sample with counts in that part: no trace is made of it")}
	}
	var b bytes.Buffer
	if err := tr.WriteCSV(&b, "note: replayed from a tape"); err != nil {
		return &exitError{exitFailed, err}
	}
	if err := writeNew(c, path, b.String()); err != nil {
		return err
	}
	if path != "-" {
		fmt.Fprintf(p.errs, "gainwright: %s: %d samples, %d left out\n", path, tr.Len(), left)
	}
	return nil
}
