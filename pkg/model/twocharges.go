package model

import (
	"fmt"
	"math"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// What the benches with two charged bodies share: where the charges of a row come
// from, their leakage, and the marks that they leave in the residuals.

// Channels that the benches with two charges share.
var (
	distanceChannel = Channel{Name: "distance", Doc: "centre distance of the bodies as read on the scale, at rest", Unit: si.MustUnit("mm"), Role: Predictor, Positive: true}
	elapsedChannel  = Channel{Name: "elapsed", Doc: "time from the measurement of the charges to the reading; without it they are those at time zero of the rows", Unit: si.MustUnit("s"), Role: Predictor, Optional: true}
)

// twoChargeChannels are the predictors of a bench with two charges.
func twoChargeChannels(only string) []Channel {
	return []Channel{
		distanceChannel,
		{Name: "charge_1", Doc: "charge of the first body with its sign" + only + "; not needed when quantities.charge_1 is stated", Unit: si.MustUnit("nC"), Role: Predictor, Optional: true},
		{Name: "charge_2", Doc: "charge of the second body with its sign" + only + "; not needed when quantities.charge_2 is stated", Unit: si.MustUnit("nC"), Role: Predictor, Optional: true},
		elapsedChannel,
	}
}

// chargeScalars are the charges and the distance zero of such a bench.
var chargeScalars = []Scalar{
	{Table: "quantities", Name: "charge_1", Doc: "charge of the first body when it has no channel", Unit: si.MustUnit("nC"), Part: "charges"},
	{Table: "quantities", Name: "charge_2", Doc: "charge of the second body when it has no channel", Unit: si.MustUnit("nC"), Part: "charges"},
	{Table: "quantities", Name: "distance_offset", Doc: "zero error of the distance scale, added to the reading", Unit: si.MustUnit("mm"), Adjustable: true, Part: "distance"},
}

// leakScalars are the inputs of the leakage of one or two charges.
var leakScalars = []Scalar{
	{Table: "corrections.leakage", Name: "time_constant", Doc: "time constant with which the (first) charge is lost", Unit: si.MustUnit("s"), Required: true, Adjustable: true, Positive: true, Part: "charges"},
	{Table: "corrections.leakage", Name: "rate_ratio", Doc: "leakage rate of the second charge over that of the first", Unit: si.MustUnit("1"), Default: gum.Exactly(1), Part: "charges"},
}

// twoCharges finds the charges of a row, from channels or scalars, with leakage.
type twoCharges struct {
	predictors   []string
	pQ, iQ       [2]int // place among the predictors, −1 none; scalar
	pTime        int
	leak, byRow  bool // leakage; in the time of the row
	iTau, iRatio int
	share        bool // the second charge is iShare times the first
	iShare       int
}

// newTwoCharges resolves where the charges of a bench come from; the predictors
// begin with the distance. When the first charge is sought, the second may follow
// from it.
func newTwoCharges(k *Kind, s *Setup, seekFirst bool) (*twoCharges, error) {
	c := &twoCharges{predictors: []string{"distance"}, leak: s.On["leakage"],
		iTau: k.Scalar("corrections.leakage.time_constant"), iRatio: k.Scalar("corrections.leakage.rate_ratio"), iShare: k.Scalar("charge_ratio")}
	for i, name := range []string{"charge_1", "charge_2"} {
		c.pQ[i], c.iQ[i] = -1, k.Scalar(name)
		switch given, channel := s.Given[name], s.Channels[name]; {
		case given && channel:
			return nil, fmt.Errorf("quantities.%s: the charge has a channel of its own; state one of the two", name)
		case channel:
			c.pQ[i] = len(c.predictors)
			c.predictors = append(c.predictors, name)
		case seekFirst && i == 0:
		case seekFirst && !given:
			c.share = true
		case !given:
			return nil, fmt.Errorf("quantities.%s: is missing; state the charge, or name its column in channels.%s", name, name)
		case s.Scalars[c.iQ[i]] == 0:
			return nil, fmt.Errorf("quantities.%s: is zero; a body without charge has no Coulomb force", name)
		}
	}
	c.pTime = len(c.predictors)
	if s.Channels["elapsed"] {
		c.predictors = append(c.predictors, "elapsed")
	} else {
		c.byRow = c.leak
	}
	return c, nil
}

// jets are the charges of a row.
func (c *twoCharges) jets(q, x []jet.Jet) (q1, q2 jet.Jet) {
	v := [2]jet.Jet{}
	for i := range v {
		switch {
		case c.pQ[i] >= 0:
			v[i] = x[c.pQ[i]]
		case i == 1 && c.share:
			v[i] = v[0].Mul(q[c.iShare])
		default:
			v[i] = q[c.iQ[i]]
		}
	}
	if c.leak {
		rate := q[c.iTau].Inv()
		v[0] = field.LeakJet(v[0], x[c.pTime], rate)
		v[1] = field.LeakJet(v[1], x[c.pTime], rate.Mul(q[c.iRatio]))
	}
	return v[0], v[1]
}

// values is jets at plain numbers.
func (c *twoCharges) values(q []float64, x [][]float64, i int) (q1, q2 float64) {
	v := [2]float64{}
	for n := range v {
		switch {
		case c.pQ[n] >= 0:
			v[n] = x[c.pQ[n]][i]
		case n == 1 && c.share:
			v[n] = v[0] * q[c.iShare]
		default:
			v[n] = q[c.iQ[n]]
		}
	}
	if c.leak {
		u := x[c.pTime][i] / q[c.iTau]
		v[0] *= math.Exp(-u)
		v[1] *= math.Exp(-u * q[c.iRatio])
	}
	return v[0], v[1]
}

// check refuses times before the charges were known and warns of charges that
// are mostly gone.
func (c *twoCharges) check(q []float64, x [][]float64) ([]error, error) {
	if !c.leak {
		return nil, nil
	}
	longest := 0.0
	for i, t := range x[c.pTime] {
		if t < 0 {
			return nil, &RowError{Row: i, Err: fmt.Errorf("the charges are taken to leak from time zero; this reading is at %.6g s, before it", t)}
		}
		longest = math.Max(longest, t)
	}
	if u := longest / q[c.iTau]; u > 1 {
		return []error{fmt.Errorf("corrections.leakage: after %.3g s the bodies hold %.0f %% of their charge (time constant %.3g s); charge them anew sooner, or dry the insulators", longest, 100*math.Exp(-u), q[c.iTau])}, nil
	}
	return nil, nil
}

// likeness says what the product of two charges means.
func likeness(product float64) string {
	switch {
	case product > 0:
		return "charges of like sign"
	case product == 0:
		return "a body without charge beside one that may be charged"
	}
	return "charges of unlike sign"
}

// pairCauses are the marks in the residuals of a force between two charges.
func pairCauses(iOff int, c *twoCharges) []Cause {
	charge := func(q, x []float64, n int) float64 {
		switch {
		case c.pQ[n] >= 0:
			return x[c.pQ[n]]
		case n == 1 && c.share:
			return q[c.iQ[0]] * q[c.iShare]
		}
		return q[c.iQ[n]]
	}
	causes := []Cause{
		{Name: "distance_offset", Doc: "grows as 1/distance relative to the force: zero of the distance scale",
			Signature: func(q, x []float64, f, t float64) float64 { return f / (x[0] + q[iOff]) }},
		{Name: "induction", Doc: "attraction whatever the signs, as 1/distance³ relative to the force: induced charges, or the radii of the spheres",
			Signature: func(q, x []float64, f, t float64) float64 {
				p, w, r := charge(q, x, 0), charge(q, x, 1), x[0]+q[iOff]
				return -(p*p + w*w) / (r * r * r * r * r)
			}},
		{Name: "zero", Doc: "the same at every distance: zero of the balance",
			Signature: always},
		{Name: "drift", Doc: "proportional to time, whatever the force: drift of the balance",
			Signature: withTime},
	}
	leakName := "leakage"
	if c.leak {
		leakName = "corrections.leakage.time_constant" // left out of the ranking while the fit adjusts it
	}
	return append(causes, Cause{Name: leakName, Doc: "proportional to force and time: the bodies lose charge",
		Signature: func(q, x []float64, f, t float64) float64 {
			if c.leak || c.pTime < len(x) && c.pTime < len(c.predictors) {
				return f * x[c.pTime]
			}
			return f * t
		}})
}
