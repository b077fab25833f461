package serialport

import (
	"sort"
	"strings"
)

// Info describes a port that exists. Unknown fields are empty.
type Info struct {
	Path         string // what Open takes
	ByID         string // a name that stays the same when ports are renumbered
	USB          bool
	VID, PID     string // four hex digits, lower case
	Serial       string
	Manufacturer string
	Product      string
}

// List returns the serial ports of this system, sorted, USB ports first. It
// opens none of them: opening may restart a board. Pseudo-terminals are never
// listed; Open takes their path.
func List() ([]Info, error) {
	ports, err := list()
	for i := range ports {
		p := &ports[i]
		p.VID, p.PID = strings.ToLower(p.VID), strings.ToLower(p.PID)
		for _, s := range []*string{&p.Serial, &p.Manufacturer, &p.Product} {
			*s = printable(*s) // text from a device is data
		}
	}
	sort.SliceStable(ports, func(i, j int) bool {
		if ports[i].USB != ports[j].USB {
			return ports[i].USB
		}
		return lessNumbered(ports[i].Path, ports[j].Path)
	})
	return ports, err
}

// lessNumbered sorts ttyUSB2 before ttyUSB10.
func lessNumbered(a, b string) bool {
	ah, an := splitNumber(a)
	bh, bn := splitNumber(b)
	if ah != bh {
		return ah < bh
	}
	if len(an) != len(bn) {
		return len(an) < len(bn)
	}
	return an < bn
}

func splitNumber(s string) (head, number string) {
	head = strings.TrimRight(s, "0123456789")
	return head, strings.TrimLeft(s[len(head):], "0")
}
