package main

import (
	"fmt"
	"os"

	"github.com/spf13/cobra"

	"gainwright/tui"
)

// handFlag adds the setting for which hand is free for the keys.
func (f *consoleFlags) handFlag(c *cobra.Command) {
	c.Flags().StringVar(&f.hand, "hand", "", "which hand is free for the keys: left, right or both; without it "+tui.HandVariable+" says so")
}

// surroundings are the variables of the environment, flags ahead of them.
func (f consoleFlags) surroundings(name string) string {
	if name == tui.HandVariable && f.hand != "" {
		return f.hand
	}
	return os.Getenv(name)
}

// freeHand reads the setting.
func (f consoleFlags) freeHand() (tui.Hand, error) {
	name := f.surroundings(tui.HandVariable)
	h, ok := tui.HandNamed(name)
	if !ok {
		return h, usage(fmt.Errorf("%q is no hand: left, right or both, in --hand or %s", name, tui.HandVariable))
	}
	return h, nil
}
