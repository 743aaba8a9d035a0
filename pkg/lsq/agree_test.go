//go:build scipy

package lsq

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"os/exec"
	"testing"

	"example.org/guardring/pkg/random"
)

// TestAgreement compares 50 random problems, 30 with errors in the response and
// 20 with errors in both axes, with an independent program: go test -tags scipy
// needs /usr/bin/python3 with scipy. Estimates must agree to 1e-5 of their
// uncertainties, uncertainties to 1e-5.
func TestAgreement(t *testing.T) {
	type problem struct {
		Kind  string    `json:"kind"`
		Model string    `json:"model"`
		X     []float64 `json:"x"`
		Y     []float64 `json:"y"`
		UX    []float64 `json:"ux"`
		UY    []float64 `json:"uy"`
		Start []float64 `json:"start"`
	}
	// f and its derivatives by parameters and predictor
	models := map[string]func(b []float64, x float64) (f float64, d []float64, dx float64){
		"decay": func(b []float64, x float64) (float64, []float64, float64) {
			e := math.Exp(-x / b[1])
			return b[0]*e + b[2], []float64{e, b[0] * e * x / (b[1] * b[1]), 1}, -b[0] * e / b[1]
		},
		"line": func(b []float64, x float64) (float64, []float64, float64) {
			return b[0] + b[1]*x, []float64{1, x}, b[1]
		},
		"gap": func(b []float64, x float64) (float64, []float64, float64) {
			q := 1 / (x + b[1])
			return b[0]*q + b[2], []float64{q, -b[0] * q * q, 1}, -b[0] * q * q
		},
		"saturation": func(b []float64, x float64) (float64, []float64, float64) {
			q := 1 / (b[1] + x)
			return b[0] * x * q, []float64{x * q, -b[0] * x * q * q}, b[0] * b[1] * q * q
		},
		"parabola": func(b []float64, x float64) (float64, []float64, float64) {
			return b[0] + b[1]*x + b[2]*x*x, []float64{1, x, x * x}, b[1] + 2*b[2]*x
		},
	}
	truth := map[string][]float64{"decay": {5, 3, 0.5}, "line": {1, 2}, "gap": {8, 0.4, 0.3}, "saturation": {4, 1.5}, "parabola": {1, -2, 0.7}}
	names := []string{"decay", "line", "gap", "saturation", "parabola"}
	var all []problem
	for k := 0; k < 50; k++ {
		src := random.New(17, "agreement", uint64(k))
		p := problem{Kind: "fit", Model: names[k%5]}
		if k >= 30 {
			p.Kind = "eiv"
		}
		b := append([]float64(nil), truth[p.Model]...)
		for j := range b {
			b[j] *= 0.7 + 0.6*src.Float64()
			p.Start = append(p.Start, b[j]*(0.8+0.4*src.Float64()))
		}
		n := 8 + int(30*src.Float64())
		for i := 0; i < n; i++ {
			x := 0.5 + 8*src.Float64()
			f, _, _ := models[p.Model](b, x)
			ux, uy := 0.01+0.02*src.Float64(), (0.005+0.01*src.Float64())*(1+math.Abs(f))
			p.UX, p.UY = append(p.UX, ux), append(p.UY, uy)
			p.Y = append(p.Y, f+uy*src.Normal())
			if p.Kind == "eiv" {
				x += ux * src.Normal()
			}
			p.X = append(p.X, x)
		}
		all = append(all, p)
	}
	input, err := json.Marshal(all)
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command("/usr/bin/python3", "../../testdata/baselines/agree.py")
	cmd.Stdin = bytes.NewReader(input)
	output, err := cmd.Output()
	if err != nil {
		t.Fatalf("%v: %s", err, err.(*exec.ExitError).Stderr)
	}
	var want []struct{ Values, U []float64 }
	if err := json.Unmarshal(output, &want); err != nil {
		t.Fatal(err)
	}
	for k, p := range all {
		model := models[p.Model]
		pars := make([]Parameter, len(p.Start))
		for j, b := range p.Start {
			pars[j].Start = b
		}
		var values, u []float64
		if p.Kind == "fit" {
			r := fit(t, &Problem{Parameters: pars, Y: p.Y, U: p.UY, Eval: func(b, f []float64, jac [][]float64) error {
				for i, x := range p.X {
					v, d, _ := model(b, x)
					f[i] = v
					for j := range jac {
						jac[j][i] = d[j]
					}
				}
				return nil
			}})
			values, u = r.Values, r.U
		} else {
			r := fitEIV(t, &EIVProblem{Parameters: pars, X: [][]float64{p.X}, UX: [][]float64{p.UX}, Y: p.Y, UY: p.UY, Eval: func(b []float64, x [][]float64, f []float64, jac, dx [][]float64) error {
				for i, x := range x[0] {
					v, d, e := model(b, x)
					f[i] = v
					for j := range jac {
						jac[j][i] = d[j]
					}
					if dx != nil {
						dx[0][i] = e
					}
				}
				return nil
			}})
			values, u = r.Values, r.U
		}
		for j := range values {
			what := fmt.Sprintf("problem %d (%s %s) parameter %d", k, p.Kind, p.Model, j)
			if d := math.Abs(values[j]-want[k].Values[j]) / u[j]; !(d <= 1e-5) {
				t.Errorf("%s: %v and %v differ by %.2g of the uncertainty", what, values[j], want[k].Values[j], d)
			}
			near(t, what+" uncertainty", u[j], want[k].U[j], 1e-5)
		}
	}
}
