package formula

import "math"

// The loops below are all the work there is for a block of rows. They are
// written out so that the compiler drops the bounds checks and no call stands
// within the common ones. a, b and d have the same length; d may be a or b.

func fill(d []float64, v float64) {
	for i := range d {
		d[i] = v
	}
}

func vectors(o op, d, a, b []float64) {
	a, b = a[:len(d)], b[:len(d)]
	switch o {
	case opAdd:
		for i := range d {
			d[i] = a[i] + b[i]
		}
	case opSub:
		for i := range d {
			d[i] = a[i] - b[i]
		}
	case opMul:
		for i := range d {
			d[i] = a[i] * b[i]
		}
	case opDiv:
		for i := range d {
			d[i] = a[i] / b[i]
		}
	case opMin:
		for i := range d {
			d[i] = min(a[i], b[i])
		}
	case opMax:
		for i := range d {
			d[i] = max(a[i], b[i])
		}
	case opPow:
		for i := range d {
			d[i] = math.Pow(a[i], b[i])
		}
	case opAtan2:
		for i := range d {
			d[i] = math.Atan2(a[i], b[i])
		}
	case opGE:
		for i := range d {
			d[i] = atLeast(a[i], b[i])
		}
	default:
		for i := range d {
			d[i] = apply(o, a[i], b[i])
		}
	}
}

func vectorScalar(o op, d, a []float64, b float64) {
	a = a[:len(d)]
	switch o {
	case opAdd:
		for i := range d {
			d[i] = a[i] + b
		}
	case opSub:
		for i := range d {
			d[i] = a[i] - b
		}
	case opMul:
		for i := range d {
			d[i] = a[i] * b
		}
	case opDiv:
		for i := range d {
			d[i] = a[i] / b
		}
	case opPow:
		for i := range d {
			d[i] = math.Pow(a[i], b)
		}
	case opMin:
		for i := range d {
			d[i] = min(a[i], b)
		}
	case opMax:
		for i := range d {
			d[i] = max(a[i], b)
		}
	default:
		for i := range d {
			d[i] = apply(o, a[i], b)
		}
	}
}

func scalarVector(o op, d []float64, a float64, b []float64) {
	b = b[:len(d)]
	switch o {
	case opAdd:
		for i := range d {
			d[i] = a + b[i]
		}
	case opSub:
		for i := range d {
			d[i] = a - b[i]
		}
	case opMul:
		for i := range d {
			d[i] = a * b[i]
		}
	case opDiv:
		for i := range d {
			d[i] = a / b[i]
		}
	case opPow:
		for i := range d {
			d[i] = math.Pow(a, b[i])
		}
	default:
		for i := range d {
			d[i] = apply(o, a, b[i])
		}
	}
}

func unary(o op, d, a []float64) {
	a = a[:len(d)]
	switch o {
	case opNeg:
		for i := range d {
			d[i] = -a[i]
		}
	case opSqrt:
		for i := range d {
			d[i] = math.Sqrt(a[i])
		}
	case opAbs:
		for i := range d {
			d[i] = math.Abs(a[i])
		}
	case opExp:
		for i := range d {
			d[i] = math.Exp(a[i])
		}
	case opLog:
		for i := range d {
			d[i] = math.Log(a[i])
		}
	case opSin:
		for i := range d {
			d[i] = math.Sin(a[i])
		}
	case opCos:
		for i := range d {
			d[i] = math.Cos(a[i])
		}
	default:
		for i := range d {
			d[i] = apply(o, a[i], 0)
		}
	}
}
