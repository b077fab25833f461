package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"sync/atomic"
	"syscall"
	"time"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"gainwright/link/serialport"
	"gainwright/safety/conformance"
	"gainwright/tui/tap"
	"gainwright/tune/sheet/plain"
)

// conformanceFlags say which board, and how far the checks may go.
type conformanceFlags struct {
	port                         string
	baud                         int
	move, restart, brief, asJSON bool
	only                         []string
}

func conformanceCommand() *cobra.Command {
	var f conformanceFlags
	c := &cobra.Command{
		Use: "conformance --port PATH", Short: "hold a board against the protocol, paragraph by paragraph", Args: cobra.NoArgs,
		Long: "conformance holds a board against protocol/SPEC.md and says what it may be used for: drive or look-only. It arms the\n" +
			"board but does not turn the motor, unless --move is given and a key is pressed when it asks. It writes the stored\n" +
			"gains twice with one bit changed and twice as found, clears a latched trip, and leaves limits and gains as found.\n" +
			"It takes about two minutes; exit code 1 where the board does not conform.",
		RunE: func(c *cobra.Command, _ []string) error { return f.run(c.OutOrStdout(), c.ErrOrStderr()) },
	}
	c.Flags().StringVar(&f.port, "port", "", "serial port or pseudo-terminal")
	c.Flags().IntVar(&f.baud, "baud", 115200, "line rate in bit/s")
	c.Flags().BoolVar(&f.move, "move", false, "also the checks that turn the motor; asks for a key before the first")
	c.Flags().BoolVar(&f.restart, "restart", false, "also the checks that need the board restarted; asks for each")
	c.Flags().BoolVar(&f.brief, "brief", false, "leave out the check that takes a minute")
	c.Flags().StringSliceVar(&f.only, "only", nil, "only these paragraphs, such as P2,P6.4; the verdict is then look-only")
	c.Flags().BoolVar(&f.asJSON, "json", false, "print one JSON object")
	return c
}

func (f conformanceFlags) run(out, say io.Writer) error {
	if f.port == "" {
		return usage(errors.New("no port given: conformance --port PATH; `gainwright ports` lists them"))
	}
	if (f.move || f.restart) && !term.IsTerminal(int(os.Stdin.Fd())) {
		return usage(errors.New("--move and --restart need a person at a terminal: run it from one, with its standard input"))
	}
	port, err := serialport.Open(f.port, f.baud)
	if err != nil {
		return usage(err)
	}
	defer port.Close()
	line := conformance.OnPort(port)
	defer line.Close()
	d := &bystander{say: say}
	defer d.watch()()
	rep, err := conformance.Run(line, f.options(d))
	d.restore()
	if f.asJSON {
		if jerr := printJSON(out, rep); jerr != nil {
			return jerr
		}
	} else {
		printConformance(out, rep)
	}
	if err != nil {
		return &exitError{exitFailed, err}
	}
	if !rep.Conforms {
		return quiet(exitFailed)
	}
	return nil
}

func (f conformanceFlags) options(d *bystander) conformance.Options {
	o := conformance.Options{Brief: f.brief, Only: f.only, Interrupted: d.interrupted.Load}
	if f.move {
		o.Permit = d.permit
	}
	if f.restart {
		o.Restart = d.askRestart
	}
	if !f.asJSON {
		o.Progress = func(r conformance.Result) { d.tell("%s %s %s", mark(r.OK), r.ID, r.What) }
	}
	return o
}

func mark(ok bool) string {
	if ok {
		return "ok  "
	}
	return "FAIL"
}

// printConformance says what was found in words.
func printConformance(w io.Writer, r conformance.Report) {
	for _, c := range r.Checks {
		if !c.OK {
			fmt.Fprintf(w, "FAIL %s %s\n     %s\n", c.ID, c.What, plain.Visible(c.Detail, 300))
		}
	}
	for _, l := range r.NotJudged {
		fmt.Fprintf(w, "not judged %s %s\n     %s\n", l.ID, l.What, plain.Visible(l.Reason, 300))
	}
	fmt.Fprintf(w, "board %s, protocol %s: %d passed, %d failed, %d not judged. Use: %s\n", plain.Visible(r.Board, 40), r.Protocol, r.Passed, r.Failed, len(r.NotJudged), r.Use)
	if r.NotRestored != "" {
		fmt.Fprintln(w, "ATTENTION: "+plain.Visible(r.NotRestored, 300))
	}
	if r.Reason != "" {
		fmt.Fprintln(w, plain.Visible(r.Reason, 300))
	}
}

// bystander is the person at the terminal.
type bystander struct {
	say         io.Writer
	interrupted atomic.Bool
	raw         *tap.Terminal
}

// watch ends the checks, and with them the drive, on a signal.
func (d *bystander) watch() (stop func()) {
	signals := make(chan os.Signal, 1)
	signal.Notify(signals, os.Interrupt, syscall.SIGTERM, syscall.SIGHUP)
	go func() {
		for range signals {
			d.interrupted.Store(true)
		}
	}()
	return func() { signal.Stop(signals); close(signals) }
}

func (d *bystander) tell(format string, args ...any) {
	end := "\n"
	if d.raw != nil {
		end = "\r\n"
	}
	fmt.Fprintf(d.say, format+end, args...)
}

func (d *bystander) restore() {
	if d.raw != nil {
		_ = d.raw.Restore(time.Second) // what it cannot give back, the shell can: stty sane
		d.raw = nil
	}
}

// earlyKeys is how long a key is not yet an answer to the question.
const earlyKeys = 2 * time.Second

// permit asks for the key that lets the motor turn. Every key after it ends the
// checks with a cut.
func (d *bystander) permit(what string) bool {
	raw, err := tap.MakeRaw(os.Stdin, os.Stderr)
	if err != nil {
		d.tell("the terminal gives no single keys: %v", err)
		return false
	}
	d.raw = raw
	d.tell("\r\n%s", what)
	d.tell("Is the area clear, and one hand at the E-stop? g starts; any other key leaves these checks out.")
	d.tell("Once they run, any key cuts. The first 2 s take no key.")
	asked := time.Now()
	for {
		var key [1]byte
		if _, err := os.Stdin.Read(key[:]); err != nil {
			d.restore()
			return false
		}
		if time.Since(asked) < earlyKeys {
			continue
		}
		if key[0] != 'g' {
			d.restore()
			return false
		}
		go func() {
			if _, err := os.Stdin.Read(key[:]); err == nil {
				d.interrupted.Store(true)
			}
		}()
		return true
	}
}

func (d *bystander) askRestart() error {
	d.tell("restart the board now: press its reset, or take its power away and give it back (60 s)")
	return nil
}
