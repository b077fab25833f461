package main

import (
	"encoding/json"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"time"

	"gainwright/link/serialport"
	"gainwright/tune/sheet"
)

// seenBoard is a board that was seen on a port.
type seenBoard struct {
	Port  string    `json:"port"` // its name that stays, else its path
	Board string    `json:"board"`
	Last  time.Time `json:"last"`
}

// seenMax bounds the memory; the board that was not seen for longest goes first.
const seenMax = 100

// boardMemory is which board was last seen on which port. It is a convenience: a
// file that cannot be read or written is no reason to stop.
type boardMemory struct{ file string }

func portMemory() boardMemory {
	data, err := sheet.DataDir(runtime.GOOS, os.Getenv)
	if err != nil {
		return boardMemory{}
	}
	return boardMemory{filepath.Join(filepath.Dir(data), "ports.json")}
}

func (m boardMemory) load() (seen []seenBoard) {
	if m.file == "" {
		return nil
	}
	if b, err := os.ReadFile(m.file); err == nil {
		_ = json.Unmarshal(b, &seen)
	}
	return seen
}

// keep notes that a board was seen on a port.
func (m boardMemory) keep(path, board string) {
	if m.file == "" || strings.HasPrefix(path, "/dev/pts/") { // a pseudo-terminal is another thing each time
		return
	}
	name := path
	if ports, err := serialport.List(); err == nil {
		for _, p := range ports {
			if p.Path == path {
				name = stableName(p)
			}
		}
	}
	seen := slices.DeleteFunc(m.load(), func(s seenBoard) bool { return s.Port == name })
	seen = append([]seenBoard{{Port: name, Board: board, Last: time.Now().UTC().Truncate(time.Second)}}, seen...)
	if len(seen) > seenMax {
		seen = seen[:seenMax]
	}
	b, err := json.MarshalIndent(seen, "", "  ")
	if err != nil || os.MkdirAll(filepath.Dir(m.file), 0o755) != nil {
		return
	}
	part := m.file + ".part"
	if os.WriteFile(part, append(b, '\n'), 0o644) == nil {
		_ = os.Rename(part, m.file)
	}
}

// stableName is what stays the same when ports are numbered anew: its name by id,
// else maker, product and serial number, else its path.
func stableName(p serialport.Info) string {
	switch {
	case p.ByID != "":
		return p.ByID
	case p.Serial != "":
		return p.VID + ":" + p.PID + ":" + p.Serial
	}
	return p.Path
}

// words says which board was last seen on a port, "" if none.
func (m boardMemory) words(p serialport.Info) string {
	for _, s := range m.load() {
		if s.Port == stableName(p) {
			return "board " + s.Board + " was here on " + s.Last.Format("2006-01-02")
		}
	}
	return ""
}
