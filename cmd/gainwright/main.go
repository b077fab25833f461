// Command gainwright is a terminal console for the speed loop of a motor rig. This
// package is the command table: it wires the parts and decides nothing.
package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"

	"github.com/spf13/cobra"

	"gainwright/tune/sheet/plain"
)

// Exit codes, fixed for scripts.
const (
	exitDone    = 0
	exitFailed  = 1
	exitUsage   = 2
	exitTripped = 3
	exitRefused = 4
)

// exitError carries an exit code with its message. An empty message means that
// all was said already.
type exitError struct {
	code int
	err  error
}

func (e *exitError) Error() string {
	if e.err == nil {
		return ""
	}
	return e.err.Error()
}

func (e *exitError) Unwrap() error { return e.err }

// usage marks bad input.
func usage(err error) error {
	if err == nil {
		return nil
	}
	return &exitError{exitUsage, err}
}

// quiet ends with a code when the answer itself has said why.
func quiet(code int) error {
	if code == exitDone {
		return nil
	}
	return &exitError{code: code}
}

func main() {
	os.Exit(run(os.Args[1:], os.Stdout, os.Stderr))
}

// run carries out one command line and returns its exit code.
func run(args []string, stdout, stderr io.Writer) int {
	root := newRoot()
	root.SetArgs(args)
	root.SetOut(stdout)
	root.SetErr(stderr)
	err := root.Execute()
	if err == nil {
		return exitDone
	}
	var e *exitError
	if !errors.As(err, &e) {
		e = &exitError{exitUsage, err} // cobra's own: unknown flag, missing argument
	}
	if msg := e.Error(); msg != "" {
		fmt.Fprintln(stderr, "gainwright: "+msg)
	}
	return e.code
}

func newRoot() *cobra.Command {
	root := &cobra.Command{
		Use:   "gainwright",
		Short: "tune the speed loop of a motor rig over a serial line",
		Long: "gainwright attaches to the board of a motor rig over a serial line, keeps what it found, checks wiring,\n" +
			"limits and stop, disturbs the motor in bounded experiments, fits a model, proposes gains with their margins,\n" +
			"pushes and verifies them, and keeps a record. It is never a safety function.",
		SilenceUsage: true, SilenceErrors: true, Args: cobra.NoArgs,
	}
	c := consoleCommand()
	root.RunE = c.RunE
	root.Flags().AddFlagSet(c.Flags())
	root.AddCommand(c, demoCommand(), drillCommand(), portsCommand(), checkCommand(), lookCommand(), dryrunCommand(), faultsCommand(), simCommand(), conformanceCommand(), watchCommand(), fitCommand(), designCommand(),
		marginsCommand(), convertCommand(), reportCommand(), cardCommand(), compareCommand(), recomputeCommand(), exportCommand(), replayCommand(), rehearseCommand(), manCommand(), versionCommand())
	completeFlags(root)
	return root
}

// printJSON prints exactly one object, in which text from outside cannot move a
// terminal's cursor.
func printJSON(w io.Writer, v any) error {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	if err := e.Encode(v); err != nil {
		return err
	}
	_, err := w.Write(plain.JSON(b.Bytes()))
	return err
}

// readJSON reads a file that holds one object into v, with the place of a
// mistake.
func readJSON(path string, v any) error {
	b, err := os.ReadFile(path)
	if err != nil {
		return usage(err)
	}
	if err := json.Unmarshal(b, v); err != nil {
		var syntax *json.SyntaxError
		var typ *json.UnmarshalTypeError
		at := int64(-1)
		switch {
		case errors.As(err, &syntax):
			at = syntax.Offset
		case errors.As(err, &typ):
			at = typ.Offset
		}
		if at >= 0 {
			line, col := place(b, at)
			return usage(fmt.Errorf("%s:%d:%d: %w", path, line, col, err))
		}
		return usage(fmt.Errorf("%s: %w", path, err))
	}
	return nil
}

// place turns an offset into a line and a column, both from 1.
func place(b []byte, at int64) (line, col int) {
	line, col = 1, 1
	for i := int64(0); i < at-1 && i < int64(len(b)); i++ {
		if b[i] == '\n' {
			line, col = line+1, 1
		} else {
			col++
		}
	}
	return line, col
}
