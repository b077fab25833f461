package sheet

import (
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

func fleetOf(values []float64) []Member {
	at := time.Date(2020, 1, 1, 0, 0, 0, 0, time.UTC)
	var out []Member
	for i, v := range values {
		out = append(out, Member{Record: fmt.Sprint(i), Start: at, Motor: MotorRecord{KeVsPerRad: ptr(v)}})
		at = at.Add(time.Duration(365.25 * 24 * float64(time.Hour)))
	}
	return out
}

// The eight mass spectrometer readings of the NIST/SEMATECH e-Handbook, section
// 1.3.5.17, of which its tests name 245.57 alone (*from memory*).
func TestFleetOutlierOfTheHandbook(t *testing.T) {
	rows := Fleet(fleetOf([]float64{199.31, 199.53, 200.19, 200.82, 201.92, 201.95, 202.18, 245.57}))
	if len(rows) != 1 || rows[0].Quantity != "Ke" || rows[0].Count != 8 {
		t.Fatalf("%+v", rows)
	}
	r := rows[0]
	if len(r.Outliers) != 1 || r.Outliers[0].Record != "7" {
		t.Errorf("outliers %+v, want the last alone", r.Outliers)
	}
	// By hand: median (200.82+201.92)/2, deviations 0.55 0.55 0.58 0.81 1.18
	// 1.84 2.06 44.2, their median (0.81+1.18)/2.
	if math.Abs(*r.Median-201.37) > 1e-9 || math.Abs(*r.Spread-1.4826*0.995) > 1e-9 {
		t.Errorf("median %g, spread %g", *r.Median, *r.Spread)
	}
}

func TestFleetDrift(t *testing.T) {
	// A line of -0.5 % a year with one wild value: the slope must not follow it.
	rows := Fleet(fleetOf([]float64{0.0400, 0.0398, 0.0396, 0.0900, 0.0392, 0.0390, 0.0388}))
	if d := *rows[0].Drift; math.Abs(d+0.0002) > 1e-9 {
		t.Errorf("drift %g in a year, want -0.0002", d)
	}
	if rows := Fleet(fleetOf([]float64{1, 2})); rows[0].Drift != nil || rows[0].Outliers != nil {
		t.Errorf("two sheets are no trend: %+v", rows[0])
	}
	// Where nearly all agree exactly the one that does not stands out.
	rows = Fleet(fleetOf([]float64{2000, 2000, 2000, 4096, 2000, 2000}))
	if len(rows[0].Outliers) != 1 || rows[0].Outliers[0].Value != 4096 {
		t.Errorf("outliers %+v, want 4096", rows[0].Outliers)
	}
}

func TestFleetReport(t *testing.T) {
	root := t.TempDir()
	for i := range 6 {
		j := exampleJob()
		if i == 4 {
			j.motor.KeVsPerRad = ptr(0.0218)
		}
		j.header.Start = fmt.Sprintf("20%02d-06-01T00:00:00Z", 20+i)
		j.write(t, filepath.Join(root, fmt.Sprintf("a-%d", i)))
	}
	if _, err := List(root, Filter{}); err != nil {
		t.Fatal(err)
	}
	broken, err := Create(filepath.Join(root, "b-9"), testHeader, testClock())
	if err != nil {
		t.Fatal(err)
	}
	_ = broken.Close("refused", "")
	list, err := List(root, Filter{})
	if err != nil {
		t.Fatal(err)
	}
	members, leftOut := Members(list)
	if len(members) != 6 || leftOut != 1 {
		t.Fatalf("%d members, %d left out", len(members), leftOut)
	}
	page := FleetReport(members, leftOut)
	wellFormed(t, page)
	if !strings.Contains(page, "<td>4 0.02180</td>") || !strings.Contains(page, "1 sheets are left out") {
		t.Error("the odd one, or the one left out, is not named")
	}
	wellFormed(t, FleetReport(nil, 0))
}

func TestCompareText(t *testing.T) {
	later := exampleJob().motor
	later.CountsPerTurn, later.KeVsPerRad, later.LoadState, later.RDegC = ptr(4096.0), ptr(0.0218), "bare\x1b[2J", nil
	out := CompareText(Compare(exampleJob().motor, later))
	golden(t, "compare.txt", out)
	sizeOf(t, out)
}
