package main

import (
	"fmt"
	"os"
	"runtime/debug"
	"strings"

	"github.com/spf13/cobra"

	"gainwright/link/serialport"
	"gainwright/protocol"
	"gainwright/safety/rig"
	"gainwright/tune/job"
)

// version is stamped by the linker: -ldflags "-X main.version=1.2.3".
var version = ""

func versionWords() string {
	v := version
	if v == "" {
		v = "development"
		if bi, ok := debug.ReadBuildInfo(); ok {
			for _, s := range bi.Settings {
				if s.Key == "vcs.revision" && len(s.Value) >= 12 {
					v = "development " + s.Value[:12]
				}
			}
		}
	}
	return v
}

func versionCommand() *cobra.Command {
	var licences bool
	c := &cobra.Command{Use: "version [--licenses]", Short: "say which version this is, and what it is built with", Args: cobra.NoArgs,
		Run: func(c *cobra.Command, _ []string) {
			if licences {
				fmt.Fprint(c.OutOrStdout(), notices)
				return
			}
			fmt.Fprintf(c.OutOrStdout(), "gainwright %s, protocol %d\n", versionWords(), protocol.Major)
		}}
	c.Flags().BoolVar(&licences, "licenses", false, "print the licences of everything that is built in")
	return c
}

// portViews lists the ports of this machine for the screens.
func portViews() []job.PortView {
	ports, err := serialport.List()
	if err != nil {
		return []job.PortView{{Note: err.Error()}}
	}
	var out []job.PortView
	memory := portMemory()
	for _, p := range ports {
		note := strings.TrimSpace(usbWords(p) + "  " + memory.words(p))
		out = append(out, job.PortView{Path: p.Path, Name: p.ByID, Product: p.Product, Serial: p.Serial, Note: note})
	}
	return out
}

func usbWords(p serialport.Info) string {
	if !p.USB {
		return ""
	}
	return "USB " + p.VID + ":" + p.PID + " " + p.Manufacturer
}

func portsCommand() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{Use: "ports", Short: "list serial ports; nothing is opened", Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			views := portViews()
			if asJSON {
				return printJSON(c.OutOrStdout(), map[string]any{"ports": views})
			}
			if len(views) == 0 {
				fmt.Fprintln(c.OutOrStdout(), "no serial port found: is the cable in, and the adapter's driver installed? A pseudo-terminal is opened by its path: console --port PATH")
			}
			for _, v := range views {
				fmt.Fprintf(c.OutOrStdout(), "%-24s %s %s %s %s\n", v.Path, v.Name, v.Product, v.Serial, v.Note)
			}
			return nil
		}}
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	return c
}

// readRig reads a rig file; every error has its place.
func readRig(path string) (rig.Rig, []byte, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return rig.Rig{}, nil, usage(err)
	}
	r, err := rig.Parse(path, text)
	return r, text, usage(err)
}

func checkCommand() *cobra.Command {
	var asJSON bool
	var jobFile string
	c := &cobra.Command{Use: "check RIG.toml [--job JOB.toml]", Short: "check a rig file, and a job file for it", Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			r, _, err := readRig(args[0])
			if err != nil {
				return err
			}
			order, err := readOrder(jobFile)
			if err != nil {
				return err
			}
			if order != nil && order.Rig != "" && order.Rig != r.Name {
				return usage(fmt.Errorf("%s is for rig %q, %s is of %q", jobFile, order.Rig, args[0], r.Name))
			}
			e := r.Envelope()
			if asJSON {
				return printJSON(c.OutOrStdout(), map[string]any{"name": r.Name, "hash": r.Hash, "volts_max_V": e.VoltsMax, "speed_max_rad_s": e.SpeedMax,
					"current_max_A": e.CurrentMax, "bus_max_V": e.BusMax, "energy_J": r.Energy()})
			}
			fmt.Fprintf(c.OutOrStdout(), "%s: rig %q, up to %g V, %.0f rpm, %g A, bus %.4g to %.4g V\n", args[0], r.Name, e.VoltsMax, e.SpeedMax.RPM(), e.CurrentMax, e.BusMin, e.BusMax)
			if j := r.Energy(); j > 0 {
				fmt.Fprintf(c.OutOrStdout(), "stored motion at the speed limit: %.3g J\n", j)
			}
			if order != nil {
				fmt.Fprintf(c.OutOrStdout(), "%s: job %q, %d steps\n", jobFile, order.Name, len(order.Steps))
			}
			if e.BusMax > 60 {
				fmt.Fprintln(c.OutOrStdout(), "the bus may pass 60 V: treat it as hazardous by touch; qualified persons and local codes apply")
			}
			return nil
		}}
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	c.Flags().StringVar(&jobFile, "job", "", "job file to be checked as well")
	return c
}
