package sheet

import (
	"encoding/json"
	"fmt"
	"strings"
)

func (p *reportPage) fits() {
	p.section("What the motor is")
	newest, _ := p.r.Last(KindFit, NameMotor) // the earlier ones hold no more than it
	for _, l := range p.r.Find(KindFit, "") {
		var err error
		switch l.Name() {
		case NameStaircase:
			err = show(p, l, p.staircase)
		case NameBreakaway:
			err = show(p, l, p.breakaway)
		case NameMotor:
			if l.Number == newest.Number {
				err = show(p, l, p.motor)
			}
		default:
			err = show(p, l, p.fit)
		}
		if err != nil {
			p.loud("cannot be shown: " + err.Error())
		}
	}
}

func show[T any](p *reportPage, l Line, f func(Line, T)) error {
	var v T
	if err := p.r.JSON(l, &v); err != nil {
		return err
	}
	f(l, v)
	return nil
}

func (p *reportPage) fit(l Line, f FitRecord) {
	p.sub(fmt.Sprintf("Model %s: %s", f.Kind, orNone(f.Verdict)))
	p.para(strings.Join(f.Reasons, "; "))
	if f.Helps != "" {
		p.para("what would help: " + f.Helps)
	}
	p.quantities("parameter", f.Params)
	p.table([]string{"judged by", "value", "why"}, [][]string{
		{"NRMSE", digits(f.NRMSE) + " (1)", "‖y − ŷ‖ / ‖y − mean y‖ of the simulated output over " + files(f.InputFiles)},
		{"NRMSE, hold-out", digits(f.HoldoutNRMSE) + " (1)", "the same on data not used in the fit: " + files(f.HoldoutFiles)},
		{"VAF", four(f.VAF) + " %", "1 − var(y − ŷ)/var y"},
		{"whiteness", digits(f.WhitenessP) + " (1)", "probability of such residuals if they were white"},
		{"samples used", fmt.Sprint(f.Used), "masked: " + counts(f.Masked)},
	})
	if f.Curve == nil {
		return
	}
	c := f.Curve
	p.raw("%s", plot{title: "fit over its data", xLabel: "time, s", yLabel: "speed, rpm", series: []series{
		{name: "measured", x: c.TimeS, y: allRPM(c.MeasuredRadS)}, {name: "model", x: c.TimeS, y: allRPM(c.FittedRadS)},
	}}.svg())
	n := min(len(c.MeasuredRadS), len(c.FittedRadS))
	residual := make([]float64, n)
	for i := range n {
		residual[i] = c.MeasuredRadS[i] - c.FittedRadS[i]
	}
	p.raw("%s", plot{title: "residual: measured less model", xLabel: "time, s", yLabel: "rpm", height: 160,
		series: []series{{name: "residual", x: c.TimeS, y: allRPM(residual)}}, horizontal: []mark{{0, ""}}}.svg())
}

func (p *reportPage) staircase(l Line, s StaircaseRecord) {
	p.sub("Staircase")
	p.quantities("parameter", s.Params)
	up, down := series{name: "rising", points: true}, series{name: "falling", points: true}
	for _, v := range s.Levels {
		to := &down
		if v.Rising {
			to = &up
		}
		to.x, to.y = append(to.x, v.VoltageV), append(to.y, v.SpeedRadS)
	}
	up.y, down.y = allRPM(up.y), allRPM(down.y)
	p.raw("%s", plot{title: "staircase: steady speed over voltage", xLabel: "voltage, V", yLabel: "speed, rpm", series: []series{up, down}}.svg())
}

func (p *reportPage) breakaway(l Line, b BreakawayRecord) {
	p.sub("Breakaway")
	p.quantities("parameter", b.Params)
	count := func(y []float64) []float64 {
		x := make([]float64, len(y))
		for i := range x {
			x[i] = float64(i + 1)
		}
		return x
	}
	p.raw("%s", plot{title: "breakaway voltage of each ramp", xLabel: "ramp (1)", yLabel: "V", height: 180, series: []series{
		{name: "forward", x: count(b.ForwardV), y: b.ForwardV, points: true}, {name: "reverse", x: count(b.ReverseV), y: b.ReverseV, points: true},
	}}.svg())
}

// motorWhy says where each quantity of the motor comes from.
var motorWhy = map[string]string{
	"counts per turn": "rig file; seen by the count check", "sign": "seen by the sign check", "gear ratio": "rig file",
	"R at 25 °C": "slope of current over volts before the first motion, brought to 25 °C with copper's coefficient; with leads and driver",
	"Ke":         "V − R·I over speed on the levels of the staircase", "J": "tau·Ke/(K·R), inductance left out",
	"Coulomb friction": "Ke·I of the levels, drawn down to speed 0", "no-load current": "fastest forward level of the staircase",
	"breakaway forward": "mean of the ramps", "breakaway reverse": "mean of the ramps", "gain K": "the chosen model", "time constant": "the chosen model",
	"dead time": "the chosen model", "phase margin": "the proposal on the chosen model", "overshoot": "the worst step of verify",
}

func (p *reportPage) motor(l Line, m MotorRecord) {
	p.sub("Motor, as this job knows it")
	var rows [][]string
	for _, q := range quantities {
		if v := q.of(m); v != nil {
			value := significant(*v, 4)
			if q.unit != "1" {
				value += " " + q.unit
			}
			rows = append(rows, []string{q.name, value, motorWhy[q.name]})
		}
	}
	p.table([]string{"quantity", "value", "why"}, rows)
}

func (p *reportPage) proposals() {
	p.section("Proposals")
	each(p, KindProposal, func(l Line, r ProposalRecord) {
		title := "Rule " + r.Rule
		if r.Chosen {
			title += ": chosen"
		}
		p.sub(title)
		if r.Refused != "" {
			p.para("refused: " + r.Refused)
			return
		}
		p.para("computed from " + files(r.InputFiles))
		p.para(strings.Join(r.Notes, "; "))
		p.quantities("figure", r.Figures)
		p.contract("gains", r.Gains)
		p.contract("margins", r.Margins)
		p.contract("worst case", r.Worst)
		if r.Bode != nil {
			p.bode(*r.Bode)
		}
	})
}

// contract shows one of the fixed JSON forms, whose keys name their units.
func (p *reportPage) contract(title string, raw json.RawMessage) {
	rows := flat(raw)
	for i, r := range rows {
		if u := gainUnits[r[0]]; u != "" && u != "1" && r[1] != "null" {
			rows[i][1] += " " + u
		}
	}
	p.table([]string{title + " (SI; units as the key names)", "value"}, rows)
}

// bode draws the open loop with its two margins where they are read off.
func (p *reportPage) bode(b Bode) {
	x := "frequency, rad/s"
	magnitude := plot{title: "open loop: magnitude", xLabel: x, yLabel: "dB", logX: true, horizontal: []mark{{0, "0 dB"}}}
	phase := plot{title: "open loop: phase", xLabel: x, yLabel: "deg", logX: true, horizontal: []mark{{-180, "-180 deg"}}}
	magnitude.series = []series{{name: "best fit", x: b.FrequencyRadS, y: b.MagnitudeDB}}
	phase.series = []series{{name: "best fit", x: b.FrequencyRadS, y: b.PhaseDeg}}
	if len(b.WorstMagnitudeDB) > 0 {
		magnitude.series = append(magnitude.series, series{name: "worst case", x: b.FrequencyRadS, y: b.WorstMagnitudeDB})
		phase.series = append(phase.series, series{name: "worst case", x: b.FrequencyRadS, y: b.WorstPhaseDeg})
	}
	if b.CrossoverRadS != nil {
		words := "phase margin " + with(b.PhaseMarginDeg, "deg")
		magnitude.vertical = append(magnitude.vertical, mark{*b.CrossoverRadS, "gain crossover"})
		phase.vertical = append(phase.vertical, mark{*b.CrossoverRadS, words})
	}
	if b.PhaseCrossRadS != nil {
		magnitude.vertical = append(magnitude.vertical, mark{*b.PhaseCrossRadS, "gain margin " + with(b.GainMarginDB, "dB")})
		phase.vertical = append(phase.vertical, mark{*b.PhaseCrossRadS, "phase crossover"})
	}
	p.raw("%s%s", magnitude.svg(), phase.svg())
}

func (p *reportPage) pushes() {
	p.section("Pushed and stored")
	each(p, KindPush, func(l Line, r PushRecord) {
		p.sub(fmt.Sprintf("%s: to RAM, read back identical: %s", l.Time.Format("15:04:05"), yesNo(r.Identical)))
		p.para(r.Finding)
		p.sideBySide([]string{"gain", "old", "new", "read back"}, r.Old, r.New, r.ReadBack)
		p.para("confirmed by typing " + orNone(r.Confirmed))
	})
	each(p, KindStore, func(l Line, r StoreRecord) {
		p.sub(l.Time.Format("15:04:05") + ": stored")
		p.para(r.Finding)
		p.table([]string{"", ""}, [][]string{{"stored", yesNo(r.Stored)}, {"power-cycled", yesNo(r.PowerCycled)}, {"re-read identical", yesNo(r.Identical)}})
		p.sideBySide([]string{"gain", "re-read"}, r.ReRead)
	})
}

func (p *reportPage) verifies() {
	p.section("Verify against forecast")
	each(p, KindVerify, func(l Line, v VerifyRecord) {
		p.sub(fmt.Sprintf("%s, load %s: %s", l.Name(), orNone(v.LoadState), passed(v.Passed)))
		p.para(v.Finding)
		var rows [][]string
		for _, t := range v.Targets {
			rows = append(rows, []string{t.Name, with(t.Measured, t.Unit), with(t.Forecast, t.Unit), t.Limit, passed(t.Passed), t.Why})
		}
		p.table([]string{"target", "measured", "forecast", "limit", "", "why"}, rows)
		if v.Curve != nil {
			p.raw("%s", verifyPlot(*v.Curve).svg())
		}
	})
}

func verifyPlot(c VerifyCurve) plot {
	out := plot{title: "verify against forecast", xLabel: "time, s", yLabel: "speed, rpm"}
	for _, s := range []struct {
		name string
		y    []float64
	}{{"measured", c.MeasuredRadS}, {"forecast", c.ForecastRadS}, {"setpoint", c.SetpointRadS}, {"last time", c.EarlierRadS}} {
		if len(s.y) > 0 {
			out.series = append(out.series, series{name: s.name, x: c.TimeS, y: allRPM(s.y)})
		}
	}
	if len(c.LowRadS) > 0 {
		out.bands = []band{{name: "worst case", x: c.TimeS, low: allRPM(c.LowRadS), high: allRPM(c.HighRadS)}}
	}
	return out
}

func files(list []string) string {
	if len(list) == 0 {
		return "no file named"
	}
	return strings.Join(list, ", ")
}

func counts(m map[string]int) string {
	if len(m) == 0 {
		return "none"
	}
	s := map[string]string{}
	for k, n := range m {
		s[k] = fmt.Sprint(n)
	}
	return pairs(s)
}
