package main

import (
	_ "embed"

	"gainwright/link/simrig"
)

// demoBoard is the rig of the demo.
//
//go:embed demo.toml
var demoBoard []byte

func demoConfig(path string) (simrig.Config, error) {
	if path != "" {
		return simrig.Load(path)
	}
	return simrig.Parse("demo.toml", demoBoard)
}
