package sheet

import (
	"bytes"
	"encoding/json"
	"math"

	"gainwright/tune/sheet/plain"
)

// Known returns a pointer to x, or nil for a NaN or an infinity, so that a
// value that is not known is written as null and never as 0.
func Known(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// encode returns v as indented JSON whose every character prints. Such
// characters stand only inside JSON strings, where \u says the same.
func encode(v any) ([]byte, error) {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	if err := e.Encode(v); err != nil {
		return nil, err
	}
	return plain.JSON(b.Bytes()), nil
}
