package simrig

import "math"

// winding is the temperature of the copper: one heat capacity against ambient.
type winding struct {
	ambient float64 // °C
	perWatt float64 // K/W to ambient, 0 for a winding that stays at ambient
	tau     float64 // s
	ohms25  float64

	celsius float64
}

// heat carries the winding over h seconds with the mean loss watts, exactly.
func (w *winding) heat(watts, h float64) {
	if w.perWatt == 0 {
		return
	}
	rest := w.ambient + w.perWatt*watts
	w.celsius = rest + (w.celsius-rest)*math.Exp(-h/w.tau)
}

// ohms is the resistance at the present temperature.
func (w *winding) ohms() float64 { return w.ohms25 * (1 + copperPerKelvin*(w.celsius-25)) }
