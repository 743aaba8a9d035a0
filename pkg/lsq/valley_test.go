package lsq

import (
	"context"
	"math"
	"strings"
	"testing"
)

// One gap: the charge of guarded plates is V(εA/d + C), in which ε and C have
// proportional derivatives whatever the voltages (common practice, no source:
// several gaps are set to tell stray capacitance from the plates'). The zero of the
// gap scale makes the model nonlinear; its prior resolves it.
func oneGap(reweight bool) *Problem {
	v := []float64{-300.167, 800.115, -799.717, 299.816}
	y := []float64{-10.1246e-9, 27.0313e-9, -27.0276e-9, 10.1376e-9}
	const area, gap = 0.01135, 3.0006e-3
	p := &Problem{Y: y, U: []float64{1e-12, 2e-12, 2e-12, 1e-12}, Parameters: []Parameter{
		{Name: "permittivity", Start: 8.93e-12},
		{Name: "gap_offset", Prior: &Prior{U: 1e-5}},
		{Name: "stray_capacitance"},
	}}
	p.Eval = func(b, f []float64, jac [][]float64) error {
		for i := range f {
			d := gap + b[1]
			f[i] = v[i] * (b[0]*area/d + b[2])
			if jac != nil {
				jac[0][i] = v[i] * area / d
				jac[1][i] = -v[i] * b[0] * area / d / d
				jac[2][i] = v[i]
			}
		}
		return nil
	}
	if reweight {
		p.Reweight = func(_, f, u []float64, _ *Effects) error {
			for i := range u {
				u[i] = math.Hypot(1e-12, 4e-5*f[i])
			}
			return nil
		}
	}
	return p
}

func TestSingularFromTheStart(t *testing.T) {
	for _, reweight := range []bool{false, true} {
		r, err := Fit(context.Background(), oneGap(reweight), Settings{})
		if err != nil {
			t.Fatal(err)
		}
		if r.Status != Singular || r.Restarts != 0 {
			t.Errorf("status %v (%s) after %d restarts, want singular after none", r.Status, r.Reason, r.Restarts)
		}
		if len(r.Confounded) != 1 || !strings.Contains(r.Confounded[0].Error(), "permittivity and stray_capacitance can't be told apart") {
			t.Errorf("confounded: %q", r.Confounded)
		}
		if !math.IsNaN(r.U[0]) || !math.IsNaN(r.U[2]) || len(r.AtBound) != 0 {
			t.Errorf("u = %v, at a bound %v: those of permittivity and stray_capacitance are unknown and nothing is at a bound", r.U, r.AtBound)
		}
		if v := r.Values[0]; !(v > 8e-12 && v < 10e-12) {
			t.Errorf("permittivity ran away to %v", v)
		}
	}
}

// A start at which two terms coincide lacks rank there only.
func TestSingularAtTheStartOnly(t *testing.T) {
	x := []float64{0, 0.5, 1, 1.5, 2, 3, 4, 5, 6, 8}
	p := &Problem{Parameters: []Parameter{{Name: "a", Start: 1}, {Name: "b", Start: 1}, {Name: "c", Start: 1}, {Name: "d", Start: 1}}}
	for i, x := range x {
		p.Y = append(p.Y, 3*math.Exp(-0.3*x)+2*math.Exp(-2*x)+1e-4*float64(i%3-1))
	}
	p.Eval = func(b, f []float64, jac [][]float64) error {
		for i, x := range x {
			e, g := math.Exp(-b[1]*x), math.Exp(-b[3]*x)
			f[i] = b[0]*e + b[2]*g
			if jac != nil {
				jac[0][i], jac[1][i], jac[2][i], jac[3][i] = e, -b[0]*x*e, g, -b[2]*x*g
			}
		}
		return nil
	}
	r, err := Fit(context.Background(), p, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	if r.Status != Converged || r.RSS > 1e-6 {
		t.Fatalf("status %v (%s), residual sum of squares %v", r.Status, r.Reason, r.RSS)
	}
}
