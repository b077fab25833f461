package main

import (
	"fmt"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"gainwright/link/simrig"
	"gainwright/tune/bench"
)

// drillCommand opens the console on a simulated rig on which something goes wrong.
func drillCommand() *cobra.Command {
	var f consoleFlags
	var id string
	var seed uint64
	c := &cobra.Command{
		Use: "drill [--scene F3] [--seed N]", Short: "practise failures on a simulated rig", Args: cobra.NoArgs,
		Long: "drill opens the console on the built-in simulated rig, and something goes wrong there without a word: from the\n" +
			"start, or in the first run behind the checks. Do the job as you would. When you leave, it says what it was, what\n" +
			"stopped the motor and how soon, and what you did and how fast; the record keeps it. Nothing real moves.\n\nScenes:\n" + sceneLines(),
		RunE: func(c *cobra.Command, _ []string) error {
			if !c.Flags().Changed("seed") {
				seed = uint64(time.Now().UnixNano())
			}
			scene, err := bench.SceneOf(id, seed)
			if err != nil {
				return usage(err)
			}
			var d *bench.Drill
			err = openDemo(f, demoOn{}, func(cfg *simrig.Config, o *bench.Options) func(*bench.Served, *bench.Live) {
				d = bench.NewDrill(scene, seed, cfg, o)
				return d.Serve
			})
			if d != nil {
				for _, l := range d.Record().Words() {
					fmt.Fprintln(c.OutOrStdout(), l)
				}
			}
			return err
		},
	}
	c.Flags().StringVar(&id, "scene", "", "F1 to F13; without it one is drawn")
	c.Flags().Uint64Var(&seed, "seed", 0, "start of the random numbers; without it the clock")
	f.handFlag(c)
	c.Flags().StringVar(&f.out, "out", "", "folder for the record; without it a temporary one")
	return c
}

func sceneLines() string {
	var b strings.Builder
	for _, s := range bench.Scenes() {
		fmt.Fprintf(&b, "  %-4s %s\n", s.ID, s.Title)
	}
	return b.String()
}
