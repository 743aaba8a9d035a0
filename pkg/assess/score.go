package assess

import (
	"errors"
	"fmt"
	"math"
)

// En returns the E_n score of a against b,
//
//	E_n = (x_a − x_b)/√(U_a² + U_b² − 2 k_a k_b cov(x_a, x_b))
//
// with expanded uncertainties U = k·u (ISO 13528:2015 9.7; ISO/IEC 17043:2010
// B.3.1.3 e, both from memory, for cov = 0; the covariance term is the law of
// propagation, JCGM 100 5.2). cov is the covariance of the two values, in the
// unit of a squared: leaving out what a shared divider or standard contributes
// makes |E_n| too small. |E_n| ≤ 1 is agreement.
func En(a, b Result, cov float64) (float64, error) {
	return score(a, b, cov, a.factor(), b.factor())
}

// Zeta returns the ζ score of a against b, (x_a − x_b)/√(u_a² + u_b² − 2cov),
// with standard uncertainties (ISO 13528:2015 9.6). cov as for En.
func Zeta(a, b Result, cov float64) (float64, error) { return score(a, b, cov, 1, 1) }

func score(a, b Result, cov, ka, kb float64) (float64, error) {
	if err := a.check(false); err != nil {
		return 0, err
	}
	if err := b.check(false); err != nil {
		return 0, err
	}
	b, err := b.to(a.Unit)
	if err != nil {
		return 0, err
	}
	if math.IsNaN(cov) || math.Abs(cov) > a.U*b.U*(1+1e-9) {
		return 0, fmt.Errorf("covariance %v of %s and %s is larger than the product of their standard uncertainties %v", cov, a.label(), b.label(), a.U*b.U)
	}
	ua, ub := ka*a.U, kb*b.U
	variance := ua*ua + ub*ub - 2*ka*kb*cov
	if !(variance > 1e-14*(ua*ua+ub*ub)) {
		return 0, fmt.Errorf("the difference of %s and %s has no uncertainty, so no score: they are fully correlated or both exact", a.label(), b.label())
	}
	return (a.Value - b.Value) / math.Sqrt(variance), nil
}

// Z returns the z score (x − x_pt)/√(σ_pt² + u²(x_pt)) of a value against an
// assigned one, sd being the standard deviation for proficiency assessment
// σ_pt, in the unit of x. With assigned.U = 0 it is the plain z score (ISO
// 13528:2015 9.4), otherwise z′ (9.5).
func Z(x, assigned Result, sd float64) (float64, error) {
	if err := x.check(false); err != nil {
		return 0, err
	}
	if err := assigned.check(false); err != nil {
		return 0, err
	}
	if !(sd > 0) || math.IsInf(sd, 0) {
		return 0, fmt.Errorf("standard deviation for proficiency assessment %v must be above zero", sd)
	}
	assigned, err := assigned.to(x.Unit)
	if err != nil {
		return 0, err
	}
	return (x.Value - assigned.Value) / math.Hypot(sd, assigned.U), nil
}

// Signal is what a score calls for.
type Signal string

// The signals of a score or of a point of a control chart.
const (
	Acceptable Signal = "acceptable"
	Warning    Signal = "warning signal"
	Action     Signal = "action signal"
)

// Judge returns the signal of a z, z′ or ζ score, or of a standardised distance
// from a centre line: warning above 2, action from 3 (ISO 13528:2015 9.4.2).
// E_n has one bound only, 1.
func Judge(z float64) (Signal, error) {
	if math.IsNaN(z) {
		return "", errors.New("the score is not a number")
	}
	return signal(z), nil
}

func signal(z float64) Signal {
	switch a := math.Abs(z); {
	case a >= 3:
		return Action
	case a > 2:
		return Warning
	}
	return Acceptable
}
