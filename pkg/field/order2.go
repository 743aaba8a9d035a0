package field

import "math"

// order2 is a value with its gradient and Hessian in the three lengths of a
// sphere pair: the radii a and b and the gap. Fixed size and on the stack.
type order2 struct {
	v float64
	g [3]float64
	h [6]float64 // 00 01 02 11 12 22
}

var hessIndex = [6][2]int{{0, 0}, {0, 1}, {0, 2}, {1, 1}, {1, 2}, {2, 2}}

func variable(i int, v float64) (x order2) {
	x.v = v
	x.g[i] = 1
	return x
}

// linear returns Σ c[i]·(variable i) with value v.
func linear(v, ca, cb, cg float64) order2 { return order2{v: v, g: [3]float64{ca, cb, cg}} }

// chain applies a function of one argument.
func (x *order2) chain(f, f1, f2 float64) (y order2) {
	y.v = f
	for i := range 3 {
		y.g[i] = f1 * x.g[i]
	}
	for k, ij := range hessIndex {
		y.h[k] = f1*x.h[k] + f2*x.g[ij[0]]*x.g[ij[1]]
	}
	return y
}

// chain2 applies a function of two arguments.
func chain2(x, y *order2, f, fx, fy, fxx, fxy, fyy float64) (z order2) {
	z.v = f
	for i := range 3 {
		z.g[i] = fx*x.g[i] + fy*y.g[i]
	}
	for k, ij := range hessIndex {
		i, j := ij[0], ij[1]
		z.h[k] = fx*x.h[k] + fy*y.h[k] +
			fxx*x.g[i]*x.g[j] + fxy*(x.g[i]*y.g[j]+y.g[i]*x.g[j]) + fyy*y.g[i]*y.g[j]
	}
	return z
}

func (x *order2) add(y *order2) order2 { return chain2(x, y, x.v+y.v, 1, 1, 0, 0, 0) }
func (x *order2) mul(y *order2) order2 { return chain2(x, y, x.v*y.v, y.v, x.v, 0, 1, 0) }
func (x *order2) scale(k float64) order2 {
	return x.chain(k*x.v, k, 0)
}

func (x *order2) inv() order2 {
	r := 1 / x.v
	return x.chain(r, -r*r, 2*r*r*r)
}

func (x *order2) sqrt() order2 {
	r := math.Sqrt(x.v)
	return x.chain(r, 0.5/r, -0.25/(r*x.v))
}

func (x *order2) asinh() order2 {
	q := 1 / (1 + x.v*x.v)
	r := math.Sqrt(q)
	return x.chain(math.Asinh(x.v), r, -x.v*r*q)
}
