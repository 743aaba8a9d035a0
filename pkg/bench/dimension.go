package bench

import "example.org/guardring/pkg/si"

// dimensionNames are the words for dimensions in messages.
var dimensionNames = []struct {
	dim  si.Dimension
	name string
}{
	{si.Dimensionless, "a pure number"}, {si.Length, "a length"}, {si.Mass, "a mass"}, {si.Time, "a time"},
	{si.Current, "a current"}, {si.Temperature, "a temperature"}, {si.Area, "an area"}, {si.Volume, "a volume"},
	{si.Frequency, "a frequency"}, {si.Velocity, "a velocity"}, {si.Acceleration, "an acceleration"},
	{si.Density, "a density"}, {si.Force, "a force"}, {si.Pressure, "a pressure"}, {si.Energy, "an energy or a torque"},
	{si.Power, "a power"}, {si.Charge, "a charge"}, {si.Voltage, "a voltage"}, {si.Field, "an electric field"},
	{si.Capacitance, "a capacitance"}, {si.Permittivity, "a permittivity"}, {si.Resistance, "a resistance"},
	{si.Conductivity, "a conductivity"}, {si.SurfaceCharge, "a charge on a surface"},
}

// dimensionName says what is measured in u.
func dimensionName(u si.Unit) string {
	for _, d := range dimensionNames {
		if d.dim == u.Dim {
			return d.name
		}
	}
	return "a quantity in " + u.Dim.String()
}
