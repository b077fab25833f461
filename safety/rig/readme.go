package rig

import (
	"fmt"
	"math"
	"strings"
)

// Describe is README.md's table of keys, in Markdown.
func Describe() string {
	var b strings.Builder
	b.WriteString("| key | unit | range | default | meaning |\n|---|---|---|---|---|\n")
	for i := range keys {
		k := &keys[i]
		def := k.def
		if k.must {
			def = "**must be given**"
		}
		fmt.Fprintf(&b, "| `%s` | %s | %s | %s | %s |\n", k.path, k.unit, rangeOf(k), def, k.meaning)
	}
	return b.String()
}

func rangeOf(k *key) string {
	var r Rig
	switch k.at(&r).(type) {
	case *string:
		if len(k.oneOf) > 0 {
			return "`" + strings.Join(k.oneOf, "` `") + "`"
		}
		return "text, at most 256 bytes"
	case *bool:
		return "`true` `false`"
	}
	return bound(k.min) + " to " + bound(k.max)
}

func bound(v float64) string {
	if v != 0 && (math.Abs(v) >= 1e6 || math.Abs(v) < 1e-3) {
		return fmt.Sprintf("%.0e", v)
	}
	return num(v)
}
