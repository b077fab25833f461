package identify

import (
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"
)

// autocorrelation returns the autocorrelation of r at lags 0 to lags, the mean
// not removed (residuals of a fit with an offset have none).
func autocorrelation(r []float64, lags int) []float64 {
	out := make([]float64, lags+1)
	total := floats.Dot(r, r)
	if total == 0 {
		out[0] = 1
		return out
	}
	for k := range out {
		if k < len(r) {
			out[k] = floats.Dot(r[:len(r)-k], r[k:]) / total
		}
	}
	return out
}

// lagCount is how many lags the tests look at for n residuals.
func lagCount(n int) int { return min(25, n/8) }

// ljungBox returns the probability that white residuals show as much
// autocorrelation as r does, after fitted parameters. NaN for short records.
//
// Reference: G. M. Ljung, G. E. P. Box, Biometrika 65 (1978) 297.
func ljungBox(r []float64, fitted int) float64 {
	n, lags := len(r), lagCount(len(r))
	if lags <= fitted {
		return math.NaN()
	}
	rho := autocorrelation(r, lags)
	q := 0.0
	for k := 1; k <= lags; k++ {
		q += rho[k] * rho[k] / float64(n-k)
	}
	q *= float64(n) * float64(n+2)
	return distuv.ChiSquared{K: float64(lags - fitted)}.Survival(q)
}

// autoregression is the noise model e[i] = Σ coef[k]·e[i−1−k] + w[i].
type autoregression struct {
	coef     []float64
	variance float64 // of w
}

// fitAutoregression fits the order with the least AICc by the Levinson–Durbin
// recursion on the sample autocovariance.
func fitAutoregression(r []float64, orderMax int) autoregression {
	n := len(r)
	best := autoregression{variance: floats.Dot(r, r) / float64(n)}
	rho := autocorrelation(r, orderMax)
	score := func(v float64, k int) float64 {
		return float64(n)*math.Log(v) + 2*float64(k+1)*float64(n)/math.Max(1, float64(n-k-2))
	}
	if best.variance == 0 {
		return best
	}
	least := score(best.variance, 0)
	var a []float64
	v := best.variance
	for k := 1; k <= orderMax; k++ {
		acc := rho[k]
		for j, c := range a {
			acc -= c * rho[k-1-j]
		}
		refl := acc * best0(r) / v
		next := make([]float64, k)
		for j := range a {
			next[j] = a[j] - refl*a[k-2-j]
		}
		next[k-1] = refl
		a = next
		v *= 1 - refl*refl
		if !(v > 0) {
			break
		}
		if s := score(v, k); s < least {
			least = s
			best = autoregression{coef: append([]float64(nil), a...), variance: v}
		}
	}
	return best
}

func best0(r []float64) float64 { return floats.Dot(r, r) / float64(len(r)) }

// whiten returns w for the run e of residuals, the first values taken as they
// are.
func (ar autoregression) whiten(e []float64) []float64 {
	out := make([]float64, len(e))
	for i := range e {
		v := e[i]
		for k, c := range ar.coef {
			if i-1-k >= 0 {
				v -= c * e[i-1-k]
			}
		}
		out[i] = v
	}
	return out
}

// backColour runs col backwards in time through 1/A, in place: the inner products
// of two such columns times the variance are those of the columns with the
// noise's covariance matrix between them.
func (ar autoregression) backColour(col []float64) {
	for i := len(col) - 1; i >= 0; i-- {
		v := col[i]
		for k, c := range ar.coef {
			if i+1+k < len(col) {
				v += c * col[i+1+k]
			}
		}
		col[i] = v
	}
}

// quantile95 is the two-sided 95 % point of Student's t.
func quantile95(dof int) float64 {
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(max(dof, 1))}.Quantile(0.975)
}
