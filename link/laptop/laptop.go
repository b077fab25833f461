// Package laptop reads what the system tells of the computer under the console:
// battery, mains, and whether there is a way to hold off sleep. It decides nothing
// and writes nothing; where a system tells nothing, it says that it does not know.
package laptop

import (
	"io/fs"
	"path"
	"strconv"
	"strings"
)

// State is what the system told.
type State struct {
	System   string   // GOOS
	Battery  *float64 // share that is left, 0 to 1, of all batteries together; nil: none, or not told
	Charging bool     // a battery charges or is full, or mains is on
	HoldOff  string   // command that can hold off sleep; "" if there is none
	Told     bool     // this system tells whether there is one
}

// supplies is where Linux lists batteries and mains (Documentation/ABI/testing/
// sysfs-class-power in its sources), below the root.
const supplies = "sys/class/power_supply"

// inhibitor is what systemd's manual offers to hold off sleep while a command runs
// (systemd-inhibit(1)).
const inhibitor = "systemd-inhibit"

// Reader says where to read: the root of the file system and how a command is
// found by its name.
type Reader struct {
	System string
	Root   fs.FS
	Find   func(name string) (string, error)
}

// Read reads the state now. Only Linux tells; elsewhere nothing is known.
func (r Reader) Read() State {
	s := State{System: r.System}
	if r.System != "linux" {
		return s
	}
	s.Told = true
	if _, err := r.Find(inhibitor); err == nil {
		s.HoldOff = inhibitor
	}
	entries, err := fs.ReadDir(r.Root, supplies)
	if err != nil {
		return s
	}
	sum, n := 0.0, 0
	for _, e := range entries {
		dir := path.Join(supplies, e.Name())
		switch r.word(dir, "type") {
		case "Mains", "USB":
			s.Charging = s.Charging || r.word(dir, "online") == "1"
		case "Battery":
			if r.word(dir, "scope") == "Device" {
				continue // of a mouse or a keyboard
			}
			switch r.word(dir, "status") {
			case "Charging", "Full", "Not charging":
				s.Charging = true
			}
			if c, err := strconv.ParseFloat(r.word(dir, "capacity"), 64); err == nil && c >= 0 && c <= 100 {
				sum, n = sum+c/100, n+1
			}
		}
	}
	if n > 0 {
		share := sum / float64(n)
		s.Battery = &share
	}
	return s
}

func (r Reader) word(dir, name string) string {
	b, err := fs.ReadFile(r.Root, path.Join(dir, name))
	if err != nil {
		return ""
	}
	return strings.TrimSpace(string(b))
}
