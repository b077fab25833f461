//go:build unix && !linux && !(darwin && cgo)

package serialport

import "path/filepath"

// list knows names only: vendor and product would need cgo on macOS. The cu
// devices are the ones that do not wait for a carrier.
func list() ([]Info, error) {
	var ports []Info
	for _, pattern := range []string{"/dev/cu.*", "/dev/cuaU[0-9]*", "/dev/cuau[0-9]*"} {
		paths, err := filepath.Glob(pattern)
		if err != nil {
			return nil, err
		}
		for _, p := range paths {
			if filepath.Ext(p) != ".lock" && filepath.Ext(p) != ".init" { // settings of FreeBSD, not ports
				ports = append(ports, Info{Path: p})
			}
		}
	}
	return ports, nil
}
