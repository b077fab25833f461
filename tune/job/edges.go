package job

import (
	"math"
	"slices"

	"gainwright/tune/trace"
)

// edgesPerTau is the number of samples a time constant below which the places of
// the edges of the drive are worked out: the mean drive of an interval in which
// it changed once says when.
const edgesPerTau = 12

// coarse reports whether a record has so few samples.
func coarse(tr *trace.Trace, tau float64) bool {
	n := tr.Len()
	return n > 2 && (tr.Time[n-1]-tr.Time[0])/float64(n-1) > tau/edgesPerTau
}

// edges puts a row at every single change of the drive inside an interval. The
// row says what was applied before it and is left out of the fit; its speed is a
// filling. The board reports the mean drive since the sample before, so that
// mean = old + share·(new − old), and the change came that share of the interval
// before its end. Old and new have to be levels that the record holds elsewhere
// for two samples; else more than one change may be in the interval, and it stays
// as it is.
func edges(tr *trace.Trace) *trace.Trace {
	n := tr.Len()
	out := &trace.Trace{Name: tr.Name, Hold: tr.Hold, Window: tr.Window, RadPerCount: tr.RadPerCount}
	v := append([]float64(nil), tr.Voltage...)
	row := func(i int, time, volts float64, extra bool) {
		out.Time, out.Voltage = append(out.Time, time), append(out.Voltage, volts)
		mask := trace.Used
		if tr.Mask != nil {
			mask = tr.Mask[i]
		}
		if extra {
			mask = trace.Manual
		}
		out.Mask = append(out.Mask, mask)
		for _, c := range [][2]*[]float64{{&out.Speed, &tr.Speed}, {&out.Current, &tr.Current}, {&out.Bus, &tr.Bus}, {&out.Temperature, &tr.Temperature},
			{&out.Setpoint, &tr.Setpoint}, {&out.Counts, &tr.Counts}} {
			if *c[1] != nil {
				*c[0] = append(*c[0], (*c[1])[i])
			}
		}
	}
	held := levelsHeld(tr.Voltage)
	for i := range n {
		if i >= 1 && i+1 < n {
			old, next := tr.Voltage[i-1], tr.Voltage[i+1]
			share := (tr.Voltage[i] - old) / (next - old)
			if share > 0.02 && share < 0.98 && held.has(old) && held.has(next) {
				at := tr.Time[i] - share*(tr.Time[i]-tr.Time[i-1])
				row(i, at, old, true)
				v[i] = next
			}
		}
		row(i, tr.Time[i], v[i], false)
	}
	return out
}

// held are the drives that a record holds, rising, and what counts as the same.
type held struct {
	levels []float64
	same   float64
}

func levelsHeld(v []float64) held {
	h := held{same: 0.005 * (slices.Max(v) - slices.Min(v))}
	for i := 1; i < len(v); i++ {
		if math.Abs(v[i]-v[i-1]) <= h.same/4 && !h.has(v[i]) {
			at, _ := slices.BinarySearch(h.levels, v[i])
			h.levels = slices.Insert(h.levels, at, v[i])
		}
	}
	return h
}

func (h held) has(v float64) bool {
	i, _ := slices.BinarySearch(h.levels, v)
	return i < len(h.levels) && h.levels[i]-v <= h.same || i > 0 && v-h.levels[i-1] <= h.same
}
