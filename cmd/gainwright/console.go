package main

import (
	"bytes"
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"os"
	"os/signal"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"syscall"
	"time"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"gainwright/link/serialport"
	"gainwright/link/simrig"
	"gainwright/safety"
	"gainwright/safety/rig"
	"gainwright/tui"
	"gainwright/tui/tap"
	"gainwright/tune/bench"
	"gainwright/tune/job"
	"gainwright/tune/sheet"
)

// demoTiming is as patient as a rig file may be.
const demoTiming = "\n[timing]\ntelemetry_age_ms = 500\nscreen_lease_ms = 3000\nboard_timeout_ms = 600\n"

// consoleFlags are what console and demo share.
type consoleFlags struct {
	port, rigFile, out, operator, jobFile, records, hand string
	ambient                                              string // °C, "" not known
	baud                                                 int
}

// consoleCommand opens the console. No script arms a real board: it insists on a
// terminal for its standard input.
func consoleCommand() *cobra.Command {
	var f consoleFlags
	c := &cobra.Command{
		Use: "console [--port PATH] [--rig RIG.toml] [--out SHEET_DIR]", Short: "open the console (also what a bare gainwright does)", Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			seen := portMemory()
			o := bench.Options{Ports: portViews, Open: f.open, Seen: seen.keep}
			if !c.Flags().Changed("baud") {
				o.OpenAt = openAt // a rate that was asked for is the only one
			}
			if f.rigFile != "" {
				r, text, err := readRig(f.rigFile)
				if err != nil {
					return err
				}
				o.Job.Rig, o.Job.RigText = r, text
			}
			var err error
			if o.Job.Order, err = readOrder(f.jobFile); err != nil {
				return err
			}
			return console(f, o)
		},
	}
	c.Flags().StringVar(&f.port, "port", "", "serial port or pseudo-terminal; without it the console lists the ports")
	c.Flags().StringVar(&f.rigFile, "rig", "", "rig file; without it the console asks for the nameplate")
	c.Flags().StringVar(&f.out, "out", "", "folder for the record; without it one in the data directory")
	c.Flags().StringVar(&f.jobFile, "job", "", "job file: which steps in which order; every arm still needs its keys")
	c.Flags().StringVar(&f.records, "records", "", "folder of earlier records; without it the data directory")
	c.Flags().StringVar(&f.ambient, "ambient", "", "temperature of the room in °C, as read off a thermometer, for the record")
	c.Flags().StringVar(&f.operator, "operator", "", "who does the job, for the record")
	f.handFlag(c)
	c.Flags().IntVar(&f.baud, "baud", 115200, "line rate in bit/s; without it the usual ones are tried where nothing that can be read comes")
	return c
}

// demoCommand opens the console on a built-in rig behind a pseudo-terminal.
func demoCommand() *cobra.Command {
	var f consoleFlags
	var simFile, rigFile, twin string
	c := &cobra.Command{
		Use: "demo", Short: "open the console on a built-in simulated rig", Args: cobra.NoArgs,
		Long: "demo opens the console on a built-in simulated rig: a board in software behind a pseudo-terminal that is opened\n" +
			"like any port. Nothing real moves. On screen, t turns its shaft by hand and o switches its power or works\n" +
			"the input that is asked for.",
		RunE: func(c *cobra.Command, _ []string) error { return openDemo(f, demoOn{simFile, rigFile, twin}, nil) },
	}
	c.Flags().StringVar(&simFile, "sim", "", "another simulated board (TOML)")
	c.Flags().StringVar(&twin, "twin", "", "record: rehearse on a simulated rig made of its model, its friction and its board")
	c.Flags().StringVar(&rigFile, "rig", "", "rig file that goes with it; without it the nameplate of the simulated board")
	c.Flags().StringVar(&f.out, "out", "", "folder for the record; without it a temporary one")
	c.Flags().StringVar(&f.jobFile, "job", "", "job file: which steps in which order")
	f.handFlag(c)
	c.Flags().StringVar(&f.records, "records", "", "folder of earlier records of simulated rigs; without it none are looked for")
	return c
}

// demoOn says which simulated rig a demo is on: that of a file, or the twin of a
// record, or the built-in one.
type demoOn struct{ sim, rig, twin string }

// read returns the simulated rig and the text of its rig file.
func (on demoOn) read() (cfg simrig.Config, text []byte, err error) {
	if on.twin != "" {
		if on.sim != "" || on.rig != "" {
			return cfg, nil, errors.New("--twin makes rig and rig file of a record: leave --sim and --rig out")
		}
		t, err := readTwin(on.twin)
		return t.Config, t.RigText, err
	}
	if cfg, err = demoConfig(on.sim); err != nil {
		return cfg, nil, err
	}
	if on.rig != "" {
		_, text, err = readRig(on.rig)
	} else {
		_, text, err = bench.RigOf(cfg)
	}
	return cfg, text, err
}

// readTwin makes the twin of a record.
func readTwin(dir string) (bench.Twin, error) {
	r, _, err := openSheet(dir)
	if err != nil {
		return bench.Twin{}, err
	}
	t, err := bench.TwinOf(r)
	if errors.Is(err, bench.ErrNoTwin) {
		err = &exitError{exitRefused, err}
	}
	return t, err
}

// openDemo opens the console on a simulated rig behind a pseudo-terminal. bend, if
// set, changes rig and options before they are used, and returns what is to be told
// of both once they are there.
func openDemo(f consoleFlags, on demoOn, bend func(*simrig.Config, *bench.Options) func(*bench.Served, *bench.Live)) error {
	cfg, text, err := on.read()
	if _, said := errors.AsType[*exitError](err); said {
		return err
	}
	if err != nil {
		return usage(err)
	}
	// Board and console share this process: a laptop under load holds both up,
	// and no shaft turns. A real board keeps the rig file's default.
	if !bytes.Contains(text, []byte("[timing]")) {
		text = append(text, demoTiming...)
	}
	r, err := rig.Parse("demo", text)
	if err != nil {
		return err
	}
	var sim *bench.Served
	o := bench.Options{Simulated: true}
	o.Job.Rig, o.Job.RigText = r, text
	f.baud = cfg.Board.Baud
	inMemory := false
	o.Open = func(path string) (bench.Opened, error) {
		if inMemory {
			return bench.Opened{Port: sim.Port(), Baud: cfg.Board.Baud, Note: "a pipe in memory: this system has no pseudo-terminals"}, nil
		}
		return f.open(path)
	}
	if o.Job.Order, err = readOrder(f.jobFile); err != nil {
		return err
	}
	if f.out == "" {
		if f.out, err = os.MkdirTemp("", "gainwright-demo-"); err != nil {
			return err
		}
	}
	told := func(*bench.Served, *bench.Live) {}
	if bend != nil {
		told = bend(&cfg, &o)
	}
	sim, err = bench.ServePTY(simrig.New(cfg, 1))
	if inMemory = errors.Is(err, bench.ErrNoPTY); inMemory {
		sim = bench.ServePipe(simrig.New(cfg, 1))
	} else if err != nil {
		return err
	}
	defer sim.Close()
	o.Ports = func() []job.PortView {
		return []job.PortView{{Path: sim.Path, Name: cfg.Name, Product: "simulated board " + cfg.Board.ID, Note: "built in, nothing real moves"}}
	}
	o.Hand, o.Cycle, o.Work = sim.Hand, sim.Cycle, sim.Work
	return consoleOf(f, o, func(live *bench.Live) { told(sim, live) })
}

func (f consoleFlags) open(path string) (bench.Opened, error) { return openAt(path, f.baud) }

func openAt(path string, baud int) (bench.Opened, error) {
	p, err := serialport.Open(path, baud)
	if err != nil {
		return bench.Opened{}, err
	}
	return bench.Opened{Port: p, Baud: p.Baud, Note: p.Lines}, nil
}

// newSheet opens the record: in the folder asked for, or in a new one of the
// data directory.
func (f consoleFlags) newSheet(o *bench.Options) func(board string, r rig.Rig) (*sheet.Sheet, error) {
	return func(board string, r rig.Rig) (*sheet.Sheet, error) {
		now := time.Now()
		dir := f.out
		if dir == "" {
			data, err := sheet.DataDir(runtime.GOOS, os.Getenv)
			if err != nil {
				return nil, err
			}
			suffix, err := sheet.NewSuffix(rand.Reader)
			if err != nil {
				return nil, err
			}
			dir = filepath.Join(data, sheet.NewDirName(r.Name, board, now, suffix))
		}
		return sheet.Create(dir, sheet.Header{Rig: r.Name, BoardID: board, Program: o.Program, Operator: f.operator,
			Start: now.Format(time.RFC3339Nano), Simulated: o.Simulated})
	}
}

// earlier finds the newest record of a rig and board that was left in a known state,
// in the folder asked for or in the data directory.
func (f consoleFlags) earlier(simulated bool) func(rig, board string) *sheet.Reader {
	return func(rig, board string) *sheet.Reader {
		dir := f.records
		if dir == "" {
			var err error
			if dir, err = sheet.DataDir(runtime.GOOS, os.Getenv); err != nil {
				return nil
			}
		}
		return newestOf(dir, rig, board, simulated)
	}
}

// newestOf is the newest record in a folder of a rig, whatever board it has now, that
// has an as-left and can be read.
func newestOf(dir, rig, board string, simulated bool) *sheet.Reader {
	for _, only := range []sheet.Filter{{Rig: rig, BoardID: board}, {Rig: rig}} {
		list, err := sheet.List(dir, only)
		if err != nil {
			return nil
		}
		for _, l := range list {
			r, _ := sheet.Open(l.Dir)
			if r == nil {
				continue
			}
			if _, ok := r.Last(sheet.KindAsLeft, ""); ok && r.Header().Simulated == simulated {
				return r
			}
		}
	}
	return nil
}

// restoreWait is how long a terminal gets to take its old looks back.
const restoreWait = 500 * time.Millisecond

// session is a live bench as the screens see it.
type session struct {
	*bench.Live
	leave context.CancelFunc
}

// Stop comes from a fault of the screens; the stop key is taken ahead of them.
func (s session) Stop(string) { s.Live.Stop(safety.ByPanic) }

// Post passes on what the person wants; leaving ends the screens.
func (s session) Post(i job.Intent) {
	s.Live.Post(i)
	if _, quit := i.(job.Quit); quit {
		s.leave()
	}
}

// console runs the screens over a live bench until the person leaves or the
// terminal goes away.
func console(f consoleFlags, o bench.Options) error { return consoleOf(f, o, nil) }

// consoleOf is console with somebody who is told of the bench before a port is opened.
func consoleOf(f consoleFlags, o bench.Options, told func(*bench.Live)) error {
	in := int(os.Stdin.Fd())
	if !term.IsTerminal(in) {
		return usage(errors.New("standard input is not a terminal: the console is worked by a person with keys; no script arms a board. For a simulated rig without a person use dryrun"))
	}
	hand, err := f.freeHand()
	if err != nil {
		return err
	}
	if f.out != "" {
		if found, err := os.ReadDir(f.out); err == nil && len(found) > 0 {
			return usage(fmt.Errorf("%s is not empty: a record never shares or overwrites a folder; name a new one with --out", f.out))
		}
	}
	o.Program = "gainwright " + versionWords()
	o.Job.Version, o.Job.Operator = o.Program, f.operator
	if f.ambient != "" {
		t, err := strconv.ParseFloat(strings.ReplaceAll(f.ambient, ",", "."), 64)
		if err != nil || !(t >= -40 && t <= 85) {
			return usage(fmt.Errorf("--ambient %s: give the temperature of the room in °C, from -40 to 85", f.ambient))
		}
		o.Job.Ambient = &t
	}
	o.NewSheet = f.newSheet(&o)
	if f.records != "" || !o.Simulated {
		o.Job.Earlier = f.earlier(o.Simulated)
	}
	o.Laptop = laptopNow
	// More threads than cores: a fit on every core must not keep the stop waiting
	// for one.
	runtime.GOMAXPROCS(runtime.NumCPU() + 2)
	terminal, err := tap.MakeRaw(os.Stdin, os.Stdout)
	if err != nil {
		return fmt.Errorf("the terminal cannot be set up: %w", err)
	}
	defer terminal.Restore(restoreWait)
	var live *bench.Live
	o.OnPanic = func(v any, stack []byte) {
		terminal.Restore(restoreWait)
		fmt.Fprintf(os.Stderr, "\ngainwright: a fault of this program; a stop was sent. Watch the shaft.\n%v\n%s\n", v, stack)
		if live != nil {
			fmt.Fprintf(os.Stderr, "record: %s\n", live.View().Sheet)
		}
	}
	live = bench.NewLive(o)
	if told != nil {
		told(live)
	}
	ctx, leave := context.WithCancel(context.Background())
	defer leave()
	keys := tap.New(os.Stdin, hooks(live, leave, hand.MarkKey(), o.OnPanic))
	go keys.Run()
	stopSignals := onSignals(live, leave)
	defer stopSignals()
	if f.port != "" {
		live.Connect(f.port)
	}
	uiErr := tui.Run(ctx, tui.Options{Session: session{live, leave}, Input: keys, Output: os.Stdout, Getenv: f.surroundings})
	dir, recErr := live.Close()
	terminal.Restore(restoreWait)
	if dir != "" {
		fmt.Fprintf(os.Stdout, "record: %s\n", dir)
	}
	if uiErr != nil && !errors.Is(uiErr, context.Canceled) {
		return &exitError{exitFailed, uiErr}
	}
	if recErr != nil {
		return &exitError{exitFailed, recErr}
	}
	return nil
}

// hooks are what the keys do ahead of the screens.
func hooks(live *bench.Live, leave context.CancelFunc, mark byte, onPanic func(any, []byte)) tap.Hooks {
	return tap.Hooks{
		OnStop: func(key byte) {
			if key == tap.Space {
				live.Stop(safety.ByStopKey)
				return
			}
			live.Stop(safety.BySignal)
			leave()
		},
		OnKey:    func(key byte) { live.Key(key == mark) },
		OnPaste:  func(int) { live.Paste() },
		OnClosed: func(error) { live.Stop(safety.BySignal); leave() },
		OnPanic: func(v any, stack []byte) {
			live.Stop(safety.ByPanic)
			onPanic(v, stack)
		},
	}
}

// onSignals stops the motor and leaves on every signal that asks a program to
// end. Ctrl-Z reaches nobody: the terminal is raw.
func onSignals(live *bench.Live, leave context.CancelFunc) (end func()) {
	c := make(chan os.Signal, 4)
	signal.Notify(c, os.Interrupt, syscall.SIGTERM, syscall.SIGHUP)
	go func() {
		for range c {
			live.Stop(safety.BySignal)
			leave()
		}
	}()
	return func() { signal.Stop(c) }
}
