package identify

import (
	"math"
	"sort"

	"gainwright/tune/trace"
)

// Plateaus finds the runs of constant voltage in a trace that last at least dwell
// seconds and averages the second half of each. changeVolts is how much the
// voltage may wander within a run. The levels come in the order of time.
func Plateaus(tr *trace.Trace, dwell, changeVolts float64) []Level {
	var out []Level
	n := tr.Len()
	for from := 0; from < n; {
		to := from + 1
		for to < n && math.Abs(tr.Voltage[to]-tr.Voltage[from]) <= changeVolts {
			to++
		}
		if tr.Time[to-1]-tr.Time[from] >= dwell && to-from >= 8 {
			out = append(out, settle(tr, from, to))
		}
		from = to
	}
	return out
}

// settledShare is how much of its speed a level may still move over the averaged
// half and count as settled. Our choice.
const settledShare = 0.005

// settle averages the second half of samples [from, to) and compares the two
// quarters in it.
func settle(tr *trace.Trace, from, to int) Level {
	mid := (from + to) / 2
	var l Level
	var q [2][]float64
	for i := mid; i < to; i++ {
		if tr.At(i) != trace.Used {
			continue
		}
		l.Volts += tr.Voltage[i]
		l.Speed += tr.Speed[i]
		if tr.Current != nil {
			l.Current += tr.Current[i]
		}
		l.N++
		k := 0
		if i >= (mid+to)/2 {
			k = 1
		}
		q[k] = append(q[k], tr.Speed[i])
	}
	l.From, l.To = tr.Time[mid], tr.Time[to-1]
	if l.N == 0 {
		return l
	}
	n := float64(l.N)
	l.Volts, l.Speed, l.Current = l.Volts/n, l.Speed/n, l.Current/n
	all := append(append([]float64(nil), q[0]...), q[1]...)
	if l.N > 1 {
		l.SpeedSD = deviation(all) / math.Sqrt(n-1)
	}
	if len(q[0]) == 0 || len(q[1]) == 0 {
		return l
	}
	move := math.Abs(median(q[0]) - median(q[1]))
	l.Settled = move <= math.Max(settledShare*math.Abs(l.Speed), 4*l.SpeedSD/math.Sqrt(n))
	return l
}

func median(v []float64) float64 {
	s := append([]float64(nil), v...)
	sort.Float64s(s)
	if len(s)%2 == 1 {
		return s[len(s)/2]
	}
	return (s[len(s)/2-1] + s[len(s)/2]) / 2
}
