package design

import "math"

// The published formulas, each exactly as printed and in the controller form it
// is stated for. Symbols: K static gain, T lag, L dead time, Kv velocity gain,
// Ku and Pu ultimate gain and period, lam and tc the wished closed-loop time
// constant. Sources stand at each group; all are from memory of the work cited
// unless marked otherwise.

// params are the inputs of a formula.
type params struct {
	K, T, L, Lam, Tc float64
	Kv, Ku, Pu       float64
	T1, T2, Ts, T0   float64
	A1, A2           float64
	Zeta, W0, Alpha  float64
}

type formula func(params) Gains

func ideal(kc, ti, td float64) Gains {
	return Gains{Form: FormIdeal, Kp: kc, Ti: ti, Td: td, SetpointWeight: 1}
}

func series(kc, ti, td float64) Gains {
	return Gains{Form: FormSeries, Kc: kc, Ti: ti, Td: td, SetpointWeight: 1}
}

func parallel(kp, ki, kd float64) Gains {
	return Gains{Form: FormParallel, Kp: kp, Ki: ki, Kd: kd, SetpointWeight: 1}
}

// Ziegler & Nichols, Trans. ASME 64 (1942) 759–768. The table is read as ideal
// form, as is usual today.

func zieglerNicholsStepPI(p params) Gains { return ideal(0.9*p.T/(p.K*p.L), p.L/0.3, 0) }

func zieglerNicholsStepPID(p params) Gains { return ideal(1.2*p.T/(p.K*p.L), 2*p.L, 0.5*p.L) }

func zieglerNicholsUltimatePI(p params) Gains { return ideal(0.45*p.Ku, p.Pu/1.2, 0) }

func zieglerNicholsUltimatePID(p params) Gains { return ideal(0.6*p.Ku, p.Pu/2, p.Pu/8) }

// Tyreus & Luyben, Ind. Eng. Chem. Res. 31 (1992) 2625–2628; PID constants as in
// Luyben & Luyben, Essentials of Process Control (1997).

func tyreusLuybenPI(p params) Gains { return ideal(p.Ku/3.2, 2.2*p.Pu, 0) }

func tyreusLuybenPID(p params) Gains { return ideal(p.Ku/2.2, 2.2*p.Pu, p.Pu/6.3) }

// Cohen & Coon, Trans. ASME 75 (1953) 827–834, in the polynomials of
// Stephanopoulos (1984).

func cohenCoonPI(p params) Gains {
	q := p.L / p.T
	return ideal(p.T/(p.K*p.L)*(0.9+q/12), p.L*(30+3*q)/(9+20*q), 0)
}

func cohenCoonPID(p params) Gains {
	q := p.L / p.T
	return ideal(p.T/(p.K*p.L)*(4.0/3+q/4), p.L*(32+6*q)/(13+8*q), 4*p.L/(11+2*q))
}

// Chien, Hrones & Reswick, Trans. ASME 74 (1952) 175–185, table as in Åström &
// Hägglund, PID Controllers (1995). Setpoint and load, without and with 20 %
// overshoot.

func chrSetpoint0PI(p params) Gains { return ideal(0.35*p.T/(p.K*p.L), 1.2*p.T, 0) }

func chrSetpoint0PID(p params) Gains { return ideal(0.6*p.T/(p.K*p.L), p.T, 0.5*p.L) }

func chrSetpoint20PI(p params) Gains { return ideal(0.6*p.T/(p.K*p.L), p.T, 0) }

func chrSetpoint20PID(p params) Gains { return ideal(0.95*p.T/(p.K*p.L), 1.4*p.T, 0.47*p.L) }

func chrLoad0PI(p params) Gains { return ideal(0.6*p.T/(p.K*p.L), 4*p.L, 0) }

func chrLoad0PID(p params) Gains { return ideal(0.95*p.T/(p.K*p.L), 2.4*p.L, 0.42*p.L) }

func chrLoad20PI(p params) Gains { return ideal(0.7*p.T/(p.K*p.L), 2.3*p.L, 0) }

func chrLoad20PID(p params) Gains { return ideal(1.2*p.T/(p.K*p.L), 2*p.L, 0.42*p.L) }

// Dahlin, Instrum. Control Syst. 41 (1968): lambda tuning.

func lambdaPI(p params) Gains { return ideal(p.T/(p.K*(p.Lam+p.L)), p.T, 0) }

// Rivera, Morari & Skogestad, Ind. Eng. Chem. Process Des. Dev. 25 (1986)
// 252–265, Table II.

func imcPI(p params) Gains { return ideal(p.T/(p.K*p.Lam), p.T, 0) }

func imcImprovedPI(p params) Gains { return ideal((2*p.T+p.L)/(2*p.K*p.Lam), p.T+p.L/2, 0) }

func imcPID(p params) Gains {
	return ideal((2*p.T+p.L)/(p.K*(2*p.Lam+p.L)), p.T+p.L/2, p.T*p.L/(2*p.T+p.L))
}

// Skogestad, J. Process Control 13 (2003) 291–309, Table 1; the PID is of series
// form.

func simcPI(p params) Gains {
	return ideal(p.T/(p.K*(p.Tc+p.L)), math.Min(p.T, 4*(p.Tc+p.L)), 0)
}

func simcPID(p params) Gains {
	return series(p.T1/(p.K*(p.Tc+p.L)), math.Min(p.T1, 4*(p.Tc+p.L)), p.T2)
}

func simcIntegratingPI(p params) Gains { return ideal(1/(p.Kv*(p.Tc+p.L)), 4*(p.Tc+p.L), 0) }

func simcIntegratingLagPID(p params) Gains {
	return series(1/(p.Kv*(p.Tc+p.L)), 4*(p.Tc+p.L), p.T2)
}

// Grimholt & Skogestad, IFAC PID'12 (PI: a third of the dead time is added to
// the lag; seen in the abstract) and J. Process Control 70 (2018) 36–46 (PID:
// derivative time a third of the dead time; seen in the abstract).

func simcImprovedPI(p params) Gains {
	t := p.T + p.L/3
	return ideal(t/(p.K*(p.Tc+p.L)), math.Min(t, 4*(p.Tc+p.L)), 0)
}

func simcImprovedPID(p params) Gains {
	return series(p.T/(p.K*(p.Tc+p.L)), math.Min(p.T, 4*(p.Tc+p.L)), p.L/3)
}

// Åström & Hägglund, J. Process Control 14 (2004) 635–650 (step formulas seen
// second-hand) and Advanced PID Control (2006), chapter 7.

func amigoStepPI(p params) Gains {
	s := p.L + p.T
	return ideal(0.15/p.K+(0.35-p.L*p.T/(s*s))*p.T/(p.K*p.L),
		0.35*p.L+13*p.L*p.T*p.T/(p.T*p.T+12*p.L*p.T+7*p.L*p.L), 0)
}

func amigoStepPID(p params) Gains {
	return ideal((0.2+0.45*p.T/p.L)/p.K, p.L*(0.4*p.L+0.8*p.T)/(p.L+0.1*p.T), 0.5*p.L*p.T/(0.3*p.L+p.T))
}

func amigoIntegratingPI(p params) Gains { return ideal(0.35/(p.Kv*p.L), 13.4*p.L, 0) }

func amigoIntegratingPID(p params) Gains { return ideal(0.45/(p.Kv*p.L), 8*p.L, 0.5*p.L) }

func amigoFrequencyPI(p params) Gains { return ideal(0.16*p.Ku, p.Pu/(1+4.5/(p.K*p.Ku)), 0) }

func amigoFrequencyPID(p params) Gains {
	k := 1 / (p.K * p.Ku)
	return ideal((0.3-0.1*math.Pow(k, 4))*p.Ku, 0.6*p.Pu/(1+2*k), 0.15*(1-k)*p.Pu/(1-0.95*k))
}

// Åström & Murray, Feedback Systems, 2nd ed. (2021), equation (11.10).

func improvedZieglerNicholsStepPI(p params) Gains {
	return parallel((0.15*p.L+0.35*p.T)/(p.K*p.L), (0.46*p.L+0.02*p.T)/(p.K*p.L*p.L), 0)
}

func improvedZieglerNicholsUltimatePI(p params) Gains {
	return parallel(0.22*p.Ku-0.07/p.K, 0.16*p.Ku/p.Pu+0.62/(p.K*p.Pu), 0)
}

// Kessler, Regelungstechnik 3 (1955) 40–49 (modulus optimum) and 6 (1958)
// 395–400, 432–436 (symmetrical optimum). Ts is the sum of the small lags.

func modulusOptimumPI(p params) Gains { return ideal(p.T1/(2*p.K*p.Ts), p.T1, 0) }

func modulusOptimumPID(p params) Gains { return series(p.T1/(2*p.K*p.Ts), p.T1, p.T2) }

func symmetricalOptimumPI(p params) Gains { return ideal(p.T0/(2*p.K*p.Ts), 4*p.Ts, 0) }

func symmetricalOptimumPID(p params) Gains { return series(p.T0/(2*p.K*p.Ts), 4*p.Ts, p.T2) }

// Åström & Hägglund, PID Controllers, 2nd ed. (1995), chapter 4: characteristic
// polynomial s² + 2ζω₀s + ω₀², with a factor s + αω₀ for the second order.

func polePlacementPI(p params) Gains {
	q := 2*p.Zeta*p.W0*p.T - 1
	return ideal(q/p.K, q/(p.W0*p.W0*p.T), 0)
}

func polePlacementIntegratingPI(p params) Gains { return ideal(2*p.Zeta*p.W0/p.Kv, 2*p.Zeta/p.W0, 0) }

// polePlacementPID is for K/(s² + a1·s + a2), complex poles allowed.
func polePlacementPID(p params) Gains {
	return parallel((p.W0*p.W0*(1+2*p.Alpha*p.Zeta)-p.A2)/p.K, p.Alpha*math.Pow(p.W0, 3)/p.K,
		((p.Alpha+2*p.Zeta)*p.W0-p.A1)/p.K)
}
