package sheet

import (
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strings"
)

// readable gives the limits of a board the names that people use, the board's own
// behind them.
func readable(limits []Quantity) []Quantity {
	out := slices.Clone(limits)
	for i, q := range out {
		if name, ok := limitNames[q.Name]; ok && name != q.Name {
			out[i].Name = fmt.Sprintf("%s (%s)", name, q.Name)
		}
		if notJudged[q.Name] && q.Value != nil && *q.Value == 0 {
			out[i].Why = "0: not judged"
		}
	}
	return out
}

// gainUnits are the units of the keys of gains and margins.
var gainUnits = map[string]string{"kp": "V/(rad/s)", "ki": "V/rad", "kd": "V·s²/rad", "kc": "V/(rad/s)", "ti": "s", "td": "s", "derivative_filter": "s",
	"sample_time": "s", "compute_delay": "s", "tracking_time": "s", "u_min": "V", "u_max": "V", "setpoint_weight": "1", "ms": "1", "mt": "1", "gain_margin": "1"}

// sideBySide shows sets of gains key by key, with the board's words below.
func (p *reportPage) sideBySide(head []string, sets ...json.RawMessage) {
	values := make([]map[string]string, len(sets))
	keys := map[string]bool{}
	for i, raw := range sets {
		values[i] = map[string]string{}
		for _, row := range flat(raw) {
			if row[0] == "words" {
				for _, w := range flat(json.RawMessage(row[1])) {
					values[i]["word "+w[0]] = strings.Trim(w[1], `"`)
				}
				continue
			}
			values[i][row[0]] = strings.Trim(row[1], `"`)
		}
		for k := range values[i] {
			keys[k] = true
		}
	}
	var rows [][]string
	for _, k := range slices.Sorted(maps.Keys(keys)) {
		row := []string{k}
		for _, m := range values {
			v := m[k]
			if u := gainUnits[k]; u != "" && u != "1" && v != "" {
				v += " " + u
			}
			row = append(row, v)
		}
		rows = append(rows, row)
	}
	p.table(head, rows)
}

// known fields of gains, margins and models as a table of names and values, in
// the order of their names.
func flat(raw json.RawMessage) [][]string {
	var m map[string]any
	if json.Unmarshal(raw, &m) != nil {
		return nil
	}
	var rows [][]string
	for _, k := range slices.Sorted(maps.Keys(m)) {
		b, err := json.Marshal(m[k])
		if err == nil {
			rows = append(rows, []string{k, string(b)})
		}
	}
	return rows
}
