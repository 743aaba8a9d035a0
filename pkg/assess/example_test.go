package assess_test

import (
	"context"
	"fmt"
	"log"
	"time"

	"example.org/guardring/pkg/assess"
)

// A field meter's correction factor against the maker's limits: the value lies
// inside, but closer to a limit than its expanded uncertainty.
func ExampleDecide() {
	factor := assess.Result{Name: "correction factor", Value: 1.0172, U: 0.0021, Unit: "1"}
	limits := assess.Between(0.98, 1.02, "1")
	for _, rule := range []assess.Rule{assess.SimpleAcceptance, assess.GuardBand, assess.NonBinary} {
		s, err := assess.Decide(factor, limits, assess.DecisionSettings{Rule: rule})
		if err != nil {
			log.Fatal(err)
		}
		fmt.Println(s)
	}
	// Output:
	// pass: 1.0172 ± 0.0042 against 0.98 to 1.02, rule simple-acceptance, probability of conformity 90.88 %
	// fail: 1.0172 ± 0.0042 against 0.98 to 1.02, rule guard-band, guard band 0.0042, probability of conformity 90.88 %
	// conditional pass: 1.0172 ± 0.0042 against 0.98 to 1.02, rule non-binary, guard band 0.0042, probability of conformity 90.88 %
}

// JCGM 106:2012 7.4 on values of the laboratory's own: both limits count.
func ExampleProbabilityOfConformity() {
	p, err := assess.ProbabilityOfConformity(assess.Result{Value: 5, U: 2.5, Unit: "V"}, assess.Between(0, 10, "V"))
	if err != nil {
		log.Fatal(err)
	}
	fmt.Println(assess.Percent(p, 1-p))
	// Output: 95.45 %
}

// JCGM 106:2012 clause 8, speed enforcement: from what reading on is a limit of
// 100 km/h exceeded with a probability of 99.9 %, when readings have a relative
// standard uncertainty of 2 %?
func ExampleSpread_ReadingAt() {
	v, err := assess.Spread{Relative: 0.02}.ReadingAt(100, 0.999)
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("%.1f km/h\n", v)
	// Output: 106.6 km/h
}

// What the client and the laboratory risk over many meters of one type.
func ExampleGlobalRisks() {
	g, err := assess.GlobalRisks(assess.Between(0.98, 1.02, "1"), assess.Between(0.9842, 1.0158, "1"), 0.0021,
		assess.Population{Mean: 1.001, SD: 0.008, Source: "as-found factors of earlier years (invented)"})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("consumer %.2e, producer %.3f, conforming %.3f\n", g.Consumer, g.Producer, g.PopulationConform)
	// Output: consumer 6.62e-05, producer 0.045, conforming 0.987
}

// Two laboratories that used one divider: what it contributes leaves the
// difference, and so has to leave its uncertainty.
func ExampleEn() {
	a := assess.Result{Name: "laboratory A", Value: 1.0132, U: 0.0025, Unit: "1"}
	b := assess.Result{Name: "laboratory B", Value: 1.0098, U: 0.0024, Unit: "1"}
	for _, cov := range []float64{0, 0.0022 * 0.0022} {
		e, err := assess.En(a, b, cov)
		if err != nil {
			log.Fatal(err)
		}
		fmt.Printf("%.2f\n", e)
	}
	// Output:
	// 0.49
	// 1.11
}

// Five invented laboratories, one of them apart.
func ExampleLargestConsistentSubset() {
	results := []assess.Result{
		{Name: "A", Value: 5.0012, U: 0.0010, Unit: "kV/m"},
		{Name: "B", Value: 5.0003, U: 0.0012, Unit: "kV/m"},
		{Name: "C", Value: 5.0081, U: 0.0011, Unit: "kV/m"},
		{Name: "D", Value: 4.9995, U: 0.0020, Unit: "kV/m"},
		{Name: "E", Value: 5000.7, U: 0.9, Unit: "V/m"},
	}
	all, err := assess.WeightedMean(results, nil)
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("all: consistent %v, Birge ratio %.1f\n", all.Consistent, all.BirgeRatio)
	s, err := assess.LargestConsistentSubset(context.Background(), results, nil, assess.SubsetSettings{})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("kept %v: %.4f ± %.4f kV/m\n", s.Members, s.Mean.Value, s.Mean.U)
	for _, d := range s.Mean.Degrees().Unilateral {
		fmt.Printf("%s %+.4f, U = %.4f\n", d.A, d.D, d.Expanded)
	}
	// Output:
	// all: consistent false, Birge ratio 3.0
	// kept [0 1 3 4]: 5.0007 ± 0.0006 kV/m
	// A +0.0005, U = 0.0017
	// B -0.0004, U = 0.0021
	// C +0.0074, U = 0.0025
	// D -0.0012, U = 0.0038
	// E +0.0000, U = 0.0014
}

// ISO 13528:2015 Algorithm A on a set with one gross error.
func ExampleAlgorithmA() {
	r, err := assess.AlgorithmA([]float64{10.1, 9.9, 10.0, 10.2, 9.8, 10.1, 14.0}, assess.RobustSettings{Digits: 3})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("%.2f, s* = %.2f: %s\n", r.Mean, r.SD, r.Criterion)
	// Output: 10.07, s* = 0.23: no change in significant figure 3 of the standard deviation and the same place of the mean
}

// The yearly calibrations of an invented meter, adjusted once.
func ExampleDrift() {
	on := func(year int) time.Time { return time.Date(year, 4, 1, 0, 0, 0, 0, time.UTC) }
	h := assess.History{Unit: "1", Shared: 0.0010, Calibrations: []assess.Calibration{
		{Date: on(2020), Value: 1.0012, U: 0.0016},
		{Date: on(2021), Value: 1.0047, U: 0.0016},
		{Date: on(2022), Value: 1.0098, U: 0.0016, Adjustment: -0.0095, UAdjustment: 0.0006},
		{Date: on(2023), Value: 1.0041, U: 0.0016},
		{Date: on(2024), Value: 1.0085, U: 0.0016},
	}}
	l, err := assess.Drift(h, assess.DriftSettings{})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("%.4f ± %.4f a year, significant %v\n", l.Slope*assess.Year, l.USlope*assess.Year, l.Significant)
	p, err := l.Predict(on(2025), 0)
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("%.4f ± %.4f (k = %.2f)\n", p.Value, p.K*p.U, p.K)
	// Output:
	// 0.0043 ± 0.0004 a year, significant true
	// 1.0127 ± 0.0033 (k = 2.00)
}
