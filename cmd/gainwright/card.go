package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"gainwright/tune/sheet"
	"gainwright/tune/sheet/plain"
)

// shown is text of a record fit for a terminal: what could move a cursor is
// written out.
func shown(format string, args ...any) string { return plain.Visible(fmt.Sprintf(format, args...), 0) }

// cardCommand prints the card of a record.
func cardCommand() *cobra.Command {
	var sticker, asJSON bool
	c := &cobra.Command{
		Use: "card SHEET_DIR [--sticker]", Short: "print the card of a record: one page of 80 columns to sign", Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			r, problems, err := openSheet(args[0])
			if err != nil {
				return err
			}
			d := sheet.CardOf(r)
			for _, p := range problems {
				fmt.Fprintln(c.ErrOrStderr(), shown("gainwright: %s", p))
			}
			switch {
			case asJSON:
				return printJSON(c.OutOrStdout(), map[string]any{"card": sheet.Card(d), "sticker": sheet.Sticker(d), "data": d})
			case sticker:
				fmt.Fprintln(c.OutOrStdout(), sheet.Sticker(d))
			default:
				fmt.Fprint(c.OutOrStdout(), sheet.Card(d))
			}
			return nil
		},
	}
	c.Flags().BoolVar(&sticker, "sticker", false, "print the line for the motor instead, at most 40 characters")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	return c
}
