package serialport

import (
	"os"
	"path/filepath"
	"strings"
)

func list() ([]Info, error) { return listUnder("/") }

// listUnder reads what the kernel says about its terminal devices in
// root/sys/class/tty and the stable names in root/dev/serial/by-id. A terminal
// without a device behind it is a virtual console or a pseudo-terminal. The
// serial library would open each built-in port instead, to see whether it is
// there.
func listUnder(root string) ([]Info, error) {
	class := filepath.Join(root, "sys/class/tty")
	entries, err := os.ReadDir(class)
	if err != nil {
		return nil, err
	}
	byID := stableNames(filepath.Join(root, "dev/serial/by-id"))
	var ports []Info
	for _, e := range entries {
		dir := filepath.Join(class, e.Name())
		device, err := filepath.EvalSymlinks(filepath.Join(dir, "device"))
		if err != nil || isEmptySlot(dir) {
			continue
		}
		p := Info{Path: "/dev/" + e.Name(), ByID: byID[e.Name()]}
		describeUSB(&p, device)
		ports = append(ports, p)
	}
	return ports, nil
}

// isEmptySlot reports whether a built-in port is only a place where one could
// be: its type is then 0 (PORT_UNKNOWN in linux/serial.h).
func isEmptySlot(dir string) bool {
	kind, err := os.ReadFile(filepath.Join(dir, "type"))
	return err == nil && strings.TrimSpace(string(kind)) == "0"
}

// describeUSB walks up from the device to the USB device it belongs to, if any.
func describeUSB(p *Info, device string) {
	for range 8 {
		if vid := attribute(device, "idVendor"); vid != "" {
			p.USB = true
			p.VID, p.PID = vid, attribute(device, "idProduct")
			p.Serial = attribute(device, "serial")
			p.Manufacturer, p.Product = attribute(device, "manufacturer"), attribute(device, "product")
			return
		}
		device = filepath.Dir(device)
	}
}

func attribute(dir, name string) string {
	text, err := os.ReadFile(filepath.Join(dir, name))
	if err != nil {
		return ""
	}
	return strings.TrimSpace(string(text))
}

// stableNames maps device names to the links that udev makes from vendor,
// product and serial number.
func stableNames(dir string) map[string]string {
	names := map[string]string{}
	links, _ := os.ReadDir(dir) // absent where nothing is plugged in
	for _, l := range links {
		if to, err := os.Readlink(filepath.Join(dir, l.Name())); err == nil {
			names[filepath.Base(to)] = "/dev/serial/by-id/" + l.Name()
		}
	}
	return names
}
