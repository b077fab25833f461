package identify

import (
	"bufio"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

// dual is a number with its derivatives by the parameters of a set, so that the
// Jacobians below are exact.
type dual struct {
	v float64
	d [9]float64
}

func con(v float64) dual { return dual{v: v} }

func lift(a dual, v, slope float64) dual {
	a.v = v
	for i := range a.d {
		a.d[i] *= slope
	}
	return a
}

func add(xs ...dual) dual {
	out := xs[0]
	for _, x := range xs[1:] {
		out.v += x.v
		for i := range out.d {
			out.d[i] += x.d[i]
		}
	}
	return out
}

func mul(xs ...dual) dual {
	out := xs[0]
	for _, x := range xs[1:] {
		for i := range out.d {
			out.d[i] = out.d[i]*x.v + out.v*x.d[i]
		}
		out.v *= x.v
	}
	return out
}

func neg(a dual) dual    { return lift(a, -a.v, -1) }
func sub(a, b dual) dual { return add(a, neg(b)) }
func inv(a dual) dual    { return lift(a, 1/a.v, -1/(a.v*a.v)) }
func quo(a, b dual) dual { return mul(a, inv(b)) }
func exp(a dual) dual    { e := math.Exp(a.v); return lift(a, e, e) }
func log(a dual) dual    { return lift(a, math.Log(a.v), 1/a.v) }
func sin(a dual) dual    { return lift(a, math.Sin(a.v), math.Cos(a.v)) }
func cos(a dual) dual    { return lift(a, math.Cos(a.v), -math.Sin(a.v)) }
func pow(a, b dual) dual { return exp(mul(b, log(a))) }
func sq(a dual) dual     { return mul(a, a) }
func arctan(a dual) dual { return lift(a, math.Atan(a.v), 1/(1+a.v*a.v)) }
func poly(x dual, c ...dual) dual { // c[0] + c[1]·x + …
	out := c[len(c)-1]
	for i := len(c) - 2; i >= 0; i-- {
		out = add(mul(out, x), c[i])
	}
	return out
}

type nistModel func(b []dual, x []dual) dual

func bell(a, m, w, x dual) dual { return mul(a, exp(neg(quo(sq(sub(x, m)), sq(w))))) }

func gauss(b, x []dual) dual {
	return add(mul(b[0], exp(neg(mul(b[1], x[0])))), bell(b[2], b[3], b[4], x[0]), bell(b[5], b[6], b[7], x[0]))
}

func lanczos(b, x []dual) dual {
	return add(mul(b[0], exp(neg(mul(b[1], x[0])))), mul(b[2], exp(neg(mul(b[3], x[0])))), mul(b[4], exp(neg(mul(b[5], x[0])))))
}

func chwirut(b, x []dual) dual { return quo(exp(neg(mul(b[0], x[0]))), add(b[1], mul(b[2], x[0]))) }

func saturating(b, x []dual) dual { return mul(b[0], sub(con(1), exp(neg(mul(b[1], x[0]))))) }

func cubics(b, x []dual) dual {
	return quo(poly(x[0], b[0], b[1], b[2], b[3]), poly(x[0], con(1), b[4], b[5], b[6]))
}

func wave(c, s, period, x dual) dual {
	a := quo(mul(con(2*math.Pi), x), period)
	return add(mul(c, cos(a)), mul(s, sin(a)))
}

// nistModels holds the models of the sets, as their files state them.
var nistModels = map[string]nistModel{
	"Chwirut1": chwirut, "Chwirut2": chwirut,
	"Gauss1": gauss, "Gauss2": gauss, "Gauss3": gauss,
	"Lanczos1": lanczos, "Lanczos2": lanczos, "Lanczos3": lanczos,
	"Misra1a": saturating, "BoxBOD": saturating,
	"Hahn1": cubics, "Thurber": cubics,
	"DanWood": func(b, x []dual) dual { return mul(b[0], pow(x[0], b[1])) },
	"Misra1b": func(b, x []dual) dual {
		return mul(b[0], sub(con(1), inv(sq(add(con(1), mul(con(0.5), b[1], x[0]))))))
	},
	"Misra1c": func(b, x []dual) dual {
		return mul(b[0], sub(con(1), pow(add(con(1), mul(con(2), b[1], x[0])), con(-0.5))))
	},
	"Misra1d": func(b, x []dual) dual { return quo(mul(b[0], b[1], x[0]), add(con(1), mul(b[1], x[0]))) },
	"Kirby2": func(b, x []dual) dual {
		return quo(poly(x[0], b[0], b[1], b[2]), poly(x[0], con(1), b[3], b[4]))
	},
	"MGH17": func(b, x []dual) dual {
		return add(b[0], mul(b[1], exp(neg(mul(x[0], b[3])))), mul(b[2], exp(neg(mul(x[0], b[4])))))
	},
	"Nelson": func(b, x []dual) dual {
		return sub(b[0], mul(b[1], x[0], exp(neg(mul(b[2], x[1])))))
	},
	"Roszman1": func(b, x []dual) dual {
		return sub(sub(b[0], mul(b[1], x[0])), mul(con(1/math.Pi), arctan(quo(b[2], sub(x[0], b[3])))))
	},
	"ENSO": func(b, x []dual) dual {
		return add(b[0], wave(b[1], b[2], con(12), x[0]), wave(b[4], b[5], b[3], x[0]), wave(b[7], b[8], b[6], x[0]))
	},
	"Bennett5": func(b, x []dual) dual { return mul(b[0], pow(add(b[1], x[0]), neg(inv(b[2])))) },
	"Eckerle4": func(b, x []dual) dual {
		return mul(quo(b[0], b[1]), exp(mul(con(-0.5), sq(quo(sub(x[0], b[2]), b[1])))))
	},
	"MGH09": func(b, x []dual) dual {
		return quo(mul(b[0], add(sq(x[0]), mul(x[0], b[1]))), add(sq(x[0]), mul(x[0], b[2]), b[3]))
	},
	"MGH10": func(b, x []dual) dual { return mul(b[0], exp(quo(b[1], add(x[0], b[2])))) },
	"Rat42": func(b, x []dual) dual { return quo(b[0], add(con(1), exp(sub(b[1], mul(b[2], x[0]))))) },
	"Rat43": func(b, x []dual) dual {
		return quo(b[0], pow(add(con(1), exp(sub(b[1], mul(b[2], x[0])))), inv(b[3])))
	},
}

// nistSet is one parsed file.
type nistSet struct {
	name      string
	starts    [2][]float64
	want, sd  []float64
	y         []float64
	x         [][]float64
	evaluated int
}

func (s *nistSet) Dim() int { return len(s.want) }

func (s *nistSet) Evaluate(params []float64, pt *Point) bool {
	s.evaluated++
	p := s.Dim()
	b := make([]dual, p)
	for i, v := range params {
		b[i].v = v
		b[i].d[i] = 1
	}
	jac, res := make([]float64, len(s.y)*p), make([]float64, len(s.y))
	for i := range s.y {
		var x []dual
		for _, v := range s.x[i] {
			x = append(x, con(v))
		}
		f := nistModels[s.name](b, x)
		if !finite(f.v) {
			return false
		}
		res[i] = f.v - s.y[i]
		for k := 0; k < p; k++ {
			if !finite(f.d[k]) {
				return false
			}
			jac[i*p+k] = f.d[k]
		}
	}
	Compress(jac, p, res, pt)
	return true
}

var nistDataLines = regexp.MustCompile(`Data\s+\(lines\s+(\d+)\s+to\s+(\d+)\)`)

func readNIST(t *testing.T, path string) *nistSet {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	s := &nistSet{name: strings.TrimSuffix(filepath.Base(path), ".dat")}
	first, last, line := 0, 0, 0
	num := func(w string) float64 {
		v, err := strconv.ParseFloat(w, 64)
		if err != nil {
			t.Fatalf("%s:%d: %v", path, line, err)
		}
		return v
	}
	for sc := bufio.NewScanner(f); sc.Scan(); {
		line++
		text := sc.Text()
		if m := nistDataLines.FindStringSubmatch(text); m != nil {
			first, last = int(num(m[1])), int(num(m[2]))
		}
		w := strings.Fields(strings.Replace(text, "=", " = ", 1))
		if line < 60 && len(w) == 6 && w[1] == "=" && w[0][0] == 'b' {
			s.starts[0] = append(s.starts[0], num(w[2]))
			s.starts[1] = append(s.starts[1], num(w[3]))
			s.want = append(s.want, num(w[4]))
			s.sd = append(s.sd, num(w[5]))
		}
		if first > 0 && line >= first && line <= last {
			y := num(w[0])
			if s.name == "Nelson" {
				y = math.Log(y)
			}
			s.y = append(s.y, y)
			var x []float64
			for _, v := range w[1:] {
				x = append(x, num(v))
			}
			s.x = append(s.x, x)
		}
	}
	if len(s.want) == 0 || len(s.y) <= len(s.want) {
		t.Fatalf("%s: %d parameters, %d rows read", path, len(s.want), len(s.y))
	}
	return s
}

// digits is the number of correct decimal digits, the worst of all entries.
func digits(got, want []float64) float64 {
	worst := 15.0
	for i := range want {
		e := math.Abs(got[i]-want[i]) / math.Abs(want[i])
		worst = math.Min(worst, -math.Log10(math.Max(e, 1e-15)))
	}
	return worst
}

// All 27 NIST sets, from both starts: certified values and standard deviations
// from https://www.itl.nist.gov/div898/strd/ (testdata/nist/PROVENANCE.md).
func TestSolverOnNISTSets(t *testing.T) {
	paths, _ := filepath.Glob("testdata/nist/*.dat")
	if len(paths) != 27 {
		t.Fatalf("%d sets found, want 27", len(paths))
	}
	for _, path := range paths {
		s := readNIST(t, path)
		for k, start := range s.starts {
			t.Run(fmt.Sprintf("%s/start%d", s.name, k+1), func(t *testing.T) {
				s.evaluated = 0
				sol, err := Solve(s, start, Settings{StepMax: 6000, CostTol: 1e-15, ParamTol: 1e-13, Thorough: true})
				if err != nil {
					t.Fatal(err)
				}
				p := s.Dim()
				cov := sol.Point.Covariance()
				sd := make([]float64, p)
				for i := range sd {
					sd[i] = math.Sqrt(cov[i*p+i] * sol.Point.Cost / float64(len(s.y)-p))
				}
				dp, ds := digits(sol.Params, s.want), digits(sd, s.sd)
				t.Logf("%d evaluations, parameters %.1f digits, sd %.1f digits", s.evaluated, dp, ds)
				need := 4.0
				if s.name == "Lanczos1" {
					need = 2
				}
				if dp < 6 {
					t.Errorf("parameters agree to %.1f digits, want 6: %g", dp, sol.Params)
				}
				if ds < need {
					t.Errorf("standard deviations agree to %.1f digits, want %g", ds, need)
				}
			})
		}
	}
}
