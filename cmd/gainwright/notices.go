package main

import _ "embed"

// notices holds the licence of every module that is linked into the program, and
// of the Go runtime: a binary that is passed on has to carry them.
//
//go:embed notices.txt
var notices string
