package formula

import (
	"go/token"
	"math"
	"math/big"
)

// An evaluator of trees in 320-bit arithmetic, from series and identities that
// share nothing with the compiled code: central differences of it are the
// derivatives to far beyond double precision.

const bits = 320

func num(x float64) *big.Float { return new(big.Float).SetPrec(bits).SetFloat64(x) }
func fresh() *big.Float        { return new(big.Float).SetPrec(bits) }

func bigAdd(a, b *big.Float) *big.Float { return fresh().Add(a, b) }
func bigSub(a, b *big.Float) *big.Float { return fresh().Sub(a, b) }
func bigMul(a, b *big.Float) *big.Float { return fresh().Mul(a, b) }
func bigQuo(a, b *big.Float) *big.Float { return fresh().Quo(a, b) }

// series sums terms until they no longer count; next makes term n from term
// n−1.
func series(first *big.Float, next func(t *big.Float, n int) *big.Float) *big.Float {
	sum, t := fresh().Set(first), fresh().Set(first)
	for n := 1; n < 1000; n++ {
		t = next(t, n)
		if t.Sign() == 0 || t.MantExp(nil) < sum.MantExp(nil)-bits {
			break
		}
		sum.Add(sum, t)
	}
	return sum
}

func bigExp(x *big.Float) *big.Float {
	const halvings = 24
	r := fresh().SetMantExp(x, -halvings)
	e := series(num(1), func(t *big.Float, n int) *big.Float { return bigQuo(bigMul(t, r), num(float64(n))) })
	for range halvings {
		e = bigMul(e, e)
	}
	return e
}

func bigLog(x *big.Float) *big.Float {
	f, _ := x.Float64()
	y := num(math.Log(f))
	for range 4 { // Newton for exp(y) = x: digits double
		e := bigExp(y)
		y = bigAdd(y, bigMul(num(2), bigQuo(bigSub(x, e), bigAdd(x, e))))
	}
	return y
}

func bigSinCos(x *big.Float) (s, c *big.Float) {
	const halvings = 16
	r := fresh().SetMantExp(x, -halvings)
	r2 := bigMul(r, r)
	s = series(r, func(t *big.Float, n int) *big.Float {
		return fresh().Neg(bigQuo(bigMul(t, r2), num(float64(2*n*(2*n+1)))))
	})
	c = series(num(1), func(t *big.Float, n int) *big.Float {
		return fresh().Neg(bigQuo(bigMul(t, r2), num(float64(2*n*(2*n-1)))))
	})
	for range halvings {
		s, c = bigMul(num(2), bigMul(s, c)), bigSub(bigMul(c, c), bigMul(s, s))
	}
	return s, c
}

func bigSqrt(x *big.Float) *big.Float { return fresh().Sqrt(x) }

func bigAtan(x *big.Float) *big.Float {
	const halvings = 10
	for range halvings {
		x = bigQuo(x, bigAdd(num(1), bigSqrt(bigAdd(num(1), bigMul(x, x)))))
	}
	x2 := bigMul(x, x)
	p := fresh().Set(x)
	sum := fresh().Set(x)
	for n := 1; n < 1000; n++ {
		p = fresh().Neg(bigMul(p, x2))
		t := bigQuo(p, num(float64(2*n+1)))
		if t.Sign() == 0 || t.MantExp(nil) < sum.MantExp(nil)-bits {
			break
		}
		sum.Add(sum, t)
	}
	return fresh().SetMantExp(sum, halvings)
}

func bigPi() *big.Float { return bigMul(num(4), bigAtan(num(1))) }

func bigAsin(x *big.Float) *big.Float {
	return bigAtan(bigQuo(x, bigSqrt(bigSub(num(1), bigMul(x, x)))))
}

// bigEval evaluates a tree; nil where it is undefined.
func bigEval(t *tree, x []*big.Float) *big.Float {
	switch t.kind {
	case kindNumber, kindConst:
		return num(t.value)
	case kindVar:
		return x[t.index]
	}
	args := make([]*big.Float, len(t.args))
	for i, a := range t.args {
		if args[i] = bigEval(a, x); args[i] == nil {
			return nil
		}
	}
	a := args[0]
	var b *big.Float
	if len(args) > 1 {
		b = args[1]
	}
	switch t.kind {
	case kindSign:
		return fresh().Neg(a)
	case kindBinary:
		switch t.op {
		case token.ADD:
			return bigAdd(a, b)
		case token.SUB:
			return bigSub(a, b)
		case token.MUL:
			return bigMul(a, b)
		}
		if b.Sign() == 0 {
			return nil
		}
		return bigQuo(a, b)
	}
	one := num(1)
	tooBig := a.MantExp(nil) > 8 // keep exponentials within reason
	switch t.fun.op {
	case opSqrt:
		if a.Sign() < 0 {
			return nil
		}
		return bigSqrt(a)
	case opPow:
		if a.Sign() <= 0 {
			return nil
		}
		return bigExp(bigMul(b, bigLog(a)))
	case opExp:
		if tooBig {
			return nil
		}
		return bigExp(a)
	case opLog:
		if a.Sign() <= 0 {
			return nil
		}
		return bigLog(a)
	case opSin, opCos, opTan:
		if tooBig {
			return nil
		}
		s, c := bigSinCos(a)
		switch t.fun.op {
		case opSin:
			return s
		case opCos:
			return c
		}
		return bigQuo(s, c)
	case opAsin, opAcos:
		if fresh().Abs(a).Cmp(one) >= 0 {
			return nil
		}
		if t.fun.op == opAsin {
			return bigAsin(a)
		}
		return bigSub(bigQuo(bigPi(), num(2)), bigAsin(a))
	case opAtan:
		return bigAtan(a)
	case opAtan2:
		if b.Sign() == 0 {
			return nil
		}
		v := bigAtan(bigQuo(a, b))
		if b.Sign() < 0 && a.Sign() >= 0 {
			v = bigAdd(v, bigPi())
		} else if b.Sign() < 0 {
			v = bigSub(v, bigPi())
		}
		return v
	case opSinh, opCosh, opTanh:
		if tooBig {
			return nil
		}
		e := bigExp(a)
		f := bigQuo(one, e)
		switch t.fun.op {
		case opSinh:
			return bigQuo(bigSub(e, f), num(2))
		case opCosh:
			return bigQuo(bigAdd(e, f), num(2))
		}
		return bigQuo(bigSub(e, f), bigAdd(e, f))
	case opAbs:
		return fresh().Abs(a)
	case opMin, opMax:
		v := a
		for _, b := range args[1:] {
			if c := b.Cmp(v); c < 0 && t.fun.op == opMin || c > 0 && t.fun.op == opMax {
				v = b
			}
		}
		return v
	}
	return nil
}
