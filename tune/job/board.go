package job

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"time"

	"gainwright/protocol"
	"gainwright/safety"
	"gainwright/tune/sheet"
)

// doIdentity asks the board what it is, keeps what it holds, and has it hold the
// limits of the rig file.
func (j *Job) doIdentity() (result, error) {
	if err := j.readIdentity(); err != nil {
		return "", err
	}
	if err := j.takeRig(); err != nil {
		return "", err
	}
	if err := j.readGains(); err != nil {
		return "", err
	}
	found, err := j.snapshot()
	if err != nil {
		return "", err
	}
	if j.FoundRec == nil {
		j.FoundRec, j.Found = found, j.Running.Clone()
		if err := j.h.Keep("as-found", "board", found); err != nil {
			return "", err
		}
		if err := j.lookBack(found); err != nil {
			return "", err
		}
	}
	j.showFound()
	if why := j.lookOnly(); why != "" {
		return result(fmt.Sprintf("board %s, as-found saved; look-only", j.ID.Board)), nil
	}
	if why := j.ID.LookOnly(); why != "" {
		return "", refuse(701, "look-only", why, "this board can be looked at, not driven")
	}
	if err := j.fits(); err != nil {
		return "", err
	}
	if err := j.holdLimits(j.limitValues(), safety.LimitWrite{At: j.h.Now()}); err != nil {
		return "", err
	}
	since := ""
	if n := len(j.differences); n > 0 {
		since = fmt.Sprintf(", %d differences from %s (page x)", n, j.earlierName())
	}
	return result(fmt.Sprintf("board %s, as-found saved, %d limits held%s", j.ID.Board, len(j.Limits), since)), nil
}

// takeRig puts the rig file's envelope in force and keeps the file.
func (j *Job) takeRig() error {
	if f := j.FoundRec; f != nil && f.BoardID != j.ID.Board {
		return refuse(718, "another board", fmt.Sprintf("this job was begun on board %q, this is %q", f.BoardID, j.ID.Board), "connect the board again, or leave and begin a job of its own")
	}
	if b := j.Rig.Board; b != "" && b != j.ID.Board {
		return refuse(718, "another board", fmt.Sprintf("the rig file is for board %q, this is %q", b, j.ID.Board), "use the rig file of this board, or correct it")
	}
	if len(j.RigText) == 0 {
		if err := j.askNameplate(); err != nil {
			return err
		}
	}
	if err := j.takeOrder(); err != nil {
		return err
	}
	j.Env = j.Rig.Envelope()
	j.inputsNamed()
	j.ticked = false // the limiter forgets it with the rig file before
	j.h.Rig(j.Env)
	j.h.Connected(j.ID, j.lookOnly())
	if j.FoundRec != nil {
		return nil
	}
	ids := map[string]string{}
	for _, l := range j.IDLines {
		k, v, _ := strings.Cut(l, " ")
		ids[k] = strings.TrimSpace(ids[k] + " " + v)
	}
	if err := j.h.Keep("identity", "board", ids); err != nil {
		return err
	}
	if err := j.h.KeepText("rig", j.Rig.Name, string(j.RigText)); err != nil {
		return err
	}
	if o := j.opt.Order; o != nil {
		if err := j.h.KeepText("job", o.Name, string(o.Text)); err != nil {
			return err
		}
	}
	r := j.Rig
	return j.h.Keep("rig", "nameplate", sheet.NameplateRecord{RigFile: r.Name, MotorSerial: r.Motor.Serial, NominalV: sheet.Known(r.Motor.VoltageRated),
		CountsPerTurn: sheet.Known(r.CountsPerMotorTurn()), EncoderLines: sheet.Known(r.Encoder.CountsPerTurn / 4), Gear: fmt.Sprintf("%g:1", r.Encoder.GearRatio)})
}

func (j *Job) readIdentity() error {
	a, err := j.h.Request(protocol.VerbID, "")
	if err != nil {
		if l := j.h.Line(); errors.Is(err, protocol.ErrNoAnswer) && l.BadLines > 0 && l.Samples+l.Lines == 0 {
			return refuse(761, "no identity", fmt.Sprintf("%d lines came, every one with a wrong check code or malformed", l.BadLines),
				"look at the baud rate first; if it is right, the firmware works out its CRC in another way (SPEC P1)")
		}
		if errors.Is(err, protocol.ErrNoAnswer) {
			return refuse(702, "no identity", "the board does not answer id, or answers nonsense", "look at cable, power and baud rate; the board must speak protocol 1.x")
		}
		return err
	}
	id, err := protocol.ParseIdentity(a.Lines)
	if err != nil {
		return refuse(703, "identity not understood", err.Error(), "the board's firmware has to be mended; until then it is look-only")
	}
	j.ID, j.IDLines = id, a.Lines
	j.h.Connected(id, j.lookOnly())
	return j.startTelemetry()
}

// startTelemetry asks for the quickest rate that the line carries.
func (j *Job) startTelemetry() error {
	var last error
	for _, hz := range []int{500, 250, 200, 125, 100, 50, 40, 25, 20, 10} {
		_, err := j.h.Request(protocol.VerbRate, fmt.Sprintf("%d x tu", hz))
		var ref *protocol.RefusedError
		if errors.As(err, &ref) && (ref.Refusal == protocol.RefLineFull || ref.Refusal == protocol.RefArgument) {
			last = err
			continue
		}
		if err != nil {
			return err
		}
		j.Hz = hz
		j.h.Stream(true)
		if j.FoundRec != nil { // seen before; just after a restart old numbers are still about
			return nil
		}
		return j.numbered()
	}
	return last
}

// staleShare is the share of doubled samples above which their numbers say
// nothing; a few come where a line is retried.
const staleShare = 0.03

// numbered sees that telemetry counts its samples: freshness is judged by that.
func (j *Job) numbered() error {
	before := j.h.Line()
	if _, err := j.h.Watch(300 * time.Millisecond); err != nil {
		return err
	}
	now := j.h.Line()
	stale, good := now.Stale-before.Stale, now.Samples-before.Samples
	if float64(stale) > staleShare*float64(stale+good) && stale > 1 {
		return refuse(726, "telemetry", fmt.Sprintf("%d of %d samples repeat a number or come out of order", stale, stale+good),
			"the firmware has to number its samples one by one (SPEC P5); until then the board is look-only")
	}
	return nil
}

// fits refuses a board that is not the one the rig file describes.
func (j *Job) fits() error {
	id := j.ID
	if want, got := j.Rig.Encoder.CountsPerTurn, id.CountsPerTurn; got > 0 && want > 0 && math.Abs(got/want-1) > 1e-6 {
		return refuse(704, "counts per turn differ", fmt.Sprintf("the board counts %g a turn, the rig file says %g", got, want),
			"correct the one that is wrong; the count check shows which")
	}
	if id.VoltsMax > 0 && float64(j.Env.VoltsMax) > id.VoltsMax {
		return refuse(705, "limit over the board's own", fmt.Sprintf("the rig file allows %g V, the board's hard limit is %g V", j.Env.VoltsMax, id.VoltsMax),
			"lower the limit in the rig file")
	}
	if id.SpeedMax > 0 && float64(j.Env.SpeedMax) > id.SpeedMax {
		return refuse(705, "limit over the board's own", fmt.Sprintf("the rig file allows %.0f rpm, the board's hard limit is %.0f rpm", j.Env.SpeedMax.RPM(), id.SpeedMax*60/(2*math.Pi)),
			"lower the limit in the rig file")
	}
	if want := j.Rig.Stop.Off; want != "" && want != "any" && id.OffMeans != want {
		return refuse(785, "output off means something else", fmt.Sprintf("the rig file asks for a board whose output off is %q, this one does %q", want, id.OffMeans),
			"use the board the rig was laid out for, or correct stop.off in the rig file")
	}
	if id.Input == "A" {
		return refuse(706, "current-mode drive", "the board takes amperes, not volts", "this console drives voltage and duty drives only")
	}
	return nil
}

// limitValues are the values for the board's slots, by name.
func (j *Job) limitValues() map[string]float64 {
	e := j.Env
	v := map[string]float64{
		protocol.LimVolts: float64(e.VoltsMax), protocol.LimSpeed: float64(e.SpeedMax), protocol.LimCurrent: 0,
		protocol.LimBusMax: float64(e.BusMax), protocol.LimBusMin: float64(e.BusMin), protocol.LimAccel: e.AccelMax,
		protocol.LimTurns: e.TurnsMax, protocol.LimStall: e.StallTime.Seconds(), protocol.LimWrong: e.WrongWayTime.Seconds(),
		protocol.LimNoCount: e.StallTime.Seconds(), protocol.LimBreak: float64(e.StallVolts),
		protocol.LimHeat: float64(e.CurrentContinuous*e.CurrentContinuous) * e.HeatTau.Seconds(),
		protocol.LimRun:  e.RunTimeMax.Seconds(), protocol.LimBeat: e.BoardTimeout.Seconds(), protocol.LimSlew: e.SlewMax,
	}
	if j.ID.Scales.CurrentLSB > 0 {
		v[protocol.LimCurrent] = float64(e.CurrentMax)
	} else {
		v[protocol.LimHeat] = 0
	}
	if !j.ID.BusMeasured {
		v[protocol.LimBusMax], v[protocol.LimBusMin] = 0, 0
	}
	return v
}

// limitUnits are the units of SPEC.md P7.1.
var limitUnits = map[string]string{"vmax": "V", "wmax": "rad/s", "imax": "A", "bmax": "V", "bmin": "V", "amax": "rad/s²",
	"turns": "turns", "stall": "s", "wrong": "s", "nocnt": "s", "vbreak": "V", "heat": "A²s", "run": "s", "beat": "s", "slew": "V/s"}

// holdLimits stages the limits, puts them in use as one set and reads every one
// back. Only when all are equal bit for bit is the limiter told so.
func (j *Job) holdLimits(values map[string]float64, ask safety.LimitWrite) error {
	bits, err := j.limitBits(values)
	if err != nil {
		return err
	}
	if err := j.h.Permit(ask); err != nil {
		return err
	}
	err = j.writeLimits(bits)
	j.h.Wrote(err == nil)
	if err != nil {
		return err
	}
	j.LimitsCRC = protocol.SetCRC(bits)
	j.Limits = nil
	for i, name := range j.ID.LimitNames {
		v := float64(math.Float32frombits(bits[i]))
		j.Limits = append(j.Limits, sheet.Quantity{Name: name, Value: &v, Unit: limitUnits[name], Why: "held by the board, read back equal"})
	}
	j.h.LimitsHeld(j.LimitsCRC)
	return j.h.Keep("event", sheet.NameLimitsHeld, sheet.EventRecord{What: "limits held by the board", Detail: fmt.Sprintf("%d limits, read back equal bit for bit", len(j.Limits)), Limits: j.Limits})
}

func (j *Job) limitBits(values map[string]float64) ([]uint32, error) {
	bits := make([]uint32, len(j.ID.LimitNames))
	for i, name := range j.ID.LimitNames {
		v, ok := values[name]
		if !ok {
			return nil, refuse(707, "limit not known", fmt.Sprintf("the board holds a limit %q that this program does not know", name),
				"use a newer program, or firmware that leaves it out")
		}
		bits[i] = math.Float32bits(float32(v))
	}
	for _, name := range []string{protocol.LimVolts, protocol.LimSpeed, protocol.LimBeat} {
		if !contains(j.ID.LimitNames, name) {
			return nil, refuse(708, "limit missing", fmt.Sprintf("the board holds no limit %q", name), "such a board is look-only")
		}
	}
	return bits, nil
}

func (j *Job) writeLimits(bits []uint32) error {
	for i, b := range bits {
		if _, err := j.whenStill(protocol.VerbLimit, fmt.Sprintf("set %d %08X", i, b)); err != nil {
			return fmt.Errorf("limit %s: %w", j.ID.LimitNames[i], err)
		}
	}
	if _, err := j.whenStill(protocol.VerbLimit, fmt.Sprintf("use %04X", protocol.SetCRC(bits))); err != nil {
		return err
	}
	for i, b := range bits {
		a, err := j.h.Request(protocol.VerbLimit, fmt.Sprintf("get %d", i))
		if err != nil {
			return err
		}
		got, ok := protocol.ParseHex32([]byte(a.Field(2)))
		if !ok || got != b || a.Field(1) != j.ID.LimitNames[i] {
			return refuse(709, "limits not held", fmt.Sprintf("the board answers %q for %s, sent was %08X", a.Joined(), j.ID.LimitNames[i], b),
				"do not drive with this board until its firmware is mended")
		}
	}
	return nil
}

// readGains reads the running and the stored set.
func (j *Job) readGains() error {
	var err error
	if j.Running, err = j.readSet("run"); err != nil {
		return err
	}
	j.Stored, err = j.readSet("store")
	return err
}

func (j *Job) readSet(which string) (GainSet, error) {
	s := newGainSet(j.ID)
	for i, name := range s.Names {
		a, err := j.h.Request(protocol.VerbGain, fmt.Sprintf("get %s %d", which, i))
		if err != nil {
			return s, err
		}
		bits, ok := protocol.ParseHex32([]byte(a.Field(2)))
		if !ok || a.Field(1) != name {
			return s, fmt.Errorf("gain %s: the board answers %q", name, a.Joined())
		}
		s.Bits = append(s.Bits, bits)
	}
	a, err := j.h.Request(protocol.VerbGain, "crc "+which)
	if err != nil {
		return s, err
	}
	if crc, ok := protocol.ParseHex16([]byte(a.Field(0))); !ok || crc != s.CRC() {
		return s, fmt.Errorf("gains (%s): the board's check code %s is not that of what it sent, %04X", which, a.Field(0), s.CRC())
	}
	return s, nil
}

// writeSet stages a set, swaps it in, reads it back and compares bit for bit.
func (j *Job) writeSet(s GainSet) (back GainSet, err error) {
	for i, b := range s.Bits {
		if _, err := j.whenStill(protocol.VerbGain, fmt.Sprintf("set %d %08X", i, b)); err != nil {
			return back, fmt.Errorf("gain %s: %w", s.Names[i], err)
		}
	}
	if _, err := j.whenStill(protocol.VerbGain, fmt.Sprintf("use %04X", s.CRC())); err != nil {
		return back, err
	}
	return j.readSet("run")
}

// snapshot is the board as it stands.
func (j *Job) snapshot() (*sheet.Snapshot, error) {
	id := j.ID
	boots := int(id.Boots)
	s := &sheet.Snapshot{BoardID: id.Board, Firmware: id.Firmware, Protocol: fmt.Sprintf("%d.%d", id.ProtoMajor, id.ProtoMinor),
		Identity: map[string]string{}, BootCount: &boots, AmbientDegC: j.Ambient, LoadState: j.Rig.Load.State}
	for _, l := range j.IDLines {
		k, v, _ := strings.Cut(l, " ")
		s.Identity[k] = strings.TrimSpace(s.Identity[k] + " " + v)
	}
	var err error
	if s.Running, err = rawJSON(gainRecord(j.Running, id, float64(j.Env.VoltsMax))); err != nil {
		return nil, err
	}
	if s.Stored, err = rawJSON(gainRecord(j.Stored, id, float64(j.Env.VoltsMax))); err != nil {
		return nil, err
	}
	for i, name := range id.LimitNames {
		a, err := j.h.Request(protocol.VerbLimit, fmt.Sprintf("get %d", i))
		if err != nil {
			return nil, err
		}
		bits, ok := protocol.ParseHex32([]byte(a.Field(2)))
		if !ok {
			return nil, fmt.Errorf("limit %s: the board answers %q", name, a.Joined())
		}
		v := float64(math.Float32frombits(bits))
		s.Limits = append(s.Limits, sheet.Quantity{Name: name, Value: &v, Unit: limitUnits[name]})
	}
	if s.BusV, err = j.busNow(); err != nil {
		return nil, err
	}
	s.Flags = []string{"reset cause " + id.ResetCause}
	if !j.Running.Equal(j.Stored) {
		s.Flags = append(s.Flags, "running and stored gains differ")
	}
	return s, nil
}

// busNow is the bus voltage at rest, nil where the board does not measure it or
// sends no telemetry.
func (j *Job) busNow() (*float64, error) {
	if !j.ID.BusMeasured {
		return nil, nil
	}
	samples, err := j.h.Watch(100 * time.Millisecond)
	if err != nil {
		return nil, err
	}
	var v []float64
	for _, x := range samples {
		if x.Has&protocol.HasBus != 0 {
			v = append(v, float64(x.Bus))
		}
	}
	if len(v) == 0 {
		return nil, nil
	}
	return sheet.Known(mean(v)), nil
}

// showFound puts the as-found state on the screens.
func (j *Job) showFound() {
	id := j.ID
	f := &FoundView{Same: j.Running.Equal(j.Stored), Lines: []Fact{
		{Name: "board", Value: id.Board}, {Name: "firmware", Value: id.Firmware},
		{Name: "protocol", Value: fmt.Sprintf("%d.%d", id.ProtoMajor, id.ProtoMinor)},
		{Name: "starts", Value: fmt.Sprintf("%d, last by %s", id.Boots, id.ResetCause)},
		{Name: "loop period", Value: fmt.Sprintf("%.3f ms", id.Loop.Seconds()*1000)},
		{Name: "law", Value: strings.ToUpper(id.Law) + ", " + id.Form + ", " + id.Discretisation},
		{Name: "drive", Value: fmt.Sprintf("%s, %d quadrant, off = %s", id.Input, id.Quadrants, id.OffMeans)},
		{Name: "encoder", Value: fmt.Sprintf("%g counts a turn, on the %s shaft", id.CountsPerTurn, id.EncoderSide)},
	}}
	for i, n := range j.Running.Names {
		f.Running = append(f.Running, Fact{Name: n, Value: number(j.Running.at(i)) + " " + gainUnits[n]})
	}
	for i, n := range j.Stored.Names {
		f.Stored = append(f.Stored, Fact{Name: n, Value: number(j.Stored.at(i)) + " " + gainUnits[n]})
	}
	j.h.Show(func(v *View) { v.Found, v.Board, v.Rig = f, id.Board, j.Rig.Name })
}
