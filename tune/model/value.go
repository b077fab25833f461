package model

import (
	"encoding/json"
	"math"
)

// Value is a number that may not be known: NaN, which is null in JSON.
type Value float64

// Unknown is the Value that is not known.
var Unknown = Value(math.NaN())

// Known tells whether v is a number.
func (v Value) Known() bool { return !math.IsNaN(float64(v)) && !math.IsInf(float64(v), 0) }

// MarshalJSON writes null for a value that is not known.
func (v Value) MarshalJSON() ([]byte, error) {
	if !v.Known() {
		return []byte("null"), nil
	}
	return json.Marshal(float64(v))
}

// UnmarshalJSON reads null as a value that is not known.
func (v *Value) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*v = Unknown
		return nil
	}
	return json.Unmarshal(b, (*float64)(v))
}
