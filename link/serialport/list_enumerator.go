//go:build windows || (darwin && cgo)

package serialport

import "go.bug.st/serial/enumerator"

// list asks the system's own register of devices. On macOS it needs cgo.
func list() ([]Info, error) {
	found, err := enumerator.GetDetailedPortsList()
	if err != nil {
		return nil, err
	}
	var ports []Info
	for _, d := range found {
		ports = append(ports, Info{
			Path: d.Name, USB: d.IsUSB, VID: d.VID, PID: d.PID,
			Serial: d.SerialNumber, Manufacturer: d.Manufacturer, Product: d.Product,
		})
	}
	return ports, nil
}
