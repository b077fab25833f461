package main

import (
	"bufio"
	"io"
	"os"
	"os/signal"
	"syscall"

	"gainwright/tune/bench"
)

// serveUntil serves until a signal or the word quit.
func serveUntil(sim *bench.Served, in io.Reader) error {
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
			case "quit":
				return nil
			}
		}
	}
}
