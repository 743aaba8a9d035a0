package lsq_test

import "math"

func expm1(x float64) float64 { return math.Expm1(x) }
func rsqrt(w float64) float64 { return 1 / math.Sqrt(w) }
