package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"example.org/guardring/pkg/reduce"
)

// The implicit example of Boggs, Byrd, Rogers, Schnabel, User's Reference Guide for
// ODRPACK 2.01 (NISTIR 92-4834), p. 49, an ellipse through points, as an equation on
// the command line. The guide knows the ratio of the noises alone and scales its
// standard deviations by the residuals: the Birge ratio does the same.
func TestFitEquation(t *testing.T) {
	data, err := os.ReadFile(filepath.Join("..", "..", "testdata", "refs", "eiv.json"))
	if err != nil {
		t.Fatal(err)
	}
	var items []struct {
		ID               string
		Inputs, Expected json.RawMessage
	}
	if err := json.Unmarshal(data, &items); err != nil {
		t.Fatal(err)
	}
	var in struct{ X1, X2, Start []float64 }
	var want struct{ Beta, SD []float64 }
	for _, it := range items {
		if it.ID != "odrpack-implicit-ellipse" {
			continue
		}
		if err := json.Unmarshal(it.Inputs, &in); err != nil {
			t.Fatal(err)
		}
		if err := json.Unmarshal(it.Expected, &want); err != nil {
			t.Fatal(err)
		}
	}
	if len(in.X1) != 20 || len(want.Beta) != 5 || len(want.SD) != 5 {
		t.Fatalf("%d points, %d estimates in the reference", len(in.X1), len(want.Beta))
	}
	csv := "x1,x2\n"
	for i := range in.X1 {
		csv += fmt.Sprintf("%v,%v\n", in.X1[i], in.X2[i])
	}
	var start []string
	for j, v := range in.Start {
		start = append(start, fmt.Sprintf("b%d=%v", j+1, v))
	}
	var out, messages bytes.Buffer
	if code := run(context.Background(), []string{"fit", "-", "--formula", "b3*pow(x1-b1, 2) + 2*b4*(x1-b1)*(x2-b2) + b5*pow(x2-b2, 2) = 1",
		"--start", strings.Join(start, ","), "--predictor-noise", "x1=1,x2=1", "--json"}, strings.NewReader(csv), &out, &messages); code != 0 {
		t.Fatalf("exit code %d: %s", code, messages.String())
	}
	var rec reduce.FitRecord
	if err := json.Unmarshal(out.Bytes(), &rec); err != nil {
		t.Fatal(err)
	}
	if rec.Response != "" || rec.Fit.Method != "errors-in-variables" || rec.Fit.DOF != 15 {
		t.Errorf("response %q, method %s, %d degrees of freedom", rec.Response, rec.Fit.Method, rec.Fit.DOF)
	}
	if len(rec.Fit.Parameters) != 5 {
		t.Fatalf("%d parameters", len(rec.Fit.Parameters))
	}
	for _, p := range rec.Fit.Parameters {
		var j int
		if _, err := fmt.Sscanf(p.Name, "b%d", &j); err != nil {
			t.Fatal(err)
		}
		if got, w := float64(p.Value), want.Beta[j-1]; math.Abs(got/w-1) > 1e-5 {
			t.Errorf("%s = %v, published %v", p.Name, got, w)
		}
		if got, w := float64(p.U)*float64(rec.Fit.BirgeRatio), want.SD[j-1]; math.Abs(got/w-1) > 1e-3 {
			t.Errorf("standard deviation of %s %v, published %v", p.Name, got, w)
		}
	}
}
