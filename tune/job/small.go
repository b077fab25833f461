package job

import (
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strconv"
	"time"

	"gainwright/protocol"
)

func contains(list []string, s string) bool { return slices.Contains(list, s) }

func mean(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x
	}
	return s / float64(len(v))
}

// spread is the sample standard deviation, 0 for fewer than two values.
func spread(v []float64) float64 {
	if len(v) < 2 {
		return 0
	}
	m, s := mean(v), 0.0
	for _, x := range v {
		s += (x - m) * (x - m)
	}
	return math.Sqrt(s / float64(len(v)-1))
}

// number prints four significant digits.
func number(v float64) string {
	if v == 0 {
		return "0"
	}
	return strconv.FormatFloat(v, 'g', 4, 64)
}

func rpm(w float64) string { return fmt.Sprintf("%.0f rpm", w*60/(2*math.Pi)) }

func rawJSON(v any) (json.RawMessage, error) { return json.Marshal(v) }

// gainRecord is a set of gains for the record: the law that they make, in its
// fixed JSON form, and beside it the words on the wire, which are exact.
func gainRecord(s GainSet, id protocol.Identity, uMax float64) any {
	rec := map[string]any{}
	g, err := s.Design(id, uMax)
	if err == nil {
		err = g.Validate()
	}
	if err == nil {
		if raw, e := json.Marshal(g); e == nil {
			_ = json.Unmarshal(raw, &rec)
		}
	} else {
		rec["note"] = err.Error()
	}
	rec["words"] = s.Words()
	return rec
}

func seconds(s float64) time.Duration { return time.Duration(s * float64(time.Second)) }

func ptr[T any](v T) *T { return &v }
