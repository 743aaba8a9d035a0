package gum

// A Region is a joint coverage region of all outputs (JCGM 102:2011 7.7).
type Region struct {
	Kind        string      // "ellipse" (hyper-ellipsoid, 7.7.2) or "rectangle" (hyper-rectangle, 7.7.3)
	Probability float64     // the share of trials it holds
	Centre      []float64   // one for each output
	Shape       [][]float64 // ellipse: covariance matrix V of {y: (y−c)ᵀV⁻¹(y−c) ≤ K²}; rectangle: its diagonal holds u²
	K           float64     // k_p or k_q
}
