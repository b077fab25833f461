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
// recursion on the sample autocovariance of r.
func fitAutoregression(r []float64, orderMax int) autoregression {
	return levinson(lagSums(r, orderMax), len(r))
}

// lagSums returns Σ r[i]·r[i+k] for lags 0 to lags.
func lagSums(r []float64, lags int) []float64 {
	out := make([]float64, lags+1)
	for k := range out {
		if k < len(r) {
			out[k] = floats.Dot(r[:len(r)-k], r[k:])
		}
	}
	return out
}

// levinson fits autoregressions of rising order to lag sums over n samples and
// returns the one with the least AICc. It stops where the sums are no longer
// those of any series.
func levinson(sums []float64, n int) autoregression {
	best := autoregression{variance: sums[0] / float64(n)}
	if !(best.variance > 0) {
		return best
	}
	score := func(v float64, k int) float64 {
		return float64(n)*math.Log(v) + 2*float64(k+1)*float64(n)/math.Max(1, float64(n-k-2))
	}
	least := score(best.variance, 0)
	var a []float64
	v := best.variance
	for k := 1; k < len(sums); k++ {
		acc := sums[k]
		for j, c := range a {
			acc -= c * sums[k-1-j]
		}
		refl := acc / float64(n) / v
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

// colour runs col through 1/A in place.
func (ar autoregression) colour(col []float64) {
	for i := range col {
		v := col[i]
		for k, c := range ar.coef {
			if i-1-k < 0 {
				break
			}
			v += c * col[i-1-k]
		}
		col[i] = v
	}
}

// autocovariance returns the model's own, lags 0 to lags, from its impulse
// response.
func (ar autoregression) autocovariance(lags int) []float64 {
	const length = 4096
	imp := make([]float64, length)
	imp[0] = 1
	ar.colour(imp)
	out := lagSums(imp, lags)
	floats.Scale(ar.variance, out)
	return out
}

// fitColour fits an autoregression to the noise of which r is what a fit has left
// over: the fit, whose explanatory columns have the orthonormal basis q, takes
// some of the slow noise with it, and what it takes on average is put back into
// the autocovariance.
func fitColour(r []float64, q [][]float64, orderMax int) autoregression {
	n := len(r)
	seen := lagSums(r, orderMax)
	ar := levinson(seen, n)
	for round := 0; round < 4 && len(ar.coef) > 0; round++ {
		gamma := ar.autocovariance(orderMax)
		taken := ar.takenByFit(q, orderMax)
		sums := make([]float64, len(seen))
		for k := range sums {
			// No more than doubles the slow part in a round: the correction is a
			// first-order one.
			sums[k] = seen[k] + math.Min(taken[k], 0.5*float64(n)*gamma[0])
		}
		next := levinson(sums, n)
		if len(next.coef) == 0 || !stable(next) {
			break
		}
		ar = next
	}
	return ar
}

// takenByFit returns by how much the expected lag sums of e exceed those of
// e − Q·Qᵀ·e, for noise e of the model.
func (ar autoregression) takenByFit(q [][]float64, lags int) []float64 {
	out := make([]float64, lags+1)
	if len(q) == 0 {
		return out
	}
	n := len(q[0])
	g := make([][]float64, len(q)) // Γ·q
	for c := range q {
		g[c] = append([]float64(nil), q[c]...)
		ar.backColour(g[c])
		ar.colour(g[c])
		floats.Scale(ar.variance, g[c])
	}
	for c := range q {
		m := append([]float64(nil), g[c]...) // Γq − ½·Q·QᵀΓq, so that both halves share the last term
		for d := range q {
			floats.AddScaled(m, -0.5*floats.Dot(q[d], g[c]), q[d])
		}
		for k := range out {
			out[k] += floats.Dot(q[c][:n-k], m[k:]) + floats.Dot(m[:n-k], q[c][k:])
		}
	}
	return out
}

// stable reports whether the model's impulse response dies out.
func stable(ar autoregression) bool {
	imp := make([]float64, 2048)
	imp[0] = 1
	ar.colour(imp)
	return math.Abs(imp[len(imp)-1]) < 1e-3
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

// effectiveDOF is the degrees of freedom, divided by the widening of the
// variance where residuals are coloured.
func (e *estimate) effectiveDOF() int {
	return int(float64(e.dof) / (e.inflated * e.inflated))
}
