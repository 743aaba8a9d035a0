package lsq

import (
	"context"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// dual is a value with a derivative, held as a complex number with an
// infinitesimal imaginary part (complex-step differentiation: Squire and Trapp,
// SIAM Rev. 40 (1998) 110).
type dual = complex128

const tiny = 1e-100

func dexp(z dual) dual { e := math.Exp(real(z)); return complex(e, e*imag(z)) }
func dcos(z dual) dual { return complex(math.Cos(real(z)), -math.Sin(real(z))*imag(z)) }
func dsin(z dual) dual { return complex(math.Sin(real(z)), math.Cos(real(z))*imag(z)) }
func datan(z dual) dual {
	return complex(math.Atan(real(z)), imag(z)/(1+real(z)*real(z)))
}
func dpow(a, b dual) dual {
	p := math.Pow(real(a), real(b))
	return complex(p, p*(imag(b)*math.Log(real(a))+imag(a)*real(b)/real(a)))
}
func dinv(z dual) dual  { return complex(1/real(z), -imag(z)/(real(z)*real(z))) }
func re(x float64) dual { return complex(x, 0) }

// nistModels are the models of the NIST StRD nonlinear regression data sets as
// printed in the header of each file.
var nistModels = map[string]func(b []dual, x []float64) dual{
	"BoxBOD":   func(b []dual, x []float64) dual { return b[0] * (1 - dexp(-b[1]*re(x[0]))) },
	"Chwirut1": chwirut,
	"Chwirut2": chwirut,
	"DanWood":  func(b []dual, x []float64) dual { return b[0] * dpow(re(x[0]), b[1]) },
	"ENSO": func(b []dual, x []float64) dual {
		a := 2 * math.Pi * x[0]
		p, q := re(a)*dinv(b[3]), re(a)*dinv(b[6])
		return b[0] + b[1]*re(math.Cos(a/12)) + b[2]*re(math.Sin(a/12)) + b[4]*dcos(p) + b[5]*dsin(p) + b[7]*dcos(q) + b[8]*dsin(q)
	},
	"Eckerle4": func(b []dual, x []float64) dual {
		z := (re(x[0]) - b[2]) * dinv(b[1])
		return b[0] * dinv(b[1]) * dexp(-0.5*z*z)
	},
	"Gauss1": gauss, "Gauss2": gauss, "Gauss3": gauss,
	"Hahn1": cubic, "Thurber": cubic,
	"Kirby2": func(b []dual, x []float64) dual {
		t := re(x[0])
		return (b[0] + b[1]*t + b[2]*t*t) * dinv(1+b[3]*t+b[4]*t*t)
	},
	"Lanczos1": lanczos, "Lanczos2": lanczos, "Lanczos3": lanczos,
	"MGH09": func(b []dual, x []float64) dual {
		t := re(x[0])
		return b[0] * (t*t + t*b[1]) * dinv(t*t+t*b[2]+b[3])
	},
	"MGH10": func(b []dual, x []float64) dual { return b[0] * dexp(b[1]*dinv(re(x[0])+b[2])) },
	"MGH17": func(b []dual, x []float64) dual {
		return b[0] + b[1]*dexp(-re(x[0])*b[3]) + b[2]*dexp(-re(x[0])*b[4])
	},
	"Misra1a": func(b []dual, x []float64) dual { return b[0] * (1 - dexp(-b[1]*re(x[0]))) },
	"Misra1b": func(b []dual, x []float64) dual {
		z := dinv(1 + b[1]*re(x[0])/2)
		return b[0] * (1 - z*z)
	},
	"Misra1c": func(b []dual, x []float64) dual { return b[0] * (1 - dpow(1+2*b[1]*re(x[0]), -0.5)) },
	"Misra1d": func(b []dual, x []float64) dual {
		z := b[1] * re(x[0])
		return b[0] * z * dinv(1+z)
	},
	"Nelson": func(b []dual, x []float64) dual { return b[0] - b[1]*re(x[0])*dexp(-b[2]*re(x[1])) },
	"Rat42":  func(b []dual, x []float64) dual { return b[0] * dinv(1+dexp(b[1]-b[2]*re(x[0]))) },
	"Rat43":  func(b []dual, x []float64) dual { return b[0] * dpow(1+dexp(b[1]-b[2]*re(x[0])), -dinv(b[3])) },
	"Roszman1": func(b []dual, x []float64) dual {
		return b[0] - b[1]*re(x[0]) - datan(b[2]*dinv(re(x[0])-b[3]))*re(1/math.Pi)
	},
	"Bennett5": func(b []dual, x []float64) dual { return b[0] * dpow(b[1]+re(x[0]), -dinv(b[2])) },
}

func chwirut(b []dual, x []float64) dual {
	return dexp(-b[0]*re(x[0])) * dinv(b[1]+b[2]*re(x[0]))
}

func gauss(b []dual, x []float64) dual {
	t := re(x[0])
	p, q := (t-b[3])*dinv(b[4]), (t-b[6])*dinv(b[7])
	return b[0]*dexp(-b[1]*t) + b[2]*dexp(-p*p) + b[5]*dexp(-q*q)
}

func cubic(b []dual, x []float64) dual {
	t := re(x[0])
	return (b[0] + b[1]*t + b[2]*t*t + b[3]*t*t*t) * dinv(1+b[4]*t+b[5]*t*t+b[6]*t*t*t)
}

func lanczos(b []dual, x []float64) dual {
	t := re(x[0])
	return b[0]*dexp(-b[1]*t) + b[2]*dexp(-b[3]*t) + b[4]*dexp(-b[5]*t)
}

// nistSet is one file as published.
type nistSet struct {
	name       string
	starts     [2][]float64
	params, sd []float64
	rss        float64
	y          []float64
	x          [][]float64
}

func readNIST(t testing.TB, path string) *nistSet {
	t.Helper()
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	s := &nistSet{name: strings.TrimSuffix(filepath.Base(path), ".dat")}
	number := func(f string) float64 {
		v, err := strconv.ParseFloat(f, 64)
		if err != nil {
			t.Fatalf("%s: %v", path, err)
		}
		return v
	}
	data := false
	for _, line := range strings.Split(strings.ReplaceAll(string(raw), "\r", ""), "\n") {
		f := strings.Fields(line)
		switch {
		case strings.HasPrefix(line, "Data:") && len(f) >= 3 && f[1] == "y":
			data = true
		case data && len(f) >= 2:
			row := make([]float64, len(f))
			for i := range f {
				row[i] = number(f[i])
			}
			s.y = append(s.y, row[0])
			s.x = append(s.x, row[1:])
		case strings.HasPrefix(strings.TrimSpace(line), "b") && len(f) >= 6 && f[1] == "=":
			s.starts[0] = append(s.starts[0], number(f[2]))
			s.starts[1] = append(s.starts[1], number(f[3]))
			s.params = append(s.params, number(f[4]))
			s.sd = append(s.sd, number(f[5]))
		case strings.HasPrefix(line, "Residual Sum of Squares:"):
			s.rss = number(f[4])
		}
	}
	if s.name == "Nelson" { // the response is log(y)
		for i := range s.y {
			s.y[i] = math.Log(s.y[i])
		}
	}
	if s.name == "Roszman1" {
		// This copy prints b1 as 1.20196866396E-0, one character too early and
		// one exponent digit short: the model at 0.20196866396 gives the
		// certified RSS and standard deviations of the same file, as the test
		// checks (the value also from memory of the NIST page).
		s.params[0] = 0.20196866396
	}
	if len(s.y) == 0 || len(s.params) == 0 {
		t.Fatalf("%s: %d rows, %d parameters read", path, len(s.y), len(s.params))
	}
	return s
}

func (s *nistSet) problem(start []float64, numeric bool) *Problem {
	model := nistModels[s.name]
	p := &Problem{Y: s.y, Numeric: numeric}
	for _, b := range start {
		p.Parameters = append(p.Parameters, Parameter{Start: b})
	}
	z := make([]dual, len(start))
	p.Eval = func(theta, f []float64, jac [][]float64) error {
		for j, b := range theta {
			z[j] = re(b)
		}
		for i, x := range s.x {
			f[i] = real(model(z, x))
		}
		for j := range jac {
			if jac[j] == nil {
				continue
			}
			z[j] = complex(theta[j], tiny)
			for i, x := range s.x {
				jac[j][i] = imag(model(z, x)) / tiny
			}
			z[j] = re(theta[j])
		}
		return nil
	}
	return p
}

// digits is the log relative error: the number of digits on which got and want
// agree (McCullough, Am. Stat. 52 (1998) 358).
func digits(got, want float64) float64 {
	if got == want {
		return 16
	}
	d := -math.Log10(math.Abs(got-want) / math.Abs(want))
	if want == 0 {
		d = -math.Log10(math.Abs(got))
	}
	if math.IsNaN(d) {
		return 0
	}
	return math.Min(d, 16)
}

func worst(got, want []float64) float64 {
	d := 16.0
	for i := range want {
		d = math.Min(d, digits(got[i], want[i]))
	}
	return d
}

// TestNISTNonlinear holds every set from both starts to the certified values,
// which are printed to 11 digits (NIST StRD, nonlinear regression).
func TestNISTNonlinear(t *testing.T) {
	files, err := filepath.Glob("../../testdata/refs/nist/*.dat")
	if err != nil || len(files) != 27 {
		t.Fatalf("found %d sets: %v", len(files), err)
	}
	t.Logf("%-10s %5s %7s %7s %7s %5s %8s %s", "set", "start", "params", "sd", "RSS", "iter", "restarts", "status")
	for _, path := range files {
		s := readNIST(t, path)
		if nistModels[s.name] == nil {
			t.Errorf("no model for %s", s.name)
			continue
		}
		for k, start := range s.starts {
			r, err := Fit(context.Background(), s.problem(start, false), Settings{})
			if err != nil {
				t.Errorf("%s start %d: %v", s.name, k+1, err)
				continue
			}
			dp, ds, dr := worst(r.Values, s.params), worst(r.U, s.sd), digits(r.RSS, s.rss)
			t.Logf("%-10s %5d %7.1f %7.1f %7.1f %5d %8d %s: %s", s.name, k+1, dp, ds, dr, r.Iterations, r.Restarts, r.Status, r.Reason)
			if r.Status != Converged || dp < 8 {
				t.Errorf("%s start %d: %s, %.1f digits of the parameters", s.name, k+1, r.Status, dp)
			}
			if s.name == "Lanczos1" {
				continue // its certified RSS, 1.43e-25, is below the rounding of the data
			}
			if ds < 7 || dr < 9 {
				t.Errorf("%s start %d: %.1f digits of the standard deviations, %.1f of RSS", s.name, k+1, ds, dr)
			}
		}
	}
}
