package main

import (
	"bytes"
	"flag"
	"os"
	"strings"
	"testing"
)

var updateFaults = flag.Bool("update-faults", false, "write testdata/faults.txt anew")

// The table of faults comes out the same, to the millisecond, and as it should be.
func TestFaultTable(t *testing.T) {
	t.Parallel() // it computes while the tests of processes wait
	if testing.Short() {
		t.Skip("eighty jobs")
	}
	const golden = "testdata/faults.txt"
	var out, msg bytes.Buffer
	if code := run([]string{"faults"}, &out, &msg); code != exitDone {
		t.Errorf("exit %d: %s", code, msg.String())
	}
	if *updateFaults {
		if err := os.WriteFile(golden, out.Bytes(), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(golden)
	if err != nil {
		t.Fatal(err)
	}
	if out.String() == string(want) {
		return
	}
	got, was := strings.Split(out.String(), "\n"), strings.Split(string(want), "\n")
	for i := range min(len(got), len(was)) {
		if got[i] != was[i] {
			t.Errorf("line %d of %s:\n   now %s\n   was %s\nwrite it anew with -update-faults where the change is meant", i+1, golden, got[i], was[i])
			return
		}
	}
	t.Errorf("%d lines, %s has %d", len(got), golden, len(was))
}
