// Command floor does only what no program can leave out between a key and a
// stop: it reads a byte from its terminal and writes a byte to a port.
package main

import (
	"os"

	"golang.org/x/term"
)

var sink float64

func main() {
	if os.Args[1] == "busy" { // loads a core
		for x := 1.0; ; x *= 1.0000001 {
			sink = x
		}
	}
	port, err := os.OpenFile(os.Args[1], os.O_RDWR, 0)
	if err != nil {
		panic(err)
	}
	if _, err := term.MakeRaw(int(port.Fd())); err != nil {
		panic(err)
	}
	if _, err := term.MakeRaw(int(os.Stdin.Fd())); err != nil {
		panic(err)
	}
	go func() {
		buf := make([]byte, 4096)
		for {
			if _, err := port.Read(buf); err != nil {
				return
			}
		}
	}()
	os.Stdout.WriteString("ready\n")
	var b [16]byte
	for {
		n, err := os.Stdin.Read(b[:])
		if err != nil {
			return
		}
		for range n {
			port.Write([]byte{0x18})
		}
	}
}
