// Package si holds the units that cross package borders. Everything inside the
// program is SI; rpm, percent and counts exist only at the decoder and on screen.
package si

import "math"

// Volts is an electric potential difference in V.
type Volts float64

// Amps is an electric current in A.
type Amps float64

// Rad is an angle at the motor shaft in rad.
type Rad float64

// RadPerSec is an angular speed at the motor shaft in rad/s.
type RadPerSec float64

// Celsius is a temperature in degrees Celsius.
type Celsius float64

// Turns returns the angle in turns. For display only.
func (r Rad) Turns() float64 { return float64(r) / (2 * math.Pi) }

// RPM returns the speed in revolutions per minute. For display only.
func (w RadPerSec) RPM() float64 { return float64(w) * 60 / (2 * math.Pi) }

// FromRPM converts a speed in revolutions per minute, as typed or printed on a
// nameplate, to rad/s.
func FromRPM(rpm float64) RadPerSec { return RadPerSec(rpm * 2 * math.Pi / 60) }

// Finite reports whether x is neither a NaN nor an infinity. No other value may
// pass a border: the decoder, the rig file and the limiter all ask it.
func Finite[T ~float64](x T) bool {
	f := float64(x)
	return !math.IsNaN(f) && !math.IsInf(f, 0)
}
