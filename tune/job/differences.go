package job

import (
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"gainwright/tune/sheet"
)

// Difference is one recorded number or word that does not come out the same.
type Difference struct {
	What       string   `json:"what"` // entry and key, such as "0031-fit-first-order.json model.num[0]"
	Recorded   string   `json:"recorded"`
	Recomputed string   `json:"recomputed"`
	Relative   *float64 `json:"relative"` // recomputed over recorded less one; nil where that says nothing
}

func (d Difference) String() string {
	s := fmt.Sprintf("%s: recorded %s, recomputed %s", d.What, d.Recorded, d.Recomputed)
	if d.Relative != nil {
		s += fmt.Sprintf(" (%+.3g %%)", *d.Relative*100)
	}
	return s
}

// compare walks two JSON values and notes every place where they differ; two
// numbers are the same when they are the same binary64.
func (c *recomputing) compare(what string, recorded json.RawMessage, recomputed any) {
	again, err := rawJSON(recomputed)
	if err != nil {
		c.differ(what, "a value", err.Error())
		return
	}
	var a, b any
	if err := json.Unmarshal(recorded, &a); err != nil {
		c.differ(what, "cannot be read: "+err.Error(), string(again))
		return
	}
	if err := json.Unmarshal(again, &b); err != nil {
		panic("job: own JSON: " + err.Error())
	}
	c.walk(what, a, b)
}

func (c *recomputing) walk(what string, a, b any) {
	switch a := a.(type) {
	case map[string]any:
		if b, ok := b.(map[string]any); ok {
			keys := map[string]bool{}
			for k := range a {
				keys[k] = true
			}
			for k := range b {
				keys[k] = true
			}
			for _, k := range sorted(keys) {
				c.walk(strings.Replace(what+"."+k, " .", " ", 1), a[k], b[k])
			}
			return
		}
	case []any:
		if b, ok := b.([]any); ok {
			if len(a) != len(b) {
				c.differ(what, fmt.Sprintf("%d items", len(a)), fmt.Sprintf("%d items", len(b)))
			}
			for i := range min(len(a), len(b)) {
				c.walk(fmt.Sprintf("%s[%d]", what, i), a[i], b[i])
			}
			return
		}
	case float64:
		if b, ok := b.(float64); ok {
			c.out.Compared++
			if math.Float64bits(a) != math.Float64bits(b) {
				c.differ(what, strconv.FormatFloat(a, 'g', -1, 64), strconv.FormatFloat(b, 'g', -1, 64))
				if a != 0 {
					c.out.Differences[len(c.out.Differences)-1].Relative = sheet.Known(b/a - 1)
				}
			}
			return
		}
	default:
		if a == b {
			c.out.Compared++
			return
		}
	}
	c.differ(what, brief(a), brief(b))
}

func sorted(set map[string]bool) []string {
	out := make([]string, 0, len(set))
	for k := range set {
		out = append(out, k)
	}
	slices.Sort(out)
	return out
}

// briefMax is longer than any text of a record's analysis.
const briefMax = 1000

// brief is a JSON value in a few characters.
func brief(v any) string {
	b, err := rawJSON(v)
	if err != nil {
		return err.Error()
	}
	if len(b) > briefMax {
		return string(b[:briefMax]) + "..."
	}
	return string(b)
}
