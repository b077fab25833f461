package sheet

import (
	"fmt"
	"math"
	"slices"
	"time"
)

// Member is one job in a comparison of many.
type Member struct {
	Record string
	Start  time.Time
	Motor  MotorRecord
}

// FleetRow is one quantity over many sheets of like motors.
type FleetRow struct {
	Quantity string    `json:"quantity"`
	Unit     string    `json:"unit"`
	Count    int       `json:"count"`
	Median   *float64  `json:"median"`
	Spread   *float64  `json:"spread"`         // 1.4826 times the median absolute deviation: a standard deviation where there are no outliers
	Drift    *float64  `json:"drift_per_year"` // Theil–Sen slope; null below three sheets or where all are of one day
	Outliers []Outlier `json:"outliers"`       // none are named below five sheets
}

// Outlier is one sheet that stands apart.
type Outlier struct {
	Record string  `json:"record"`
	Value  float64 `json:"value"`
	Score  float64 `json:"score"` // modified z-score; ±Inf cannot occur, see Fleet
}

// What is needed before a spread says anything, and where a value stands apart:
// |0.6745·(x − median)/MAD| > 3.5 (Iglewicz and Hoaglin, How to Detect and
// Handle Outliers, 1993; also NIST/SEMATECH e-Handbook 1.3.5.17).
const (
	outliersFrom = 5
	outlierScore = 3.5
)

// Members reads the motors of the sheets in a listing. A sheet that did not come
// as far as its motor's values is left out and counted.
func Members(list []Listing) (members []Member, leftOut int) {
	for _, l := range list {
		r, _ := Open(l.Dir)
		m, err := r.Motor()
		if err != nil {
			leftOut++
			continue
		}
		members = append(members, Member{Record: RecordName(l.Dir), Start: l.Start, Motor: m})
	}
	return members, leftOut
}

// Fleet returns median, spread, drift and outliers of each quantity that at
// least one of the sheets knows. Where more than half of the sheets agree to the
// last digit, as with counts per turn, any other value is an outlier; its score
// is then 1e9 with its sign.
func Fleet(members []Member) []FleetRow {
	var out []FleetRow
	for _, q := range quantities {
		var values, years []float64
		var who []string
		for _, m := range members {
			if v := q.of(m.Motor); v != nil {
				values, who = append(values, *v), append(who, m.Record)
				years = append(years, m.Start.Sub(members[0].Start).Hours()/(24*365.25))
			}
		}
		if len(values) == 0 {
			continue
		}
		middle := median(values)
		deviation := make([]float64, len(values))
		for i, v := range values {
			deviation[i] = math.Abs(v - middle)
		}
		mad := median(deviation)
		row := FleetRow{
			Quantity: q.name, Unit: q.unit, Count: len(values), Median: Known(middle), Spread: Known(1.4826 * mad), Drift: Known(theilSen(years, values)),
		}
		for i, v := range values {
			score := 0.6745 * (v - middle) / mad
			if mad == 0 {
				score = math.Copysign(1e9, v-middle)
				if v == middle {
					score = 0
				}
			}
			if len(values) >= outliersFrom && math.Abs(score) > outlierScore {
				row.Outliers = append(row.Outliers, Outlier{who[i], v, score})
			}
		}
		out = append(out, row)
	}
	return out
}

func median(v []float64) float64 {
	s := slices.Sorted(slices.Values(v))
	n := len(s)
	if n == 0 {
		return math.NaN()
	}
	return (s[(n-1)/2] + s[n/2]) / 2
}

// theilSen returns the median of the slopes between all pairs (Sen, Journal of
// the American Statistical Association 63, 1968), NaN below three points or
// where no two differ in x by more than a day.
func theilSen(x, y []float64) float64 {
	const day = 1 / 365.25
	var slopes []float64
	if len(x) < 3 {
		return math.NaN()
	}
	step := 1 + len(x)/1000 // a million pairs are enough
	for i := 0; i < len(x); i += step {
		for k := i + 1; k < len(x); k += step {
			if dx := x[k] - x[i]; math.Abs(dx) > day {
				slopes = append(slopes, (y[k]-y[i])/dx)
			}
		}
	}
	return median(slopes)
}

// FleetReport returns the comparison of many sheets as one HTML page: the table
// and a plot of each quantity over time.
func FleetReport(members []Member, leftOut int) string {
	var p page
	p.begin(fmt.Sprintf("%d motors compared", len(members)))
	if leftOut > 0 {
		p.para(fmt.Sprintf("%d sheets are left out: their jobs did not come as far as the motor's values.", leftOut))
	}
	p.para(fmt.Sprintf("Spread is 1.4826 times the median absolute deviation, drift the Theil–Sen slope, an outlier stands more than %.1f modified z-scores apart; below %d sheets none is named.", outlierScore, outliersFrom))
	rows := Fleet(members)
	var table [][]string
	for _, r := range rows {
		apart := ""
		for i, o := range r.Outliers {
			if i > 0 {
				apart += ", "
			}
			apart += o.Record + " " + significant(o.Value, 4)
		}
		table = append(table, []string{r.Quantity, r.Unit, fmt.Sprint(r.Count), four(r.Median), four(r.Spread), four(r.Drift), apart})
	}
	p.table([]string{"quantity", "unit", "sheets", "median", "spread", "drift in a year", "outliers"}, table)
	for _, q := range quantities {
		dots := series{name: q.name, points: true}
		for _, m := range members {
			if v := q.of(m.Motor); v != nil {
				dots.x, dots.y = append(dots.x, m.Start.Sub(members[0].Start).Hours()/24), append(dots.y, *v)
			}
		}
		if len(dots.x) > 0 {
			title := fmt.Sprintf("%s over the days since %s", q.name, members[0].Start.Format("2006-01-02"))
			p.raw("%s", plot{title: title, xLabel: "days", yLabel: q.unit, height: 180, series: []series{dots}}.svg())
		}
	}
	p.end()
	return p.b.String()
}
