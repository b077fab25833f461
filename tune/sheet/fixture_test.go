package sheet

import (
	"fmt"
	"math"
	"path/filepath"
	"testing"

	"gainwright/tune/trace"
)

// job holds what differs between the made-up jobs of the tests. The numbers are
// examples, not measurements.
type job struct {
	header    Header
	motor     MotorRecord
	remark    string
	outcome   string
	overshoot float64
}

func ptr[T any](v T) *T { return &v }

func exampleJob() job {
	return job{
		header: testHeader, remark: "belt squeaks above 2000 rpm", outcome: "accepted", overshoot: 0.4,
		motor: MotorRecord{
			ROhm: ptr(1.12), RDegC: ptr(24.0), KeVsPerRad: ptr(0.0452), JKgM2: ptr(1.6e-4),
			BreakawayForwardV: ptr(1.4), BreakawayReverseV: ptr(1.6), CountsPerTurn: ptr(2000.0), Sign: ptr(1.0),
			GainRadSPerV: ptr(21.4), TauS: ptr(0.088), DeadTimeS: ptr(0.0026), PhaseMarginDeg: ptr(87.0),
			OvershootPercent: ptr(0.4), OvershootTarget: ptr(10.0), LoadState: "coupled, dry",
		},
	}
}

func stepTrace(name string, to float64) *trace.Trace {
	tr := &trace.Trace{Name: name, Window: 0.001}
	for i := range 400 {
		t := float64(i) * 0.001
		tr.Time = append(tr.Time, t)
		tr.Voltage = append(tr.Voltage, to/21.4)
		tr.Setpoint = append(tr.Setpoint, to)
		tr.Speed = append(tr.Speed, to*(1-math.Exp(-math.Max(0, t-0.0026)/0.088)))
	}
	return tr
}

func speeds(to, tau float64) (t, y []float64) {
	for i := range 200 {
		t = append(t, float64(i)*0.002)
		y = append(y, to*(1-math.Exp(-t[i]/tau)))
	}
	return t, y
}

// write makes a sheet of the whole job and returns its folder.
func (j job) write(t testing.TB, dir string) string {
	t.Helper()
	s, err := Create(dir, j.header, testClock())
	if err != nil {
		t.Fatal(err)
	}
	entry := func(kind Kind, name string, v any) string {
		t.Helper()
		l, err := s.Entry(kind, name, v)
		if err != nil {
			t.Fatal(err)
		}
		return l.File
	}
	traced := func(name string, tr *trace.Trace) string {
		t.Helper()
		l, err := s.Trace(name, tr)
		if err != nil {
			t.Fatal(err)
		}
		return l.File
	}
	if _, err := s.Text(KindRig, j.header.Rig, "name = \"example\"\n"); err != nil {
		t.Fatal(err)
	}
	entry(KindRig, NameNameplate, NameplateRecord{
		RigFile: j.header.Rig + ".toml", MotorSerial: "88412", NominalV: ptr(24.0), EncoderLines: ptr(500.0),
		CountsPerTurn: ptr(2000.0), Gear: "1:1", NextCheck: "2026-11", Absent: []string{"brake"},
	})
	limits := []Quantity{
		{Name: "speed", Value: ptr(335.1), Unit: "rad/s"}, {Name: "current", Value: ptr(5.0), Unit: "A"},
		{Name: "bus", Value: ptr(30.0), Unit: "V"}, {Name: "stall", Value: ptr(0.4), Unit: "s"}, {Name: "link", Value: ptr(0.25), Unit: "s"},
	}
	found := Snapshot{
		BoardID: j.header.BoardID, Firmware: "fw 1.2", Limits: limits, BusV: ptr(24.0), AmbientDegC: ptr(19.0), LoadState: j.motor.LoadState,
		Running:      []byte(`{"form":"parallel","kp":0.021,"ki":2.2,"sample_time":0.001}`),
		StepResponse: &StepResult{StepRadS: ptr(20.9), OvershootPercent: ptr(34.0), SettlingTimeS: ptr(0.47), SettlingBandRadS: ptr(3.14), RippleRadS: ptr(1.47)},
	}
	found.TraceFiles = []string{traced("as-found", stepTrace("as-found", 20.9))}
	entry(KindAsFound, "board", found)
	entry(KindCheck, "silence", CheckRecord{Check: "silence", Layer: "board", Passed: ptr(true), Measured: []Quantity{{Name: "output off after", Value: ptr(0.251), Unit: "s"}}})
	entry(KindCheck, "stop", CheckRecord{Check: "stop", Layer: "laptop", Passed: ptr(true)})
	entry(KindCheck, "interlock", CheckRecord{Check: "guard", Layer: "hardware", Passed: ptr(false)})
	stepFile := traced("step", stepTrace("step", 128))
	entry(KindRun, "step", RunRecord{Name: "step", Purpose: "gain and time constant", TraceFile: stepFile, Reason: "plan done", Complete: true, Seed: 7, Versions: map[string]string{"gainwright": "test"}})
	entry(KindFit, NameBreakaway, BreakawayRecord{ForwardV: []float64{1.3, 1.4, 1.5}, ReverseV: []float64{1.5, 1.6, 1.8}})
	entry(KindFit, NameStaircase, StaircaseRecord{Levels: []Level{{VoltageV: 2, SpeedRadS: 12, Rising: true}, {VoltageV: 4, SpeedRadS: 55, Rising: true}, {VoltageV: 6, SpeedRadS: 98, Rising: true}, {VoltageV: 8, SpeedRadS: 141, Rising: true}, {VoltageV: 6, SpeedRadS: 99, Rising: false}, {VoltageV: 4, SpeedRadS: 56, Rising: false}}})
	ft, fy := speeds(128, 0.088)
	fitFile := entry(KindFit, "first-order", FitRecord{
		Kind: "first-order", Model: []byte(`{"kind":"first-order","num":[21.4],"den":[0.088,1],"dead_time":0.0026}`),
		Params: []Quantity{
			{Name: "gain", Value: j.motor.GainRadSPerV, Unit: "rad/s/V", PlusMinus: ptr(0.64), Why: "least squares over " + stepFile},
			{Name: "tau", Value: j.motor.TauS, Unit: "s", PlusMinus: ptr(0.005), Why: "the same fit"},
			{Name: "dead_time", Value: j.motor.DeadTimeS, Unit: "s", Why: "the same fit"},
		},
		InputFiles: []string{stepFile}, Used: 398, Masked: map[string]int{"saturated": 2}, NRMSE: ptr(0.02), HoldoutNRMSE: ptr(0.05),
		Verdict: "believed", Curve: &FitCurve{TimeS: ft, MeasuredRadS: fy, FittedRadS: fy},
	})
	entry(KindFit, NameMotor, j.motor)
	bode := &Bode{CrossoverRadS: ptr(19.0), PhaseMarginDeg: ptr(87.0), PhaseCrossRadS: ptr(420.0), GainMarginDB: ptr(27.0)}
	for w := 0.1; w < 1000; w *= 1.1 {
		bode.FrequencyRadS = append(bode.FrequencyRadS, w)
		bode.MagnitudeDB = append(bode.MagnitudeDB, 20*math.Log10(19/w))
		bode.PhaseDeg = append(bode.PhaseDeg, -90-w*0.0036*180/math.Pi)
	}
	gains := `{"form":"parallel","kp":0.0782,"ki":0.888,"sample_time":0.001}`
	entry(KindProposal, "largest-ki", ProposalRecord{
		Rule: "largest-ki", Chosen: true, Gains: []byte(gains), Margins: []byte(`{"phase_margin_deg":87,"gain_margin_db":27,"ms":1.05}`),
		InputFiles: []string{fitFile}, Figures: []Quantity{{Name: "phase margin", Value: ptr(87.0), Unit: "deg", Why: "exact loop with dead time"}}, Bode: bode,
	})
	entry(KindPush, "gains", PushRecord{New: []byte(gains), ReadBack: []byte(gains), Identical: ptr(true), Confirmed: j.header.Rig})
	vt, vy := speeds(20.9, 0.05)
	verifyFile := traced("verify", stepTrace("verify", 20.9))
	entry(KindVerify, "step", VerifyRecord{
		Passed: ptr(true), TraceFiles: []string{verifyFile}, LoadState: j.motor.LoadState,
		Targets: []Target{
			{Name: "overshoot", Unit: "%", Limit: "<= 10", Measured: ptr(j.overshoot), Forecast: ptr(0.0), Passed: ptr(true), Why: "largest sample over the setpoint"},
			{Name: "settling time", Unit: "s", Limit: "<= 0.3", Measured: ptr(0.2), Forecast: ptr(0.19), Passed: ptr(true)},
		},
		Step:  &StepResult{StepRadS: ptr(20.9), OvershootPercent: ptr(j.overshoot), SettlingTimeS: ptr(0.2), SettlingBandRadS: ptr(3.14), RippleRadS: ptr(0.94)},
		Curve: &VerifyCurve{TimeS: vt, MeasuredRadS: vy, ForecastRadS: vy},
	})
	entry(KindStore, "gains", StoreRecord{Stored: ptr(true), PowerCycled: ptr(true), Identical: ptr(true)})
	left := found
	left.Running, left.StepResponse, left.TraceFiles = []byte(gains), nil, []string{verifyFile}
	entry(KindAsLeft, "board", left)
	if _, err := s.Remark(j.remark); err != nil {
		t.Fatal(err)
	}
	if err := s.Close(j.outcome, ""); err != nil {
		t.Fatal(err)
	}
	return dir
}

func exampleDir(t testing.TB, n int) string {
	return filepath.Join(t.TempDir(), fmt.Sprintf("20251104-091200-pump-3-7a31-22-rec0%03d", n))
}
