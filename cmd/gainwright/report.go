package main

import (
	"errors"
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"gainwright/tune/sheet"
)

// reportCommand checks a record and shows it.
func reportCommand() *cobra.Command {
	var html, printed string
	var check, asJSON bool
	c := &cobra.Command{
		Use: "report SHEET_DIR [--html FILE] [--check]", Short: "show a record, or check whether it was changed", Args: cobra.ExactArgs(1),
		Long: "report writes the whole record as one HTML page that needs nothing from outside (--html FILE, - for standard\n" +
			"output), or checks every byte of it (--check): it says whether and where the record was changed, cut or\n" +
			"re-ordered. With --hash it also holds the digits printed on a card against the record. Without --html and\n" +
			"--check it lists the entries. It exits with 1 where a problem was found.",
		RunE: func(c *cobra.Command, args []string) error {
			if html != "" && asJSON && html == "-" {
				return usage(errors.New("--html - and --json both want standard output: give the page a file name"))
			}
			r, _, err := openSheet(args[0])
			if err != nil {
				return err
			}
			problems, sum := sheet.Check(args[0])
			if html != "" {
				if err := writeNew(c, html, sheet.Report(args[0])); err != nil {
					return err
				}
			}
			found := len(problems)
			unknown := printed != "" && !sum.Has(printed)
			if asJSON {
				if err := printJSON(c.OutOrStdout(), reportJSON(args[0], problems, sum, printed)); err != nil {
					return err
				}
			} else if html != "-" {
				printCheck(c, problems, sum)
				if printed != "" {
					fmt.Fprintf(c.OutOrStdout(), "hash on the card: %s\n", map[bool]string{true: "NOT KNOWN to this record", false: "known to this record"}[unknown])
				}
				if !check && html == "" {
					printEntries(c, r)
				}
				if html != "" {
					fmt.Fprintf(c.OutOrStdout(), "page: %s\n", html)
				}
			}
			if found > 0 || unknown {
				return quiet(exitFailed)
			}
			return nil
		},
	}
	c.Flags().StringVar(&html, "html", "", "write the report as one HTML page into this new file; - for standard output")
	c.Flags().BoolVar(&check, "check", false, "only check the record")
	c.Flags().StringVar(&printed, "hash", "", "digits printed on a card, at least 8")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	return c
}

// writeNew writes a file that must not be there yet, or to standard output for
// "-". Nothing is ever overwritten.
func writeNew(c *cobra.Command, path, text string) error {
	if path == "-" {
		_, err := fmt.Fprint(c.OutOrStdout(), text)
		return err
	}
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if errors.Is(err, os.ErrExist) {
		return usage(fmt.Errorf("%s is there already: nothing is overwritten; choose another name", path))
	}
	if err != nil {
		return usage(err)
	}
	_, err = f.WriteString(text)
	if e := f.Close(); err == nil {
		err = e
	}
	if err != nil {
		return &exitError{exitFailed, err}
	}
	return nil
}

func reportJSON(dir string, problems []sheet.Problem, sum sheet.Summary, printed string) map[string]any {
	if problems == nil {
		problems = []sheet.Problem{}
	}
	v := map[string]any{"sheet": dir, "record": sheet.RecordName(dir), "header": sum.Header, "entries": sum.Entries, "closed": sum.Closed,
		"outcome": sum.Outcome, "chain": sum.Chain, "says": sum.Says, "problems": problems, "ok": len(problems) == 0}
	if printed != "" {
		v["hash_known"] = sum.Has(printed)
	}
	return v
}

func printCheck(c *cobra.Command, problems []sheet.Problem, sum sheet.Summary) {
	out := c.OutOrStdout()
	h := sum.Header
	outcome := sum.Outcome
	if outcome == "" {
		outcome = "not finished"
	}
	fmt.Fprint(out, sheet.Wrap(fmt.Sprintf("rig %s, board %s, begun %s by %s: %s", orWord(h.Rig), orWord(h.BoardID), orWord(h.Start), orWord(h.Operator), outcome), ""))
	if h.Simulated {
		fmt.Fprintln(out, "SIMULATED RIG: nothing in it was measured on a motor")
	}
	for _, p := range problems {
		fmt.Fprint(out, sheet.Wrap("PROBLEM "+p.String(), ""))
	}
	if len(problems) == 0 {
		fmt.Fprintf(out, "%d entries, all as they were entered\nchain %s\n", sum.Entries, sum.Chain)
	} else {
		fmt.Fprintf(out, "%d entries, %d problems\n", sum.Entries, len(problems))
	}
	fmt.Fprint(out, sheet.Wrap(sum.Says, ""))
}

func orWord(s string) string {
	if s == "" {
		return "not given"
	}
	return s
}

func printEntries(c *cobra.Command, r *sheet.Reader) {
	fmt.Fprintln(c.OutOrStdout())
	for _, l := range r.Lines() {
		fmt.Fprintln(c.OutOrStdout(), shown("%s  %9d  %s", l.Time.Format("15:04:05"), l.Bytes, l.File))
	}
}
