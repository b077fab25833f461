package design

import "math"

// Laws that a design can ask for.
const (
	LawPI  = "pi"
	LawPID = "pid"
)

// RuleLargestKi is the name of our own rule.
const RuleLargestKi = "largest-ki"

// rule is a published rule for one law: where it applies, and its formula.
type rule struct {
	name, law, source string
	// apply checks the range and fills in the formula; notes say what a person
	// should know before trusting the outcome.
	apply func(f facts) (g Gains, notes []string, err error)
}

// Rules lists the names of all rules, our own first.
func Rules() []string {
	names := []string{RuleLargestKi}
	seen := map[string]bool{}
	for _, r := range published {
		if !seen[r.name] {
			seen[r.name] = true
			names = append(names, r.name)
		}
	}
	return names
}

const (
	sourceZN  = "Ziegler & Nichols, Trans. ASME 64 (1942) 759–768"
	sourceTL  = "Tyreus & Luyben, Ind. Eng. Chem. Res. 31 (1992) 2625–2628"
	sourceCC  = "Cohen & Coon, Trans. ASME 75 (1953) 827–834"
	sourceCHR = "Chien, Hrones & Reswick, Trans. ASME 74 (1952) 175–185"
	sourceLam = "Dahlin, Instrum. Control Syst. 41 (1968)"
	sourceIMC = "Rivera, Morari & Skogestad, Ind. Eng. Chem. Process Des. Dev. 25 (1986) 252–265"
	sourceSK  = "Skogestad, J. Process Control 13 (2003) 291–309"
	sourceGS  = "Grimholt & Skogestad, IFAC PID'12 and J. Process Control 70 (2018) 36–46"
	sourceAH  = "Åström & Hägglund, J. Process Control 14 (2004) 635–650"
	sourceAHF = "Åström & Hägglund, Advanced PID Control (2006), chapter 7"
	sourceFBS = "Åström & Murray, Feedback Systems, 2nd ed. (2021), eq. 11.10"
	sourceMO  = "Kessler, Regelungstechnik 3 (1955) 40–49"
	sourceSO  = "Kessler, Regelungstechnik 6 (1958) 395–400, 432–436"
	sourcePP  = "Åström & Hägglund, PID Controllers, 2nd ed. (1995), chapter 4"
)

var published = []rule{
	{"simc", LawPI, sourceSK, applySIMCPI},
	{"simc", LawPID, sourceSK, applySIMCPID},
	{"simc-improved", LawPI, sourceGS, halfRuled(simcImprovedPI, 0)},
	{"simc-improved", LawPID, sourceGS, halfRuled(simcImprovedPID, 0.5)},
	{"lambda", LawPI, sourceLam, applyLambda},
	{"imc", LawPI, sourceIMC, applyIMC(imcPI, 1.7)},
	{"imc", LawPID, sourceIMC, applyIMC(imcPID, 0.8)},
	{"imc-improved", LawPI, sourceIMC, applyIMC(imcImprovedPI, 1.7)},
	{"ziegler-nichols-step", LawPI, sourceZN, tangent(zieglerNicholsStepPI, 0.1, 1)},
	{"ziegler-nichols-step", LawPID, sourceZN, tangent(zieglerNicholsStepPID, 0.1, 1)},
	{"ziegler-nichols-ultimate", LawPI, sourceZN, ultimate(zieglerNicholsUltimatePI, false, 0)},
	{"ziegler-nichols-ultimate", LawPID, sourceZN, ultimate(zieglerNicholsUltimatePID, false, 0)},
	{"tyreus-luyben", LawPI, sourceTL, applyTyreusLuyben(tyreusLuybenPI)},
	{"tyreus-luyben", LawPID, sourceTL, applyTyreusLuyben(tyreusLuybenPID)},
	{"cohen-coon", LawPI, sourceCC, tangent(cohenCoonPI, 0.1, 1)},
	{"cohen-coon", LawPID, sourceCC, tangent(cohenCoonPID, 0.1, 1)},
	{"chien-hrones-reswick-setpoint", LawPI, sourceCHR, tangent(chrSetpoint0PI, 0, 1)},
	{"chien-hrones-reswick-setpoint", LawPID, sourceCHR, tangent(chrSetpoint0PID, 0, 1)},
	{"chien-hrones-reswick-setpoint-20", LawPI, sourceCHR, tangent(chrSetpoint20PI, 0, 1)},
	{"chien-hrones-reswick-setpoint-20", LawPID, sourceCHR, tangent(chrSetpoint20PID, 0, 1)},
	{"chien-hrones-reswick-load", LawPI, sourceCHR, tangent(chrLoad0PI, 0, 1)},
	{"chien-hrones-reswick-load", LawPID, sourceCHR, tangent(chrLoad0PID, 0, 1)},
	{"chien-hrones-reswick-load-20", LawPI, sourceCHR, tangent(chrLoad20PI, 0, 1)},
	{"chien-hrones-reswick-load-20", LawPID, sourceCHR, tangent(chrLoad20PID, 0, 1)},
	{"amigo-step", LawPI, sourceAH, applyAMIGOStep(amigoStepPI, amigoIntegratingPI)},
	{"amigo-step", LawPID, sourceAH, applyAMIGOStep(amigoStepPID, amigoIntegratingPID)},
	{"amigo-frequency", LawPI, sourceAHF, ultimate(amigoFrequencyPI, true, 0)},
	{"amigo-frequency", LawPID, sourceAHF, ultimate(amigoFrequencyPID, true, 0.2)},
	{"improved-ziegler-nichols-step", LawPI, sourceFBS, tangent63(improvedZieglerNicholsStepPI)},
	{"improved-ziegler-nichols-ultimate", LawPI, sourceFBS, ultimate(improvedZieglerNicholsUltimatePI, true, 0)},
	{"modulus-optimum", LawPI, sourceMO, applyModulusPI},
	{"modulus-optimum", LawPID, sourceMO, applyModulusPID},
	{"symmetrical-optimum", LawPI, sourceSO, applySymmetricalPI},
	{"symmetrical-optimum", LawPID, sourceSO, applySymmetricalPID},
	{"pole-placement", LawPI, sourcePP, applyPolePlacementPI},
	{"pole-placement", LawPID, sourcePP, applyPolePlacementPID},
}

func needDead(dead float64) error {
	if dead <= 0 {
		return refuse("there is no dead time to take the speed of the loop from: give the sample time of the loop, or a model with its dead time")
	}
	return nil
}

func selfRegulating(f facts) error {
	if f.velocity != 0 {
		return refuse("the model integrates; this rule is for plants that settle by themselves")
	}
	return nil
}

func applySIMCPI(f facts) (Gains, []string, error) {
	if f.velocity != 0 {
		kv, dead, err := f.integrating()
		if err == nil {
			err = needDead(dead)
		}
		return simcIntegratingPI(params{Kv: kv, L: dead, Tc: dead}), nil, err
	}
	return halfRuled(simcPI, 0)(f)
}

// halfRuled applies a SIMC formula to the half-rule model. tc is the dead time,
// or, for faster > 0, that part of it.
func halfRuled(apply formula, faster float64) func(facts) (Gains, []string, error) {
	return func(f facts) (Gains, []string, error) {
		if err := selfRegulating(f); err != nil {
			return Gains{}, nil, err
		}
		tau, dead, err := f.first()
		if err == nil {
			err = needDead(dead)
		}
		if err != nil {
			return Gains{}, nil, err
		}
		tc := dead
		if faster > 0 {
			tc *= faster
		}
		return apply(params{K: f.gain, T: tau, L: dead, Tc: tc}), nil, nil
	}
}

func applySIMCPID(f facts) (Gains, []string, error) {
	tau1, tau2, dead, err := f.second()
	if f.velocity != 0 && err == nil {
		tau2, dead = halfRule(f.lags, f.dead)
	}
	if err == nil {
		err = needDead(dead)
	}
	if err == nil && tau2 <= 0 {
		err = refuse("the model has no second lag for the derivative to act on: use --law pi")
	}
	if err != nil {
		return Gains{}, nil, err
	}
	var notes []string
	if tau2 < dead {
		notes = append(notes, "the second lag is shorter than the dead time: the rule gains little from a derivative here")
	}
	if f.velocity != 0 {
		return simcIntegratingLagPID(params{Kv: f.velocity, T2: tau2, L: dead, Tc: dead}), notes, nil
	}
	return simcPID(params{K: f.gain, T1: tau1, T2: tau2, L: dead, Tc: dead}), notes, nil
}

func applyLambda(f facts) (Gains, []string, error) {
	if err := selfRegulating(f); err != nil {
		return Gains{}, nil, err
	}
	tau, dead, err := f.first()
	return lambdaPI(params{K: f.gain, T: tau, L: dead, Lam: tau}),
		[]string{"closed-loop time constant taken as that of the motor (usual range 1 to 3 of it)"}, err
}

// applyIMC takes the fastest closed loop that the authors allow: lam above
// deadPart·L and above T/5.
func applyIMC(apply formula, deadPart float64) func(facts) (Gains, []string, error) {
	return func(f facts) (Gains, []string, error) {
		if err := selfRegulating(f); err != nil {
			return Gains{}, nil, err
		}
		tau, dead, err := f.first()
		lam := math.Max(deadPart*dead, 0.2*tau)
		return apply(params{K: f.gain, T: tau, L: dead, Lam: lam}), nil, err
	}
}

// tangent applies a rule to the tangent model where lo ≤ L/T ≤ hi. The ranges
// are those commonly quoted with the rules; the upper end of 1 for Chien, Hrones
// and Reswick is *common practice, no source*.
func tangent(apply formula, lo, hi float64) func(facts) (Gains, []string, error) {
	return func(f facts) (Gains, []string, error) {
		if err := selfRegulating(f); err != nil {
			return Gains{}, nil, err
		}
		if err := needDead(f.tangentDead); err != nil {
			return Gains{}, nil, err
		}
		if q := f.tangentDead / f.tangentTau; q < lo || q > hi {
			return Gains{}, nil, refuse("dead time over lag is %.3g by the tangent; the rule is for %g to %g", q, lo, hi)
		}
		return apply(params{K: f.gain, T: f.tangentTau, L: f.tangentDead}), nil, nil
	}
}

func tangent63(apply formula) func(facts) (Gains, []string, error) {
	return func(f facts) (Gains, []string, error) {
		if err := selfRegulating(f); err != nil {
			return Gains{}, nil, err
		}
		if err := needDead(f.tangentDead); err != nil {
			return Gains{}, nil, err
		}
		if !(f.tau63 > 0) {
			return Gains{}, nil, refuse("the step response has no 63 %% time after its dead time")
		}
		return apply(params{K: f.gain, T: f.tau63, L: f.tangentDead}), nil, nil
	}
}

func applyAMIGOStep(apply, integrating formula) func(facts) (Gains, []string, error) {
	return func(f facts) (Gains, []string, error) {
		if f.velocity == 0 {
			g, _, err := tangent63(apply)(f)
			return g, []string{"made for Ms and Mt of 1.4; careful where the lag is far longer than the dead time"}, err
		}
		kv, dead, err := f.integrating()
		if err == nil {
			err = needDead(dead)
		}
		return integrating(params{Kv: kv, L: dead}), nil, err
	}
}

// ultimate applies a rule to the ultimate point. needGain asks for a plant that
// settles, ratioMin for a gain ratio 1/(K·Ku) of at least that.
func ultimate(apply formula, needGain bool, ratioMin float64) func(facts) (Gains, []string, error) {
	return func(f facts) (Gains, []string, error) {
		if f.ku == 0 {
			return Gains{}, nil, refuse("the phase never reaches −180°, so there is no ultimate gain: give the sample time of the loop, or a model with its dead time")
		}
		if needGain {
			if err := selfRegulating(f); err != nil {
				return Gains{}, nil, err
			}
			if ratio := 1 / (f.gain * f.ku); ratio < ratioMin {
				return Gains{}, nil, refuse("the gain ratio 1/(K·Ku) is %.3g; the rule is for %g and more", ratio, ratioMin)
			}
		}
		return apply(params{K: f.gain, Ku: f.ku, Pu: f.pu}), nil, nil
	}
}

// applyTyreusLuyben refuses where the dead time is longer than the lag: the rule
// is for integrating and lag-dominant plants.
func applyTyreusLuyben(apply formula) func(facts) (Gains, []string, error) {
	return func(f facts) (Gains, []string, error) {
		if f.velocity == 0 && f.tangentDead > f.tangentTau {
			return Gains{}, nil, refuse("the dead time (%.3g s) is longer than the lag (%.3g s); the rule is for lag-dominant plants", f.tangentDead, f.tangentTau)
		}
		return ultimate(apply, false, 0)(f)
	}
}

// smallLags splits the plant for Kessler's rules: keep large lags, and the sum
// of everything smaller with the dead time.
func (f facts) smallLags(keep int) (sum float64, err error) {
	if err := f.reducible(); err != nil {
		return 0, err
	}
	if len(f.lags) < keep {
		return 0, refuse("the model has fewer than %d lags", keep)
	}
	sum = f.dead
	for _, t := range f.lags[keep:] {
		sum += t
	}
	return sum, needDead(sum)
}

func applyModulusPI(f facts) (Gains, []string, error) {
	if err := selfRegulating(f); err != nil {
		return Gains{}, nil, err
	}
	sum, err := f.smallLags(1)
	if err != nil {
		return Gains{}, nil, err
	}
	if t1 := f.lags[0]; t1 > 4*sum || t1 < sum {
		return Gains{}, nil, refuse("the large lag is %.3g times the small ones; the rule is for 1 to 4 (above 4 take the symmetrical optimum)", t1/sum)
	}
	return modulusOptimumPI(params{K: f.gain, T1: f.lags[0], Ts: sum}), nil, nil
}

func applyModulusPID(f facts) (Gains, []string, error) {
	if err := selfRegulating(f); err != nil {
		return Gains{}, nil, err
	}
	sum, err := f.smallLags(2)
	if err != nil {
		return Gains{}, nil, err
	}
	if f.lags[1] < sum {
		return Gains{}, nil, refuse("the second lag (%.3g s) is not larger than the small ones together (%.3g s)", f.lags[1], sum)
	}
	return modulusOptimumPID(params{K: f.gain, T1: f.lags[0], T2: f.lags[1], Ts: sum}), nil, nil
}

const prefilterNote = "without a setpoint filter of 4 small lags the step overshoots by about 43 %"

func applySymmetricalPI(f facts) (Gains, []string, error) {
	keep := 1
	if f.velocity != 0 {
		keep = 0
	}
	sum, err := f.smallLags(keep)
	if err != nil {
		return Gains{}, nil, err
	}
	if f.velocity != 0 {
		return symmetricalOptimumPI(params{K: f.velocity, T0: 1, Ts: sum}), []string{prefilterNote}, nil
	}
	if f.lags[0] <= 4*sum {
		return Gains{}, nil, refuse("the large lag is %.3g times the small ones; the rule is for more than 4 (take the modulus optimum)", f.lags[0]/sum)
	}
	return symmetricalOptimumPI(params{K: f.gain, T0: f.lags[0], Ts: sum}), []string{prefilterNote}, nil
}

func applySymmetricalPID(f facts) (Gains, []string, error) {
	keep := 2
	if f.velocity != 0 {
		keep = 1
	}
	sum, err := f.smallLags(keep)
	if err != nil {
		return Gains{}, nil, err
	}
	if f.velocity != 0 {
		return symmetricalOptimumPID(params{K: f.velocity, T0: 1, T2: f.lags[0], Ts: sum}), []string{prefilterNote}, nil
	}
	if f.lags[0] <= 4*sum {
		return Gains{}, nil, refuse("the large lag is %.3g times the small ones; the rule is for more than 4", f.lags[0]/sum)
	}
	return symmetricalOptimumPID(params{K: f.gain, T0: f.lags[0], T2: f.lags[1], Ts: sum}), []string{prefilterNote}, nil
}

// Pole placement knows nothing of dead time, so the wished frequency stays well
// below its inverse. *Our choice*: damping 0.8, ω₀ a quarter of 1/L.
const (
	placementDamping = 0.8
	placementPart    = 0.25
	placementNote    = "poles placed with damping 0.8 at a quarter of the inverse of the dead time, which the rule itself leaves out"
)

func applyPolePlacementPI(f facts) (Gains, []string, error) {
	if f.velocity != 0 {
		kv, dead, err := f.integrating()
		if err == nil {
			err = needDead(dead)
		}
		return polePlacementIntegratingPI(params{Kv: kv, Zeta: placementDamping, W0: placementPart / dead}), []string{placementNote}, err
	}
	tau, dead, err := f.first()
	if err == nil {
		err = needDead(dead)
	}
	if err != nil {
		return Gains{}, nil, err
	}
	w0 := placementPart / dead
	if 2*placementDamping*w0*tau <= 1 {
		return Gains{}, nil, refuse("the dead time (%.3g s) is too long against the lag (%.3g s) to place poles faster than the motor's own", dead, tau)
	}
	return polePlacementPI(params{K: f.gain, T: tau, Zeta: placementDamping, W0: w0}), []string{placementNote}, nil
}

func applyPolePlacementPID(f facts) (Gains, []string, error) {
	if len(f.den) != 3 || f.zeros || f.velocity != 0 {
		return Gains{}, nil, refuse("the rule is for a second-order model without zeros")
	}
	if err := needDead(f.dead); err != nil {
		return Gains{}, nil, err
	}
	p := params{
		K: f.num / f.den[0], A1: f.den[1] / f.den[0], A2: f.den[2] / f.den[0],
		Zeta: placementDamping, W0: placementPart / f.dead, Alpha: 1,
	}
	g := polePlacementPID(p)
	if g.Kp <= 0 || g.Kd <= 0 {
		return Gains{}, nil, refuse("the dead time (%.3g s) is too long to place poles faster than the motor's own", f.dead)
	}
	return g, []string{placementNote}, nil
}

// ZieglerNicholsStep returns the PI gains of the step rule for a gain in rad/s
// per V, a lag and a dead time in s, whatever their ratio: what a person reads
// off a step by hand and would have used.
func ZieglerNicholsStep(gain, tau, deadTime float64) Gains {
	return zieglerNicholsStepPI(params{K: gain, T: tau, L: deadTime}).Parallel()
}
