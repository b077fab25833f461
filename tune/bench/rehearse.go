package bench

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"time"

	"gainwright/link/simrig"
)

// ErrNoRigs is a folder without a BOARD.toml.
var ErrNoRigs = errors.New("no simulated rig")

// rehearsalStart is the time of day at which every job of a rehearsal begins:
// results depend on rigs and seed alone.
var rehearsalStart = time.Date(2026, 1, 2, 8, 0, 0, 0, time.UTC)

// Rehearsal is the whole job on every simulated rig of a folder.
type Rehearsal struct {
	Dir      string
	Jobs     int // at the same time; at least 1
	Seed     uint64
	Rules    bool // judge other rules beside
	Program  string
	Progress func(done, of int, r RigReport) // called by one goroutine at a time
}

// RigReport is one rig's part of a rehearsal.
type RigReport struct {
	File        string `json:"file"`
	Expect      string `json:"expect"`
	ExpectCause string `json:"expect_cause,omitempty"`
	AsExpected  bool   `json:"as_expected"`
	Report
}

// Fleet is what a rehearsal came to. Only WallSeconds differs from one run to
// the next.
type Fleet struct {
	Rigs         []RigReport `json:"rigs"`
	Accepted     int         `json:"accepted"`
	NoAdjustment int         `json:"no_adjustment"`
	Refused      int         `json:"refused"`
	Tripped      int         `json:"tripped"`
	Failed       int         `json:"failed"`
	Violations   int         `json:"violations"`
	Unexpected   int         `json:"unexpected"`
	WallSeconds  float64     `json:"wall_seconds"`
	Simulated    float64     `json:"simulated_seconds"`
}

// rigFiles are the BOARD.toml files of a folder, sorted; NAME.rig.toml are rig
// files.
func rigFiles(dir string) ([]string, error) {
	entries, err := os.ReadDir(dir)
	if err != nil {
		return nil, err
	}
	var files []string
	for _, e := range entries {
		if n := e.Name(); strings.HasSuffix(n, ".toml") && !strings.HasSuffix(n, ".rig.toml") && !e.IsDir() {
			files = append(files, n)
		}
	}
	if len(files) == 0 {
		return nil, fmt.Errorf("%s: %w: there is no *.toml in it", dir, ErrNoRigs)
	}
	slices.Sort(files)
	return files, nil
}

// Do runs all jobs. A file that is no simulated rig is an error with its place,
// before anything runs.
func (r Rehearsal) Do() (Fleet, error) {
	began := time.Now()
	files, err := rigFiles(r.Dir)
	if err != nil {
		return Fleet{}, err
	}
	configs := make([]simrig.Config, len(files))
	for i, f := range files {
		if configs[i], err = simrig.Load(filepath.Join(r.Dir, f)); err != nil {
			return Fleet{}, err
		}
	}
	f := Fleet{Rigs: make([]RigReport, len(files))}
	work := make(chan int)
	var wait sync.WaitGroup
	var lock sync.Mutex
	done := 0
	for range min(max(1, r.Jobs), len(files)) {
		wait.Go(func() {
			for i := range work {
				f.Rigs[i] = r.one(files[i], configs[i])
				lock.Lock()
				if done++; r.Progress != nil {
					r.Progress(done, len(files), f.Rigs[i])
				}
				lock.Unlock()
			}
		})
	}
	for i := range files {
		work <- i
	}
	close(work)
	wait.Wait()
	f.sum()
	f.WallSeconds = time.Since(began).Seconds()
	return f, nil
}

// one runs one job; what keeps it from beginning is its failure, not the
// rehearsal's.
func (r Rehearsal) one(file string, c simrig.Config) RigReport {
	rep, err := DryRun{Config: c, Seed: r.Seed, Program: r.Program, Start: rehearsalStart, Rules: r.Rules}.Do()
	if err != nil {
		rep.Outcome, rep.Reason = Failed, err.Error()
	}
	out := RigReport{File: file, Expect: c.Expect, ExpectCause: c.Cause, Report: rep}
	out.AsExpected = expected(out)
	return out
}

// expected reports whether a rig came out as its file says: a healthy one
// accepted or left alone, with its envelope kept; one that must be refused
// refused or tripped, by the cause that the file names.
func expected(r RigReport) bool {
	switch r.Expect {
	case "", "accepted":
		return (r.Outcome == Accepted || r.Outcome == NoAdjustment) && r.Violations == 0
	}
	if r.Outcome == NoAdjustment && r.ExpectCause == simrig.FaultGainsDiffer {
		return true // nothing was stored
	}
	return (r.Outcome == Refused || r.Outcome == Tripped) && sameFault(r.ExpectCause, r.Cause)
}

// sameFault reports whether the cause that was named is the fault's. A board that
// hears nothing, one that says nothing and one that is gone look the same from
// this end of the line; so do one restart and many.
func sameFault(fault, named string) bool {
	as := map[string]string{"deaf": "mute", "restarts": "resets-itself"}
	if w := as[fault]; w != "" {
		fault = w
	}
	return fault == "" || fault == named
}

func (f *Fleet) sum() {
	for i := range f.Rigs {
		r := &f.Rigs[i]
		switch r.Outcome {
		case Accepted:
			f.Accepted++
		case NoAdjustment:
			f.NoAdjustment++
		case Refused:
			f.Refused++
		case Tripped:
			f.Tripped++
		default:
			f.Failed++
		}
		if !r.AsExpected {
			f.Unexpected++
		}
		f.Violations += r.Violations
		f.Simulated += r.Simulated
	}
}

// Name is the rig's file without its ending.
func (r RigReport) Name() string { return strings.TrimSuffix(r.File, ".toml") }
