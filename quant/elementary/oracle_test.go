package elementary

import (
	"math"
	"math/big"
)

// The oracle: plain series in math/big at 320 bits, written without any of the
// package's tables or reductions. Arguments are exact binary64 numbers.
const oracleBits = 320

func bigFloat(x float64) *big.Float { return new(big.Float).SetPrec(oracleBits).SetFloat64(x) }

func newBig() *big.Float { return new(big.Float).SetPrec(oracleBits) }

// negligible reports that term no longer matters to sum.
func negligible(term, sum *big.Float) bool {
	return term.Sign() == 0 || term.MantExp(nil) < sum.MantExp(nil)-oracleBits-8
}

// bigExp sums the exponential series of x/2^s and squares s times; 320 bits leave
// more than 250 after the squarings.
func bigExp(x *big.Float) *big.Float {
	s := max(x.MantExp(nil)+8, 0)
	y := newBig().SetMantExp(x, -s)
	sum, term := newBig().SetInt64(1), newBig().SetInt64(1)
	for k := int64(1); !negligible(term, sum); k++ {
		term.Mul(term, y)
		term.Quo(term, newBig().SetInt64(k))
		sum.Add(sum, term)
	}
	for range s {
		sum.Mul(sum, sum)
	}
	return sum
}

// bigAtanh sums y + y^3/3 + y^5/5 + ...
func bigAtanh(y *big.Float) *big.Float {
	square := newBig().Mul(y, y)
	sum, power := newBig().Set(y), newBig().Set(y)
	for k := int64(3); ; k += 2 {
		power.Mul(power, square)
		term := newBig().Quo(power, newBig().SetInt64(k))
		if negligible(term, sum) {
			return sum
		}
		sum.Add(sum, term)
	}
}

// bigLn2 is log 2 = 2 artanh(1/3).
var bigLn2 = func() *big.Float {
	third := newBig().Quo(newBig().SetInt64(1), newBig().SetInt64(3))
	return newBig().SetMantExp(bigAtanh(third), 1)
}()

// bigLog is m log 2 + 2 artanh((z-1)/(z+1)) with x = z 2^m, z in [3/4, 3/2).
func bigLog(x *big.Float) *big.Float {
	z := newBig()
	m := x.MantExp(z) // z in [1/2, 1)
	if z.Cmp(bigFloat(0.75)) < 0 {
		z.SetMantExp(z, 1)
		m--
	}
	one := newBig().SetInt64(1)
	y := newBig().Quo(newBig().Sub(z, one), newBig().Add(z, one))
	sum := newBig().Mul(bigLn2, newBig().SetInt64(int64(m)))
	if y.Sign() == 0 {
		return sum
	}
	return sum.Add(sum, newBig().SetMantExp(bigAtanh(y), 1))
}

// piDigits are the first digits of pi, from memory; a test holds them to Machin's
// formula as the package sums it.
const piDigits = "3.14159265358979323846264338327950288419716939937510582097494459230781640628620899862803482534211706798214808651"

// bigPi sums C. Stoermer's formula pi/4 = 44 arctan 1/57 + 7 arctan 1/239 -
// 12 arctan 1/682 + 24 arctan 1/12943, another than the package's, at 1600 bits.
var bigPi = func() *big.Float {
	const precision = 1600
	sum := new(big.Float).SetPrec(precision)
	for _, part := range [][2]int64{{44, 57}, {7, 239}, {-12, 682}, {24, 12943}} {
		n := new(big.Float).SetPrec(precision).SetInt64(part[1])
		power := new(big.Float).SetPrec(precision).Quo(new(big.Float).SetPrec(precision).SetInt64(4*part[0]), n)
		square := new(big.Float).SetPrec(precision).Mul(n, n)
		for k := int64(1); power.MantExp(nil) > -precision; k += 2 {
			term := new(big.Float).SetPrec(precision).SetInt64(k)
			term.Quo(power, term)
			if k&2 != 0 {
				term.Neg(term)
			}
			sum.Add(sum, term)
			power.Quo(power, square)
		}
	}
	return sum
}()

// bigSinCos reduces x by whole turns and sums both series.
func bigSinCos(x float64) (sin, cos *big.Float) {
	precision := uint(500)
	if math.Abs(x) > 0x1p60 {
		precision = 1600
	}
	wide := new(big.Float).SetPrec(precision).SetFloat64(x)
	if math.Abs(x) > 3 {
		turn := new(big.Float).SetPrec(precision).SetMantExp(bigPi, 1)
		n, _ := new(big.Float).SetPrec(precision).Quo(wide, turn).Int(nil)
		wide.Sub(wide, turn.Mul(turn, new(big.Float).SetPrec(precision).SetInt(n)))
	}
	const seriesBits = 400 // of which the sums cancel up to 10, and 62 beside a zero
	y := new(big.Float).SetPrec(seriesBits).Set(wide)
	one := new(big.Float).SetPrec(seriesBits).SetInt64(1)
	sin = new(big.Float).SetPrec(seriesBits)
	cos = new(big.Float).SetPrec(seriesBits)
	term := new(big.Float).Copy(one)
	for k := int64(0); k < 200; k++ {
		target := cos
		if k&1 == 1 {
			target = sin
		}
		if k&2 == 0 {
			target.Add(target, term)
		} else {
			target.Sub(target, term)
		}
		term.Mul(term, y)
		term.Quo(term, new(big.Float).SetPrec(seriesBits).SetInt64(k+1))
		if term.Sign() == 0 || term.MantExp(nil) < -seriesBits {
			break
		}
	}
	return sin, cos
}

// bigTanh is (E-1)/(E+1) at a precision that survives the cancellation for the
// arguments tested (|x| > 2^-60).
func bigTanh(x *big.Float) *big.Float {
	e := bigExp(newBig().SetMantExp(x, 1))
	one := newBig().SetInt64(1)
	return newBig().Quo(newBig().Sub(e, one), newBig().Add(e, one))
}

// bigErfSlope is 2/sqrt(pi) exp(-x^2).
func bigErfSlope(x *big.Float) *big.Float {
	root := new(big.Float).SetPrec(2 * oracleBits).Sqrt(new(big.Float).SetPrec(2 * oracleBits).Set(bigPi))
	square := newBig().Mul(x, x)
	two := newBig().Quo(newBig().SetInt64(2), root)
	return two.Mul(two, bigExp(square.Neg(square)))
}

// bigErf sums x + 2 x^3/3 + (2 x^2)^2 x/(3 5) + ..., all terms of one sign, times
// the slope.
func bigErf(x *big.Float) *big.Float {
	twice := newBig().SetMantExp(newBig().Mul(x, x), 1)
	sum, term := newBig().Set(x), newBig().Set(x)
	for k := int64(3); !negligible(term, sum); k += 2 {
		term.Mul(term, twice)
		term.Quo(term, newBig().SetInt64(k))
		sum.Add(sum, term)
	}
	return sum.Mul(sum, bigErfSlope(x))
}

// bigErfc is 1 - erf, which cancels up to 60 bits below 6 and all of them beyond
// 14: above 5 the continued fraction of A. M. Legendre, evaluated from far out, x +
// (1/2)/(x + 1/(x + (3/2)/(x + ...))), under exp(-x^2)/sqrt(pi).
func bigErfc(x *big.Float) *big.Float {
	if x.Cmp(bigFloat(5)) < 0 {
		return newBig().Sub(newBig().SetInt64(1), bigErf(x))
	}
	down := newBig().Set(x)
	for k := int64(250); k > 0; k-- {
		part := newBig().Quo(newBig().SetMantExp(newBig().SetInt64(k), -1), down)
		down.Add(x, part)
	}
	half := newBig().SetMantExp(bigErfSlope(x), -1)
	return half.Quo(half, down)
}

// bigSigmoid is 1/(1 + exp(-x)).
func bigSigmoid(x *big.Float) *big.Float {
	one := newBig().SetInt64(1)
	return newBig().Quo(one, newBig().Add(one, bigExp(newBig().Neg(x))))
}

// ulps returns |got - want| in units of the last place of want.
func ulps(got float64, want *big.Float) float64 {
	if math.IsNaN(got) || math.IsInf(got, 0) {
		return math.Inf(1)
	}
	exponent := max(want.MantExp(nil)-53, -1074)
	diff := newBig().Sub(bigFloat(got), want)
	diff.SetMantExp(diff, -exponent)
	f, _ := diff.Float64()
	return math.Abs(f)
}
