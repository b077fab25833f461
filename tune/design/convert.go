package design

import (
	"fmt"
	"math"
)

// Board says in which units, and in which numbers, a board holds its gains.
type Board struct {
	// SpeedUnit is the size of one unit of the board's speed in rad/s: 1 for
	// rad/s, 2π/60 for rpm, the angle of a count over the speed window for
	// counts (CountUnit).
	SpeedUnit float64
	// DriveUnit is the size of one unit of the board's drive in V: 1 for volts,
	// the bus voltage for duty from 0 to 1, the volts of one step for a DAC.
	DriveUnit float64
	// PerSample boards hold ki times and kd over the sample time, as the law
	// uses them in one addition.
	PerSample bool
	// SampleTime in s is needed for PerSample; 0 takes that of the gains.
	SampleTime float64
	// Integer boards hold round(gain·2^Shift); others hold binary32.
	Integer bool
	Shift   int // 0 to 62 bits behind the point
	Bits    int // width of a gain with its sign; 0 means 32
	// AccumulatorBits is the width of the sum that the integral is kept in, with
	// its sign; 0 means 32.
	AccumulatorBits int
	// WholeProduct boards add gain·error to the integral before they shift. The
	// others shift first, and lose errors whose product is below one.
	WholeProduct bool
	// SpeedMax in rad/s and DriveMax in V are full scale, for the overflow and
	// resolution checks; 0 leaves them out.
	SpeedMax, DriveMax float64
}

// CountUnit returns the speed unit of a board that counts over a window in s,
// with radPerCount rad at the motor shaft for one count.
func CountUnit(radPerCount, window float64) float64 { return radPerCount / window }

// RPMUnit is the speed unit of a board that speaks rpm.
const RPMUnit = 2 * math.Pi / 60

// BoardGains are gains as a board holds them.
type BoardGains struct {
	Board Board `json:"-"`
	// Kp, Ki and Kd in the board's units, before rounding.
	Kp float64 `json:"kp"`
	Ki float64 `json:"ki"`
	Kd float64 `json:"kd"`
	// KpInt, KiInt and KdInt are what an integer board is told, nil for others.
	KpInt *int64 `json:"kp_int,omitempty"`
	KiInt *int64 `json:"ki_int,omitempty"`
	KdInt *int64 `json:"kd_int,omitempty"`
	Shift int    `json:"shift"`
	// Rounding is the largest relative error that rounding brings to a gain.
	Rounding float64 `json:"rounding"`
	// SmallestError is the smallest error in rad/s that still moves the
	// integral; Unknown without integral, and for binary32 without DriveMax.
	SmallestError Value `json:"smallest_error_rad_s"`
	// Held are the gains that the board really runs, back in SI units.
	Held Gains `json:"held"`
}

// factors returns what one multiplies SI gains by.
func (b Board) factors(g Gains) (kp, ki, kd float64, err error) {
	if !(b.SpeedUnit > 0) || !(b.DriveUnit > 0) || math.IsInf(b.SpeedUnit, 0) || math.IsInf(b.DriveUnit, 0) {
		return 0, 0, 0, badGains("a board's units of speed (%g rad/s) and drive (%g V) must be above 0", b.SpeedUnit, b.DriveUnit)
	}
	k := b.SpeedUnit / b.DriveUnit
	if !b.PerSample {
		return k, k, k, nil
	}
	h := b.SampleTime
	if h == 0 {
		h = g.SampleTime
	}
	if !(h > 0) {
		return 0, 0, 0, badGains("gains per sample need the sample time")
	}
	return k, k * h, k / h, nil
}

// ToBoard returns g in the board's units and numbers. It refuses a gain that
// does not fit, a gain that rounds to nothing, and a full-scale error that
// overflows the accumulator.
func ToBoard(g Gains, b Board) (BoardGains, error) {
	if err := g.Validate(); err != nil {
		return BoardGains{}, err
	}
	p := g.Parallel()
	fp, fi, fd, err := b.factors(p)
	if err != nil {
		return BoardGains{}, err
	}
	out := BoardGains{Board: b, Kp: p.Kp * fp, Ki: p.Ki * fi, Kd: p.Kd * fd, Shift: b.Shift, SmallestError: Unknown, Held: p}
	if !b.Integer {
		out.hold32(fp, fi, fd)
		return out, nil
	}
	if b.Shift < 0 || b.Shift > 62 {
		return out, badGains("shift is %d bits: it must be 0 to 62", b.Shift)
	}
	for _, c := range []struct {
		name string
		want float64
		into **int64
	}{{"kp", out.Kp, &out.KpInt}, {"ki", out.Ki, &out.KiInt}, {"kd", out.Kd, &out.KdInt}} {
		n, err := b.round(c.name, c.want)
		if err != nil {
			return out, err
		}
		*c.into = &n
		if c.want != 0 {
			out.Rounding = math.Max(out.Rounding, math.Abs(math.Ldexp(float64(n), -b.Shift)/c.want-1))
		}
	}
	if err := out.accumulator(); err != nil {
		return out, err
	}
	held, err := FromBoard(*out.KpInt, *out.KiInt, *out.KdInt, b, p)
	out.Held = held
	return out, err
}

func (b Board) round(name string, want float64) (int64, error) {
	bits := b.Bits
	if bits == 0 {
		bits = 32
	}
	scaled := math.RoundToEven(math.Ldexp(want, b.Shift))
	if limit := math.Ldexp(1, bits-1); scaled >= limit || scaled < -limit {
		return 0, badGains("%s is %.6g in the board's units: with %d bits behind the point it does not fit into %d bits; use a smaller shift", name, want, b.Shift, bits)
	}
	if want != 0 && scaled == 0 {
		return 0, badGains("%s is %.3g in the board's units: with %d bits behind the point it rounds to 0; use a larger shift", name, want, b.Shift)
	}
	return int64(scaled), nil
}

// accumulator checks the integral of an integer board and finds the smallest
// error that moves it.
func (o *BoardGains) accumulator() error {
	b := o.Board
	ki := math.Abs(float64(*o.KiInt))
	if ki == 0 {
		return nil
	}
	units := 1.0
	if !b.WholeProduct {
		units = math.Ceil(math.Ldexp(1, b.Shift) / ki)
	}
	o.SmallestError = Value(units * b.SpeedUnit)
	bits := b.AccumulatorBits
	if bits == 0 {
		bits = 32
	}
	largest := math.Max(ki, math.Max(math.Abs(float64(*o.KpInt)), math.Abs(float64(*o.KdInt))))
	if full := 2 * b.SpeedMax / b.SpeedUnit * largest; b.SpeedMax > 0 && full >= math.Ldexp(1, bits-1) {
		return badGains("a full-scale error of %.4g units times the largest gain of %.0f overflows an accumulator of %d bits; use a smaller shift", 2*b.SpeedMax/b.SpeedUnit, largest, bits)
	}
	return nil
}

// hold32 rounds to binary32, which boards with a floating-point unit hold.
func (o *BoardGains) hold32(fp, fi, fd float64) {
	for _, c := range []struct {
		v    float64
		f    float64
		into *float64
	}{{o.Kp, fp, &o.Held.Kp}, {o.Ki, fi, &o.Held.Ki}, {o.Kd, fd, &o.Held.Kd}} {
		held := float64(float32(c.v))
		*c.into = held / c.f
		if c.v != 0 {
			o.Rounding = math.Max(o.Rounding, math.Abs(held/c.v-1))
		}
	}
	perSample := o.Ki
	if !o.Board.PerSample {
		perSample *= o.Held.SampleTime
	}
	if o.Board.DriveMax > 0 && perSample != 0 {
		// Near full drive the sum keeps steps of 2⁻²⁴ of it; half a step rounds up.
		o.SmallestError = Value(o.Board.DriveMax / o.Board.DriveUnit * math.Ldexp(1, -24) / math.Abs(perSample) * o.Board.SpeedUnit)
	}
}

// FromBoard returns the gains in SI units that the integers of a board stand
// for; like gives everything else (sample time, law, filter). ToBoard of the
// outcome gives the same integers again.
func FromBoard(kp, ki, kd int64, b Board, like Gains) (Gains, error) {
	g := like.Parallel()
	fp, fi, fd, err := b.factors(g)
	if err != nil {
		return Gains{}, err
	}
	g.Kp = math.Ldexp(float64(kp), -b.Shift) / fp
	g.Ki = math.Ldexp(float64(ki), -b.Shift) / fi
	g.Kd = math.Ldexp(float64(kd), -b.Shift) / fd
	return g, nil
}

// Scaled returns g with all gains multiplied by k: the exact gains after a
// change of encoder counts or gear that changes nothing but the scale of the
// speed, or of a supply that changes nothing but that of the drive.
func (g Gains) Scaled(k float64) Gains {
	g.Kp *= k
	g.Ki *= k
	g.Kd *= k
	g.Kc *= k
	return g
}

// TransferFunction returns numerator and denominator of the feedback part of
// the law: in s for a continuous one, in z for a sampled one, descending powers.
func (g Gains) TransferFunction() (num, den []float64) {
	p := g.Parallel()
	h, tf := p.SampleTime, p.DerivativeFilter
	type ratio struct{ num, den []float64 }
	proportional := ratio{[]float64{p.Kp}, []float64{1}}
	integral := ratio{[]float64{p.Ki}, []float64{1, 0}}
	derivative := ratio{[]float64{p.Kd, 0}, []float64{tf, 1}}
	if h > 0 {
		switch p.Discretisation {
		case ForwardEuler:
			integral = ratio{[]float64{p.Ki * h}, []float64{1, -1}}
			derivative = ratio{[]float64{p.Kd, -p.Kd}, []float64{tf, h - tf}}
		case Tustin:
			integral = ratio{[]float64{p.Ki * h / 2, p.Ki * h / 2}, []float64{1, -1}}
			derivative = ratio{[]float64{2 * p.Kd, -2 * p.Kd}, []float64{2*tf + h, h - 2*tf}}
		default:
			integral = ratio{[]float64{p.Ki * h, 0}, []float64{1, -1}}
			derivative = ratio{[]float64{p.Kd, -p.Kd}, []float64{tf + h, -tf}}
		}
	}
	sum := proportional
	for _, r := range []ratio{integral, derivative} {
		if allZero(r.num) {
			continue
		}
		sum = ratio{polyAdd(polyMul(sum.num, r.den), polyMul(r.num, sum.den)), polyMul(sum.den, r.den)}
	}
	for len(sum.den) > 1 && sum.den[0] == 0 { // an unfiltered derivative
		sum.den = sum.den[1:]
	}
	return sum.num, sum.den
}

func allZero(p []float64) bool {
	for _, v := range p {
		if v != 0 {
			return false
		}
	}
	return true
}

// CHeader returns the gains as a C header for the board's source.
func (o BoardGains) CHeader(name string) string {
	g := o.Held
	s := fmt.Sprintf("/* %s: speed-loop gains.\n * SI: kp %.9g V/(rad/s), ki %.9g V/rad, kd %.9g V*s*s/rad, derivative filter %.9g s,\n * setpoint weight %.9g, sample time %.9g s. */\n",
		name, g.Kp, g.Ki, g.Kd, g.DerivativeFilter, g.SetpointWeight, g.SampleTime)
	if o.KpInt != nil {
		return s + fmt.Sprintf("#define GAIN_SHIFT %d\n#define GAIN_KP %dL\n#define GAIN_KI %dL\n#define GAIN_KD %dL\n", o.Shift, *o.KpInt, *o.KiInt, *o.KdInt)
	}
	return s + fmt.Sprintf("#define GAIN_KP %sf\n#define GAIN_KI %sf\n#define GAIN_KD %sf\n", cFloat(o.Kp), cFloat(o.Ki), cFloat(o.Kd))
}

// cFloat writes a binary32 so that a C compiler reads the same bits.
func cFloat(v float64) string { return fmt.Sprintf("%.8e", float32(v)) }
