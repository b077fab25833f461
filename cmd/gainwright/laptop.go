package main

import (
	"os"
	"os/exec"
	"runtime"

	"gainwright/link/laptop"
	"gainwright/tune/job"
)

// laptopNow reads battery and sleep of this computer.
func laptopNow() job.Laptop {
	s := laptop.Reader{System: runtime.GOOS, Root: os.DirFS("/"), Find: exec.LookPath}.Read()
	return job.Laptop{System: s.System, Battery: s.Battery, Charging: s.Charging, HoldOff: s.HoldOff, Told: s.Told}
}
