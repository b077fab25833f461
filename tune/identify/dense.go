package identify

import "math"

// triangularise reduces the rows×cols matrix a (row by row) to upper triangular
// form by Householder reflections and applies them to rhs (nil or rows long).
func triangularise(a []float64, rows, cols int, rhs []float64) {
	for c := 0; c < cols && c < rows; c++ {
		norm := 0.0
		for i := c; i < rows; i++ {
			norm = math.Hypot(norm, a[i*cols+c])
		}
		if norm == 0 {
			continue
		}
		if a[c*cols+c] > 0 {
			norm = -norm
		}
		// v = column − norm·e1, kept in place; vᵀv = −2·norm·v1.
		v1 := a[c*cols+c] - norm
		a[c*cols+c] = v1
		beta := -1 / (norm * v1)
		for j := c + 1; j < cols; j++ {
			dot := 0.0
			for i := c; i < rows; i++ {
				dot += a[i*cols+c] * a[i*cols+j]
			}
			dot *= beta
			for i := c; i < rows; i++ {
				a[i*cols+j] -= dot * a[i*cols+c]
			}
		}
		if rhs != nil {
			dot := 0.0
			for i := c; i < rows; i++ {
				dot += a[i*cols+c] * rhs[i]
			}
			dot *= beta
			for i := c; i < rows; i++ {
				rhs[i] -= dot * a[i*cols+c]
			}
		}
		a[c*cols+c] = norm
		for i := c + 1; i < rows; i++ {
			a[i*cols+c] = 0
		}
	}
}

// backSubstitute solves R·x = b for the leading k×k upper triangle of a matrix
// with the given row stride. It returns false where R is singular.
func backSubstitute(r []float64, stride, k int, b, x []float64) bool {
	for i := k - 1; i >= 0; i-- {
		s := b[i]
		for j := i + 1; j < k; j++ {
			s -= r[i*stride+j] * x[j]
		}
		if r[i*stride+i] == 0 {
			return false
		}
		x[i] = s / r[i*stride+i]
	}
	return true
}

// cholesky factors the symmetric n×n matrix a in place into RᵀR with R in the
// upper triangle. A pivot that rounding has made smaller than tiny times its
// diagonal entry is replaced by a very large one, which takes that column out of
// the solution; dropped counts them.
func cholesky(a []float64, n int) (dropped int) {
	const tiny = 1e-14
	for i := 0; i < n; i++ {
		d := a[i*n+i]
		for k := 0; k < i; k++ {
			d -= a[k*n+i] * a[k*n+i]
		}
		if !(d > tiny*a[i*n+i]) {
			a[i*n+i] = math.Inf(1)
			for j := i + 1; j < n; j++ {
				a[i*n+j] = 0
			}
			dropped++
			continue
		}
		root := math.Sqrt(d)
		a[i*n+i] = root
		for j := i + 1; j < n; j++ {
			s := a[i*n+j]
			for k := 0; k < i; k++ {
				s -= a[k*n+i] * a[k*n+j]
			}
			a[i*n+j] = s / root
		}
	}
	return dropped
}

// forwardSolve solves Rᵀ·x = b in place for a factor from cholesky.
func forwardSolve(r []float64, n int, b []float64) {
	for i := 0; i < n; i++ {
		s := b[i]
		for k := 0; k < i; k++ {
			s -= r[k*n+i] * b[k]
		}
		b[i] = s / r[i*n+i]
	}
}

// choleskySolve solves RᵀR·x = b in place.
func choleskySolve(r []float64, n int, b []float64) {
	forwardSolve(r, n, b)
	for i := n - 1; i >= 0; i-- {
		s := b[i]
		for j := i + 1; j < n; j++ {
			s -= r[i*n+j] * b[j]
		}
		b[i] = s / r[i*n+i]
	}
}

// choleskyInverse returns (RᵀR)⁻¹; rows and columns of dropped parameters are 0.
func choleskyInverse(r []float64, n int) []float64 {
	inv := make([]float64, n*n)
	e := make([]float64, n)
	for j := 0; j < n; j++ {
		clear(e)
		e[j] = 1
		choleskySolve(r, n, e)
		for i := 0; i < n; i++ {
			inv[i*n+j] = e[i]
		}
	}
	return inv
}
