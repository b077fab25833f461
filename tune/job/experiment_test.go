package job

import (
	"strings"
	"testing"

	"gainwright/tune/identify"
	"gainwright/tune/sheet"
)

// A line that loses more the more the drive is on is said; one that loses alike at
// rest is not laid at the drive's door.
func TestLinkErrorsAgainstTheDrive(t *testing.T) {
	for _, c := range []struct {
		rest, driven float64
		said         bool
	}{{0, 0, false}, {0, 6, true}, {5, 6, false}, {1, 12, true}} {
		set := ExperimentSettings{Numbers: map[string]float64{"rest_bad": c.rest, "rest_lines": 200}}
		for i, key := range []string{"run1_level01_", "run1_level02_"} {
			set.Numbers[key+"volts"], set.Numbers[key+"lines"] = float64(2+4*i), 200
			set.Numbers[key+"bad"] = c.driven * float64(i)
		}
		rec := sheet.ExperimentRecord{Verdict: string(identify.Believed)}
		linkErrors(set, &rec)
		if said := rec.Verdict != string(identify.Believed); said != c.said {
			t.Errorf("%+v: %s %v", c, rec.Verdict, rec.Reasons)
		}
		if v, _, _ := paramOf(rec, "lines lost, worst level"); v < 100*c.driven/200-1e-9 {
			t.Errorf("%+v: worst level %.3g %%", c, v)
		}
	}
}

// Methods that differ by more than their ± and than what repeats differ by are
// named, with how far; those that differ by less are not.
func TestMethodsDisagree(t *testing.T) {
	rec := sheet.ExperimentRecord{Verdict: string(identify.Believed)}
	compareMethods("gain", []said{{"step test", 20, 0.05}, {"relay", 20.2, 0.3}, {"staircase", 20.3, 0.02}}, 1e-3, &rec)
	if rec.Verdict != string(identify.Believed) {
		t.Errorf("1.5 %% apart: %v", rec.Reasons)
	}
	compareMethods("gain", []said{{"step test", 20, 0.05}, {"relay", 21, 1}, {"frequency", 23, 0.1}}, 1e-3, &rec)
	if rec.Verdict != string(identify.Care) || !strings.Contains(rec.Reasons[0], "step test") || !strings.Contains(rec.Reasons[0], "frequency") {
		t.Errorf("14 %% apart: %s %v", rec.Verdict, rec.Reasons)
	}
	rec = sheet.ExperimentRecord{Verdict: string(identify.Believed)}
	compareMethods("gain", []said{{"step test", 20, 2}, {"relay", 23, 2}}, 1e-3, &rec)
	if rec.Verdict != string(identify.Believed) {
		t.Errorf("apart inside their ±: %v", rec.Reasons)
	}
}

// A fit that other methods contradict is used with care, and says why; one that they
// bear out, or that was refused by itself, stays as it is.
func TestOtherMethodsLowerTheVerdict(t *testing.T) {
	against := &sheet.ExperimentRecord{Verdict: string(identify.Care), Reasons: []string{"gain by the relay is 9 of its ± away"}}
	if v, why := judged(identify.Believed, nil, against); v != identify.Care || len(why) != 1 || !strings.Contains(why[0], "methods disagree: gain by the relay") {
		t.Errorf("%v, %q", v, why)
	}
	if v, why := judged(identify.Refused, []string{"saturated"}, against); v != identify.Refused || len(why) != 1 {
		t.Errorf("%v, %q", v, why)
	}
	for _, m := range []*sheet.ExperimentRecord{nil, {Verdict: string(identify.Believed)}} {
		if v, why := judged(identify.Believed, nil, m); v != identify.Believed || why != nil {
			t.Errorf("%v, %q", v, why)
		}
	}
}
