package si

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"testing"
)

// TestConstants compares with the CODATA 2022 listing (published), to the bit.
func TestConstants(t *testing.T) {
	data, err := os.ReadFile(filepath.Join("..", "..", "testdata", "refs", "constants.json"))
	if err != nil {
		t.Fatal(err)
	}
	var items []struct {
		ID, Source string
		Expected   map[string]float64
	}
	if err := json.Unmarshal(data, &items); err != nil {
		t.Fatal(err)
	}
	have := map[string]float64{
		"eps0": Eps0, "u_eps0": UEps0, "mu0": Mu0, "u_mu0": UMu0, "e": ElementaryCharge, "c": SpeedOfLight,
		"alpha": FineStructure, "u_alpha": UFineStructure, "gn": StandardGravity, "kB": Boltzmann, "atm": StandardAtmosphere,
	}
	if len(items) != 1 || items[0].ID != "codata2022" {
		t.Fatalf("constants.json holds %d items, want codata2022 alone", len(items))
	}
	want := items[0].Expected
	for name, v := range have {
		w, ok := want[name]
		if !ok {
			t.Errorf("%s is not in constants.json", name)
		} else if v != w {
			t.Errorf("%s = %v, want %v", name, v, w)
		}
	}
	// The von Klitzing constant is h/e²: it checks h, which has no line of its
	// own, to the ten digits that are listed.
	if v := Planck / (ElementaryCharge * ElementaryCharge); math.Abs(v/want["vonKlitzing"]-1) > 5e-10 {
		t.Errorf("h/e² = %.12g, want %.12g", v, want["vonKlitzing"])
	}
}

// TestConstantsAgree checks the constants against the relations between them
// (SI Brochure, 9th edition, appendix 1; computed independently of the listed
// values within their uncertainties).
func TestConstantsAgree(t *testing.T) {
	if v := ElementaryCharge * ElementaryCharge / (2 * FineStructure * Planck * SpeedOfLight); math.Abs(v-Eps0) > UEps0 {
		t.Errorf("e²/2αhc = %.14g, want %.14g within %g", v, Eps0, UEps0)
	}
	if v := 1 / (Mu0 * SpeedOfLight * SpeedOfLight); math.Abs(v-Eps0) > UEps0 {
		t.Errorf("1/µ₀c² = %.14g, want %.14g within %g", v, Eps0, UEps0)
	}
	if v := Boltzmann * Avogadro; math.Abs(v/MolarGas-1) > 1e-15 {
		t.Errorf("k N_A = %.17g, want %.17g", v, MolarGas)
	}
	k, u := KE()
	if v := Mu0 * SpeedOfLight * SpeedOfLight / (4 * math.Pi); math.Abs(v-k) > u {
		t.Errorf("µ₀c²/4π = %.14g, want %.14g within %g", v, k, u)
	}
	if math.Abs(u/k-UEps0/Eps0) > 1e-25 {
		t.Errorf("relative uncertainty of k is %g, of ε₀ %g", u/k, UEps0/Eps0)
	}
	for _, c := range Constants() {
		if _, err := ParseUnit(c.Unit); err != nil {
			t.Errorf("%s: %v", c.Name, err)
		}
	}
}
