package design

import (
	"math"
	"strings"
	"testing"

	"gainwright/tune/model"
)

// formulasByID pairs the check vectors of testdata/rules.json with our formulas.
// Rules of the file that are not here: variants of Cohen–Coon and of the
// ultimate-cycle rule that are not offered, rules for plants without lag or with
// two integrators, and rules in motor units that are the same formula.
var formulasByID = map[string]formula{
	"zn_step_pi": zieglerNicholsStepPI, "zn_step_pid": zieglerNicholsStepPID,
	"zn_ult_pi": zieglerNicholsUltimatePI, "zn_ult_pid": zieglerNicholsUltimatePID,
	"tl_pi": tyreusLuybenPI, "tl_pid": tyreusLuybenPID,
	"cc_pi": cohenCoonPI, "cc_pid": cohenCoonPID,
	"chr_sp0_pi": chrSetpoint0PI, "chr_sp0_pid": chrSetpoint0PID,
	"chr_sp20_pi": chrSetpoint20PI, "chr_sp20_pid": chrSetpoint20PID,
	"chr_ld0_pi": chrLoad0PI, "chr_ld0_pid": chrLoad0PID,
	"chr_ld20_pi": chrLoad20PI, "chr_ld20_pid": chrLoad20PID,
	"lambda_pi": lambdaPI, "imc_pi": imcPI, "imc_pi_improved": imcImprovedPI, "imc_pid": imcPID,
	"simc_pi_foptd": simcPI, "simc_pid_soptd": simcPID,
	"simc_pi_integrating": simcIntegratingPI, "simc_pid_integrating_lag": simcIntegratingLagPID,
	"simc_improved_pi": simcImprovedPI, "simc_improved_pid": simcImprovedPID,
	"amigo_step_pi": amigoStepPI, "amigo_step_pid": amigoStepPID,
	"amigo_step_pi_int": amigoIntegratingPI, "amigo_step_pid_int": amigoIntegratingPID,
	"amigo_freq_pi": amigoFrequencyPI, "amigo_freq_pid": amigoFrequencyPID,
	"fbs_improved_zn_pi_step": improvedZieglerNicholsStepPI, "fbs_improved_zn_pi_freq": improvedZieglerNicholsUltimatePI,
	"mo_pi": modulusOptimumPI, "mo_pid": modulusOptimumPID,
	"so_pi": symmetricalOptimumPI, "so_pid": symmetricalOptimumPID,
	"pp_pi_first_order": polePlacementPI, "pp_pi_integrator": polePlacementIntegratingPI, "pp_pid_motor_b": polePlacementPID,
}

func TestFormulasAgainstCheckVectors(t *testing.T) {
	var rules []struct {
		ID     string
		Vector struct {
			Inputs   map[string]float64
			Gains    map[string]float64
			Parallel map[string]float64 `json:"parallel_unfiltered"`
		} `json:"check_vector"`
	}
	readJSON(t, "testdata/rules.json", &rules)
	checked := 0
	for _, r := range rules {
		f := formulasByID[r.ID]
		if f == nil {
			continue
		}
		checked++
		in := r.Vector.Inputs
		g := f(params{
			K: in["K"], T: in["T"], L: in["L"], Lam: in["lam"], Tc: in["tc"], Kv: in["Kv"], Ku: in["Ku"], Pu: in["Pu"],
			T1: in["T1"], T2: in["T2"], Ts: in["Ts"], T0: in["T0"], A1: in["a1"], A2: in["a2"],
			Zeta: in["zeta"], W0: in["w0"], Alpha: in["alpha"],
		})
		want := r.Vector.Parallel
		if want == nil {
			want = r.Vector.Gains // stated in the parallel form
		}
		p := g.Parallel()
		for name, got := range map[string]float64{"kp": p.Kp, "ki": p.Ki, "kd": p.Kd} {
			if math.Abs(got-want[name]) > 1e-12*math.Abs(want[name])+1e-15 {
				t.Errorf("%s: %s: got %.15g, want %.15g", r.ID, name, got, want[name])
			}
		}
	}
	if checked != len(formulasByID) {
		t.Errorf("checked %d formulas, want %d", checked, len(formulasByID))
	}
}

// The tangent and the half rule, read from the model, against values computed
// by two libraries (testdata/PROVENANCE.md).
func TestFactsAgainstReference(t *testing.T) {
	type fotd struct{ L, T, T63 float64 }
	type half struct{ T, L, T1, T2, Kv float64 }
	var f struct {
		Plants []struct {
			ID       string
			Num, Den []float64
			Delay    float64
			Tangent  *fotd
			Half     map[string]half `json:"half_rule"`
		}
	}
	readJSON(t, "testdata/loops.json", &f)
	tangents, halves := 0, 0
	near := func(id, what string, got, want, rel float64) {
		if !(math.Abs(got-want) <= rel*math.Abs(want)+1e-12) {
			t.Errorf("%s: %s: got %.12g, want %.12g", id, what, got, want)
		}
	}
	for _, p := range f.Plants {
		got, err := newFacts(model.Linear{Num: p.Num, Den: p.Den, DeadTime: p.Delay}, 0, 0)
		if err != nil {
			t.Errorf("%s: %v", p.ID, err)
			continue
		}
		if p.Tangent != nil && got.velocity == 0 {
			tangents++
			near(p.ID, "tangent dead time", got.tangentDead, p.Tangent.L, 1e-7)
			near(p.ID, "tangent lag", got.tangentTau, p.Tangent.T, 1e-7)
			near(p.ID, "63 % lag", got.tau63, p.Tangent.T63, 1e-7)
		}
		for kind, want := range p.Half {
			tol := 1e-4
			if strings.HasPrefix(p.ID, "P4_") {
				tol = 2e-2 // the roots of an eightfold pole come out apart by so much
			}
			switch kind {
			case "first":
				halves++
				tau, dead, err := got.first()
				if err != nil {
					t.Errorf("%s: %v", p.ID, err)
				}
				near(p.ID, "half rule lag", tau, want.T, tol)
				near(p.ID, "half rule dead time", dead, want.L, tol)
			case "integrating":
				halves++
				kv, dead, err := got.integrating()
				if err != nil {
					t.Errorf("%s: %v", p.ID, err)
				}
				near(p.ID, "velocity gain", kv, want.Kv, 1e-9)
				near(p.ID, "half rule dead time", dead, want.L, 1e-9)
			}
		}
	}
	if tangents != 30 || halves != 33 {
		t.Errorf("compared %d tangents and %d half rules, want 30 and 33", tangents, halves)
	}
}

func TestGainsForms(t *testing.T) {
	// Series to ideal and back; the identity holds for every ti ≥ 4·td (Åström &
	// Hägglund 1995; from memory).
	g := Gains{Form: FormSeries, Kc: 0.8, Ti: 0.05, Td: 0.01, SetpointWeight: 1}
	i, err := g.To(FormIdeal)
	if err != nil {
		t.Fatal(err)
	}
	f := 1 + 0.01/0.05
	for what, pair := range map[string][2]float64{"kp": {i.Kp, 0.8 * f}, "ti": {i.Ti, 0.06}, "td": {i.Td, 0.01 / f}} {
		if math.Abs(pair[0]-pair[1]) > 1e-15 {
			t.Errorf("%s: got %.15g, want %.15g", what, pair[0], pair[1])
		}
	}
	s, err := i.To(FormSeries)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(s.Kc-0.8) > 1e-12 || math.Abs(s.Ti-0.05) > 1e-12 || math.Abs(s.Td-0.01) > 1e-12 {
		t.Errorf("series came back as kc %g ti %g td %g", s.Kc, s.Ti, s.Td)
	}
	if _, err := (Gains{Form: FormIdeal, Kp: 1, Ti: 0.03, Td: 0.01}).To(FormSeries); err == nil {
		t.Error("ti < 4·td has no series form, yet one was given")
	}
}
