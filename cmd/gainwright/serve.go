package main

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"os"
	"os/signal"
	"syscall"

	"gainwright/link/simrig"
	"gainwright/tune/bench"
)

// serveUntil serves until a signal or the word quit.
func serveUntil(sim *bench.Served, in io.Reader, out io.Writer) error {
	signals := make(chan os.Signal, 1)
	signal.Notify(signals, os.Interrupt, syscall.SIGTERM, syscall.SIGHUP)
	defer signal.Stop(signals)
	words := make(chan string)
	go func() {
		s := bufio.NewScanner(in)
		for s.Scan() {
			words <- s.Text()
		}
	}()
	for {
		select {
		case <-signals:
			return nil
		case w := <-words:
			switch w {
			case "turn":
				sim.Hand()
			case "power":
				sim.Cycle()
			case "state":
				sim.Rig(func(r *simrig.Rig) {
					fmt.Fprintf(out, "powered %v speed %.3f rad/s turns %.3f\n", r.Powered(), r.Speed(), r.Angle()/(2*math.Pi))
				})
			case "quit":
				return nil
			}
		}
	}
}
