package sheet

import (
	"flag"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"gainwright/tune/sheet/plain"
	"github.com/google/go-cmp/cmp"
)

var update = flag.Bool("update", false, "write the golden files again")

func golden(t *testing.T, name, got string) {
	t.Helper()
	path := filepath.Join("testdata", name)
	if *update {
		if err := os.WriteFile(path, []byte(got), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(string(want), got); diff != "" {
		t.Errorf("%s (-want +got):\n%s", name, diff)
	}
}

// withoutHash leaves out the digits that change with every change of a record's
// form; TestCardHash looks at them.
func withoutHash(card string) string {
	i := strings.Index(card, "hash   ")
	return card[:i+7] + "................" + card[i+23:]
}

func TestCard(t *testing.T) {
	r, problems := Open(exampleJob().write(t, exampleDir(t, 192)))
	if len(problems) > 0 {
		t.Fatal(problems)
	}
	card := Card(CardOf(r))
	golden(t, "card.txt", withoutHash(card))
	sizeOf(t, card)
}

func TestCardHash(t *testing.T) {
	dir := exampleJob().write(t, exampleDir(t, 192))
	r, _ := Open(dir)
	card := Card(CardOf(r))
	i := strings.Index(card, "hash   ")
	printed := card[i+7 : i+23]
	if _, sum := Check(dir); !sum.Has(printed) {
		t.Errorf("a check does not know the card's hash %q", printed)
	}
}

// A box is ticked only for what was seen.
func TestCardTicksOnlyAfterPowerCycle(t *testing.T) {
	for _, tt := range []struct {
		store StoreRecord
		want  string
	}{
		{StoreRecord{Stored: ptr(true), PowerCycled: ptr(true), Identical: ptr(true)}, "power-cycle [x]"},
		{StoreRecord{Stored: ptr(true), PowerCycled: ptr(false), Identical: ptr(true)}, "power-cycle [ ]"},
		{StoreRecord{Stored: ptr(true), PowerCycled: ptr(true), Identical: ptr(false)}, "power-cycle [ ]"},
		{StoreRecord{Stored: ptr(true)}, "power-cycle [ ]"},
	} {
		dir := filepath.Join(t.TempDir(), "job")
		s, err := Create(dir, testHeader, testClock())
		if err != nil {
			t.Fatal(err)
		}
		if _, err := s.Entry(KindStore, "gains", tt.store); err != nil {
			t.Fatal(err)
		}
		if err := s.Close("accepted", ""); err != nil {
			t.Fatal(err)
		}
		r, _ := Open(dir)
		if card := Card(CardOf(r)); !strings.Contains(card, tt.want) {
			t.Errorf("%s is missing:\n%s", tt.want, card)
		}
	}
}

// A card of which nothing is known must not show a single figure as 0.
func TestCardUnknown(t *testing.T) {
	card := Card(CardData{})
	golden(t, "card-empty.txt", card)
	sizeOf(t, card)
	if strings.ContainsAny(card, "0123456789") {
		t.Errorf("a figure on a card of which nothing is known:\n%s", card)
	}
}

func TestCardHostile(t *testing.T) {
	evil := "\x1b[2J<script>\r\n\u202e\xff" + strings.Repeat("W", 10_000)
	d := CardData{
		Record: evil, Rig: evil, BoardID: evil, Firmware: evil, Operator: evil, Start: evil, Outcome: evil, Reason: evil, LoadState: evil,
		Nameplate: NameplateRecord{RigFile: evil, MotorType: evil, MotorSerial: evil, Gear: evil, NextCheck: evil, Absent: []string{evil, evil}},
		Found:     CardColumn{Form: evil}, Model: CardModel{Verdict: evil}, Hash: evil, OvershootTarget: evil,
		Checks: []CardCheck{{Name: evil, Note: evil}}, Limits: []Quantity{{Name: evil, Value: ptr(1.0), Unit: evil}},
	}
	for range 200 {
		d.Remarks = append(d.Remarks, evil)
		d.Limits = append(d.Limits, d.Limits[0])
		d.Checks = append(d.Checks, d.Checks[0])
	}
	for _, out := range []string{Card(d), Sticker(d) + "\n"} {
		sizeOf(t, out)
		if !plain.Clean(out) || strings.Contains(out, "\r") {
			t.Errorf("raw text on the card:\n%q", out)
		}
	}
	if !strings.Contains(Card(d), "more") {
		t.Error("what was left out is not counted")
	}
}

func sizeOf(t *testing.T, card string) {
	t.Helper()
	lines := strings.Split(strings.TrimSuffix(card, "\n"), "\n")
	if len(lines) > cardLines {
		t.Errorf("%d lines", len(lines))
	}
	for _, l := range lines {
		if w := plain.Width(l); w > cardColumns {
			t.Errorf("%d columns: %s", w, l)
		}
	}
}

func TestSticker(t *testing.T) {
	tests := []struct {
		name string
		data CardData
		want string
	}{
		{"tuned", CardData{Rig: "PUMP-3", Start: "2025-11-04T10:12:00+01:00", Record: "0192", Outcome: "accepted"}, "PUMP-3 tuned 2025-11-04 rec 0192"},
		{"left alone", CardData{Rig: "PUMP-3", Start: "2025-11-04T10:12:00+01:00", Record: "k3f9q2xx", Outcome: "no-adjustment"}, "PUMP-3 checked 2025-11-04 rec k3f9q2xx"},
		{"refused", CardData{Rig: "PUMP-3", Start: "2025-11-04", Record: "k3f9q2xx", Outcome: "refused"}, "PUMP-3 not tuned 2025-11-04 rec k3f9q2xx"},
		{"simulated", CardData{Rig: "PUMP-3", Start: "2025-11-04", Record: "k3f9q2xx", Outcome: "accepted", Simulated: true}, "PUMP-3 simulated 2025-11-04 rec k3f9q2xx"},
		{"name that fits without a word", CardData{Rig: "benchtop", Start: "2025-11-04", Record: "k3f9q2xx", Outcome: "refused"}, "benchtop not tuned 2025-11-04 k3f9q2xx"},
		{"long name", CardData{Rig: strings.Repeat("PUMP", 20), Start: "2025-11-04", Record: "0192", Outcome: "accepted"}, "PUMPPUMPPUMP.. tuned 2025-11-04 rec 0192"},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			got := Sticker(tt.data)
			if got != tt.want || plain.Width(got) > 40 {
				t.Errorf("%d columns %q, want %q", plain.Width(got), got, tt.want)
			}
		})
	}
}

func TestSignificant(t *testing.T) {
	tests := []struct {
		x    float64
		want string
	}{
		{0.0782, "0.0782"}, {2.2, "2.20"}, {9.996, "10.0"}, {0.09996, "0.100"}, {335.1, "335"}, {3200.4, "3200"},
		{123456, "123000"}, {-0.5, "-0.500"}, {1.6e-5, "1.60e-05"}, {0, "0"},
	}
	for _, tt := range tests {
		if got := significant(tt.x, 3); got != tt.want {
			t.Errorf("%v shows as %s, want %s", tt.x, got, tt.want)
		}
	}
}
