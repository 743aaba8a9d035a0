package model

import (
	"fmt"

	"example.org/guardring/pkg/field"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/si"
)

// balanceScalars are what turns the indication of a balance into a force.
var balanceScalars = []Scalar{
	{Table: "environment", Name: "gravity", Doc: "acceleration of free fall at the balance (surveyed)", Unit: si.MustUnit("m/s2"), Positive: true, Part: "balance"},
	{Table: "environment", Name: "latitude", Doc: "geographic latitude, for normal gravity when none is surveyed", Unit: si.MustUnit("deg"), Part: "balance"},
	{Table: "environment", Name: "height", Doc: "height above the ellipsoid, for normal gravity", Unit: si.MustUnit("m"), Part: "balance"},
	{Table: "environment", Name: "gravity_anomaly", Doc: "local departure from normal gravity", Unit: si.MustUnit("m/s2"), Default: gum.Normal(0, 3e-4), Part: "balance"},
	{Table: "corrections.balance", Name: "air_density", Doc: "density of air when the balance was adjusted", Unit: si.MustUnit("kg/m3"), Default: gum.Exactly(field.AdjustmentAirDensity), Part: "balance"},
}

// balanceCorrection is the correction that goes with them.
var balanceCorrection = Correction{Name: "balance", Doc: "conventional mass to force: air density at adjustment", Default: true}

// forcePerMass returns the force (N) for each kilogram that the bench's balance
// shows, as jets and as plain numbers, or nil when the bench reads a force.
func forcePerMass(k *Kind, s *Setup) (jets func(q []jet.Jet) jet.Jet, plain func(q []float64) float64, err error) {
	if !s.Channels["mass"] {
		return nil, nil, nil
	}
	surveyed := s.Given["environment.gravity"]
	if !surveyed && !s.Given["environment.latitude"] {
		return nil, nil, fmt.Errorf("environment.gravity: a balance indication needs the local acceleration of free fall; state gravity, or latitude and height")
	}
	iGrav, iLat, iHeight, iAnomaly := k.Scalar("environment.gravity"), k.Scalar("environment.latitude"), k.Scalar("environment.height"), k.Scalar("environment.gravity_anomaly")
	iRho, correct := k.Scalar("corrections.balance.air_density"), s.On["balance"]
	from := func(grav, lat, height, anomaly, rho jet.Jet) jet.Jet {
		if !surveyed {
			grav = field.GravityJet(lat, height).Add(anomaly)
		}
		if correct {
			return field.BalanceForceJet(jet.Const(1), grav, rho)
		}
		return grav
	}
	jets = func(q []jet.Jet) jet.Jet { return from(q[iGrav], q[iLat], q[iHeight], q[iAnomaly], q[iRho]) }
	plain = func(q []float64) float64 {
		return from(jet.Const(q[iGrav]), jet.Const(q[iLat]), jet.Const(q[iHeight]), jet.Const(q[iAnomaly]), jet.Const(q[iRho])).V
	}
	return jets, plain, nil
}
