package main

import (
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"gainwright/tui"
	"gainwright/tune/job"
)

// manCommand prints the manual page. It is made from the same tables as the help
// and the keys, so it cannot fall behind them, and holds no date: the same source
// gives the same page.
func manCommand() *cobra.Command {
	return &cobra.Command{Use: "man", Short: "print the manual page (man -l reads it)", Args: cobra.NoArgs,
		Example: "gainwright man > gainwright.1",
		RunE: func(c *cobra.Command, _ []string) error {
			return writeMan(c.OutOrStdout(), c.Root())
		}}
}

// writeMan writes the page in the macros of man(7).
func writeMan(w io.Writer, root *cobra.Command) error {
	var b strings.Builder
	fmt.Fprintf(&b, ".TH GAINWRIGHT 1 \"\" \"gainwright %s\" \"User commands\"\n", roff(version))
	fmt.Fprintf(&b, ".SH NAME\ngainwright \\- %s\n", roff(root.Short))
	b.WriteString(".SH SYNOPSIS\n.B gainwright\n[\\fICOMMAND\\fR] [\\fIFLAGS\\fR]\n")
	fmt.Fprintf(&b, ".SH DESCRIPTION\n%s\n", roff(root.Long))
	b.WriteString(".SH COMMANDS\n")
	for _, c := range root.Commands() {
		if c.Hidden || c.Name() == "help" {
			continue
		}
		fmt.Fprintf(&b, ".SS %s\n", roff(c.UseLine()))
		text := c.Long
		if text == "" {
			text = strings.ToUpper(c.Short[:1]) + c.Short[1:] + "."
		}
		b.WriteString(roff(text) + "\n")
		c.LocalFlags().VisitAll(func(f *pflag.Flag) {
			if f.Hidden || f.Name == "help" {
				return
			}
			fmt.Fprintf(&b, ".TP\n.B %s\n%s", roff("--"+f.Name), roff(f.Usage))
			if f.DefValue != "" && f.DefValue != "false" && f.DefValue != "[]" && f.DefValue != "0" {
				fmt.Fprintf(&b, " (%s)", roff(f.DefValue))
			}
			b.WriteByte('\n')
		})
		if c.Example != "" {
			fmt.Fprintf(&b, ".PP\n.nf\n%s\n.fi\n", roff(c.Example))
		}
	}
	b.WriteString(".SH KEYS\n")
	for _, k := range tui.KeyTable() {
		fmt.Fprintf(&b, ".TP\n.B %s\n%s (%s)\n", roff(k.Keys), roff(k.Does), roff(k.When))
	}
	b.WriteString(".SH NUMBERS\nWhat the limiter says, by its number. From 700 on, the job's own refusals say cause and remedy where they stand.\n")
	for _, n := range job.Numbers() {
		fmt.Fprintf(&b, ".TP\n.B %d\n%s", n.Number, roff(n.Words))
		if n.Do != "" {
			fmt.Fprintf(&b, ". %s", roff(strings.ToUpper(n.Do[:1])+n.Do[1:]))
		}
		b.WriteString(".\n")
	}
	b.WriteString(`.SH EXIT STATUS
.TP
.B 0
done
.TP
.B 1
failed
.TP
.B 2
usage or bad input
.TP
.B 3
tripped or stopped
.TP
.B 4
refused: the tool will not stand behind an answer
.SH NOTES
The program is never a safety function and claims no performance level. Use the stop devices, guards and isolation of the rig, and follow local codes.
`)
	_, err := io.WriteString(w, b.String())
	return err
}

// roff makes text harmless to the formatter.
func roff(s string) string {
	s = strings.NewReplacer(`\`, `\e`, "-", `\-`).Replace(s)
	lines := strings.Split(s, "\n")
	for i, l := range lines {
		if strings.HasPrefix(l, ".") || strings.HasPrefix(l, "'") {
			lines[i] = `\&` + l
		}
	}
	return strings.Join(lines, "\n")
}
