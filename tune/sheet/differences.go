package sheet

import (
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strings"
)

// Difference is one thing that is not as it was left.
type Difference struct {
	What string `json:"what"`
	Old  string `json:"old"`
	New  string `json:"new"`
}

// absent stands in a Difference for what one of the two does not have.
const absent = "not there"

// Differences returns what sets the board as found now apart from how it was
// left last time: identity, gains, limits, flags, load. Numbers are compared bit
// for bit, for the board holds what was read back from it. Bus voltage, ambient
// temperature and boot count differ each day and are left out; so are the limits
// of a board that was started since, for those of a session end with it. Nothing
// returned means that nobody touched it, as far as the board can tell.
func Differences(left, found Snapshot) []Difference {
	var out []Difference
	add := func(what, old, new string) {
		if old != new {
			out = append(out, Difference{what, orAbsent(old), orAbsent(new)})
		}
	}
	add("board", left.BoardID, found.BoardID)
	add("firmware", left.Firmware, found.Firmware)
	add("protocol", left.Protocol, found.Protocol)
	each := func(what string, old, new map[string]string) {
		keys := maps.Clone(old)
		if keys == nil {
			keys = map[string]string{}
		}
		maps.Copy(keys, new)
		for _, k := range slices.Sorted(maps.Keys(keys)) {
			add(what+" "+k, old[k], new[k])
		}
	}
	each("running", keyed(left.Running), keyed(found.Running))
	each("stored", keyed(left.Stored), keyed(found.Stored))
	if left.BootCount == nil || found.BootCount == nil || *left.BootCount == *found.BootCount {
		each("limit", named(left.Limits), named(found.Limits))
	}
	add("flags", strings.Join(left.Flags, ", "), strings.Join(found.Flags, ", "))
	each("identity", withoutBoot(left.Identity), withoutBoot(found.Identity))
	add("load", left.LoadState, found.LoadState)
	return out
}

func orAbsent(s string) string {
	if s == "" {
		return absent
	}
	return s
}

// withoutBoot is an identity without its boot count.
func withoutBoot(id map[string]string) map[string]string {
	out := maps.Clone(id)
	delete(out, "boot")
	return out
}

// keyed reads gains as names and values; null is not there. The board's words are
// read one by one, and only where they are all there is: else the values beside
// them say the same.
func keyed(raw json.RawMessage) map[string]string {
	out := map[string]string{}
	rows := flat(raw)
	lawKnown := slices.ContainsFunc(rows, func(r []string) bool { return r[0] == "form" })
	for _, row := range rows {
		if row[0] == "words" {
			for _, w := range flat(json.RawMessage(row[1])) {
				if !lawKnown {
					out["word "+w[0]] = strings.Trim(w[1], `"`)
				}
			}
			continue
		}
		if row[1] != "null" {
			out[row[0]] = strings.Trim(row[1], `"`)
		}
	}
	return out
}

func named(list []Quantity) map[string]string {
	out := map[string]string{}
	for _, q := range list {
		if q.Value != nil {
			out[q.Name] = fmt.Sprintf("%v %s", *q.Value, q.Unit)
		}
	}
	return out
}

// LastLeft returns the newest as-left snapshot among the sheets of dir that f
// chooses, and the sheet it stands in. Sheets that were broken off before their
// as-left, or whose as-left is damaged, are passed over; ErrNoEntry says that
// none has one.
func LastLeft(dir string, f Filter) (Snapshot, Listing, error) {
	list, err := List(dir, f)
	if err != nil {
		return Snapshot{}, Listing{}, err
	}
	for _, l := range list {
		var s Snapshot
		r, _ := Open(l.Dir)
		if r.LastJSON(KindAsLeft, "", &s) == nil {
			return s, l, nil
		}
	}
	return Snapshot{}, Listing{}, fmt.Errorf("%w: no earlier job of this rig in %s has an as-left", ErrNoEntry, dir)
}
