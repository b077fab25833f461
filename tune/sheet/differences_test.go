package sheet

import (
	"errors"
	"os"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestDifferences(t *testing.T) {
	left := Snapshot{
		BoardID: "7A31-22", Firmware: "fw 1.2", Running: []byte(`{"form":"parallel","kp":0.0782,"ki":0.888,"u_max":null}`),
		Limits: []Quantity{{Name: "current", Value: ptr(5.0), Unit: "A"}}, BusV: ptr(24.0), BootCount: ptr(7),
	}
	tests := []struct {
		name   string
		change func(*Snapshot)
		want   []Difference
	}{
		{"untouched", func(s *Snapshot) { s.BusV, s.BootCount = ptr(23.7), ptr(9) }, nil},
		{"a gain by one bit", func(s *Snapshot) { s.Running = []byte(`{"kp":0.07820000000000002,"ki":0.888,"form":"parallel"}`) },
			[]Difference{{"running kp", "0.0782", "0.07820000000000002"}}},
		{"a gain gone", func(s *Snapshot) { s.Running = []byte(`{"kp":0.0782,"form":"parallel"}`) }, []Difference{{"running ki", "0.888", absent}}},
		{"stored now", func(s *Snapshot) { s.Stored = []byte(`{"kp":1}`) }, []Difference{{"stored kp", absent, "1"}}},
		{"a limit raised", func(s *Snapshot) { s.Limits = []Quantity{{Name: "current", Value: ptr(8.0), Unit: "A"}} }, []Difference{{"limit current", "5 A", "8 A"}}},
		{"another board", func(s *Snapshot) { s.BoardID, s.Firmware = "9B", "fw 1.3" }, []Difference{{"board", "7A31-22", "9B"}, {"firmware", "fw 1.2", "fw 1.3"}}},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			found := left
			tt.change(&found)
			if diff := cmp.Diff(tt.want, Differences(left, found)); diff != "" {
				t.Error(diff)
			}
		})
	}
}

func TestLastLeft(t *testing.T) {
	root := t.TempDir()
	old, newer := exampleJob(), exampleJob()
	old.header.Start, newer.header.Start = "2023-01-01T00:00:00Z", "2024-01-01T00:00:00Z"
	old.write(t, filepath.Join(root, "old"))
	newer.write(t, filepath.Join(root, "newer"))
	// The newest of all was broken off; its header is that of testHeader, 2025.
	if _, err := Create(filepath.Join(root, "broken"), testHeader, testClock()); err != nil {
		t.Fatal(err)
	}
	s, l, err := LastLeft(root, Filter{Rig: testHeader.Rig})
	if err != nil || filepath.Base(l.Dir) != "newer" || s.BoardID != testHeader.BoardID {
		t.Fatalf("%s, board %q, %v", l.Dir, s.BoardID, err)
	}
	// A damaged one must not be taken for what was left.
	r, _ := Open(l.Dir)
	line, _ := r.Last(KindAsLeft, "")
	if err := os.WriteFile(filepath.Join(l.Dir, line.File), []byte(`{"board_id":"forged"}`), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, l, err = LastLeft(root, Filter{}); err != nil || filepath.Base(l.Dir) != "old" {
		t.Errorf("%s, %v", l.Dir, err)
	}
	if _, _, err := LastLeft(root, Filter{Rig: "FAN-1"}); !errors.Is(err, ErrNoEntry) {
		t.Errorf("another rig: %v", err)
	}
}

// The limits of a session end with a restart of the board: they are compared only
// where it kept running. The boot count itself is no difference.
func TestDifferencesAfterARestart(t *testing.T) {
	left := Snapshot{BootCount: ptr(42), Identity: map[string]string{"boot": "42 power"}, Limits: []Quantity{{Name: "wmax", Value: ptr(335.0), Unit: "rad/s"}}}
	found := left
	found.Limits = []Quantity{{Name: "wmax", Value: ptr(502.5), Unit: "rad/s"}}
	if d := Differences(left, found); len(d) != 1 || d[0].What != "limit wmax" {
		t.Errorf("without a restart: %v", d)
	}
	found.BootCount, found.Identity = ptr(43), map[string]string{"boot": "43 power"}
	if d := Differences(left, found); len(d) != 0 {
		t.Errorf("after a restart: %v", d)
	}
}

// A board's words count where the law beside them is not known.
func TestDifferencesOfWords(t *testing.T) {
	left := Snapshot{Running: []byte(`{"note":"integer gains","words":{"kp":"00000010","ki":"00000020"}}`)}
	found := Snapshot{Running: []byte(`{"note":"integer gains","words":{"kp":"00000011","ki":"00000020"}}`)}
	if d := Differences(left, found); len(d) != 1 || d[0].What != "running word kp" || d[0].New != "00000011" {
		t.Errorf("%v", d)
	}
}
