package rig

import (
	"fmt"
	"strconv"
	"strings"
)

// Marshal writes r as a rig file that Parse reads back to the same Rig. Values
// that are equal to their default are written as comments, so that the file
// shows what there is to change.
func Marshal(r Rig) []byte {
	var b strings.Builder
	b.WriteString("# Rig file. Units stand in the keys; lines that begin with # show defaults.\n")
	table := ""
	for i := range keys {
		k := &keys[i]
		if t := tableOf(k.path); t != table {
			if table == "" {
				writeList(&b, "checklist", r.Checklist)
				writeList(&b, "acceptance", r.Acceptance)
			}
			fmt.Fprintf(&b, "\n[%s]\n", t)
			table = t
		}
		line, isDefault := literal(k, &r)
		if isDefault {
			b.WriteString("# ")
		}
		fmt.Fprintf(&b, "%s = %s\n", k.path[len(tablePrefix(k.path)):], line)
	}
	for _, in := range r.Interlocks {
		fmt.Fprintf(&b, "\n[[interlock]]\nbit = %d\nname = %s\n", in.Bit, quote(in.Name))
		if in.Kind != "" && in.Kind != KindInput {
			fmt.Fprintf(&b, "kind = %s\n", quote(in.Kind))
		}
	}
	return []byte(b.String())
}

func tableOf(path string) string {
	if i := strings.IndexByte(path, '.'); i >= 0 {
		return path[:i]
	}
	return ""
}

func tablePrefix(path string) string { return path[:strings.IndexByte(path, '.')+1] }

func writeList(b *strings.Builder, key string, l []string) {
	if len(l) == 0 {
		return
	}
	b.WriteString(key + " = [\n")
	for _, s := range l {
		fmt.Fprintf(b, "  %s,\n", quote(s))
	}
	b.WriteString("]\n")
}

// literal is the TOML of one key and whether it is the default.
func literal(k *key, r *Rig) (s string, isDefault bool) {
	switch p := k.at(r).(type) {
	case *float64:
		return float(*p), !k.must && *p == k.derive(r)
	case *int64:
		return strconv.FormatInt(*p, 10), false
	case *string:
		return quote(*p), !k.must && *p == k.word
	case *bool:
		return strconv.FormatBool(*p), *p == k.yes
	}
	panic("rig: key " + k.path + " has no type")
}

// float writes v so that it reads back to the same bits and is a TOML float.
func float(v float64) string {
	s := strconv.FormatFloat(v, 'g', -1, 64)
	if !strings.ContainsAny(s, ".e") {
		s += ".0"
	}
	return s
}

// quote writes a TOML basic string: every control character is escaped.
func quote(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, c := range strings.ToValidUTF8(s, "\uFFFD") {
		switch {
		case c == '"' || c == '\\':
			b.WriteByte('\\')
			b.WriteRune(c)
		case c < 0x20 || c == 0x7f:
			fmt.Fprintf(&b, `\u%04X`, c)
		default:
			b.WriteRune(c)
		}
	}
	b.WriteByte('"')
	return b.String()
}
