package field

import (
	"fmt"
	"strings"
)

// Material is a published static or low-frequency relative permittivity near
// room temperature, with the range within which published values lie.
type Material struct {
	Name      string
	EpsR      float64 // relative permittivity, 1
	Low, High float64 // ends of the range of published values, 1
	Source    string
}

// Materials returns the table, for a sanity check of a measured permittivity
// only: grade, moisture and frequency move the values.
func Materials() []Material {
	return []Material{
		{"PTFE", 2.1, 2.0, 2.1, "von Hippel, Dielectric Materials and Applications, 1954 (from memory)"},
		{"polyethylene", 2.26, 2.25, 2.35, "von Hippel 1954 (from memory)"},
		{"water 25 C", 78.3, 78.25, 78.45, "Malmberg and Maryott, J. Res. NBS 56 (1956) 1"},
	}
}

// CheckMaterial compares a measured relative permittivity with standard
// uncertainty u with the published range of a material and says in words when it
// lies outside by more than 2u. ok is false then, and the note says how far. A
// material without a published range, or numbers that can't be, are an error.
func CheckMaterial(name string, epsr, u float64) (ok bool, note string, err error) {
	if err := refuse("check of a material", finite("relative permittivity", epsr, "1"), notNegative("standard uncertainty", u, "1")); err != nil {
		return false, "", err
	}
	var names []string
	for _, m := range Materials() {
		if strings.EqualFold(m.Name, name) {
			switch {
			case epsr+2*u < m.Low:
				return false, fmt.Sprintf("relative permittivity %.4g is below the published range of %s, %g to %g", epsr, m.Name, m.Low, m.High), nil
			case epsr-2*u > m.High:
				return false, fmt.Sprintf("relative permittivity %.4g is above the published range of %s, %g to %g", epsr, m.Name, m.Low, m.High), nil
			}
			return true, fmt.Sprintf("within the published range of %s, %g to %g", m.Name, m.Low, m.High), nil
		}
		names = append(names, m.Name)
	}
	return false, "", fmt.Errorf("no published range for material %q; known are %s", name, strings.Join(names, ", "))
}

// WaterPermittivity returns the static relative permittivity of water at T (K):
// 87.740 − 0.40008 t + 9.398e-4 t² − 1.410e-6 t³, t in °C, 0 to 100 °C, to 0.1 %
// (Malmberg and Maryott 1956; polynomial from memory).
func WaterPermittivity(T float64) (float64, error) {
	if err := refuse("permittivity of water", within("temperature", T, "K", zeroCelsius, 373.15)); err != nil {
		return 0, err
	}
	t := T - zeroCelsius
	return 87.740 + t*(-0.40008+t*(9.398e-4-t*1.410e-6)), nil
}
