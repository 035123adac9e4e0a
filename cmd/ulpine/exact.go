package main

import (
	"errors"
	"fmt"
	"math"
	"math/big"
	"strconv"
	"strings"

	"ulpine/quant"
)

// exactNumber is a number as a user wrote it: the exact rational, or a special.
type exactNumber struct {
	text     string
	kind     quant.Kind
	negative bool     // its sign, zero included
	value    *big.Rat // nil unless finite
}

// maxExponent bounds the powers of ten and of two that a number may be written
// with: far beyond every format, and cheap to hold exactly.
const maxExponent = 20000

// parseNumber reads a decimal (0.1, -2.5e-3), a hexadecimal float (0x1.8p-3), a
// fraction (1/3), inf or nan, exactly.
func parseNumber(text string) (exactNumber, error) {
	n := exactNumber{text: strings.TrimSpace(text)}
	word := strings.ToLower(n.text)
	unsigned := strings.TrimLeft(word, "+-")
	if len(word)-len(unsigned) > 1 {
		return n, fmt.Errorf("%q is not a number", text)
	}
	n.negative = strings.HasPrefix(word, "-")
	switch unsigned {
	case "inf", "infinity":
		n.kind = quant.Infinite
		return n, nil
	case "nan":
		n.kind, n.negative = quant.NotANumber, false
		return n, nil
	}
	if err := checkSpelling(text, unsigned); err != nil {
		return n, err
	}
	if n.value = rational(unsigned); n.value == nil {
		return n, fmt.Errorf("%q is not a number: write a decimal (0.1, -2.5e-3), a hexadecimal float (0x1.8p-3), a fraction (1/3), inf or nan", text)
	}
	if n.negative {
		n.value.Neg(n.value)
	}
	return n, nil
}

// rational reads a plain number without a sign, nil where it is none. A fraction's
// parts are decimal: big.Rat would take a leading zero for octal there.
func rational(text string) *big.Rat {
	if top, bottom, ok := strings.Cut(text, "/"); ok {
		num, okNum := new(big.Int).SetString(top, 10)
		den, okDen := new(big.Int).SetString(bottom, 10)
		if !okNum || !okDen || den.Sign() <= 0 || num.Sign() < 0 {
			return nil
		}
		return new(big.Rat).SetFrac(num, den)
	}
	x, ok := new(big.Rat).SetString(text)
	if !ok || x.Sign() < 0 {
		return nil
	}
	return x
}

// checkSpelling refuses exponents that would not fit memory, and what big.Rat
// reads beyond plain numbers (underscores, other bases).
func checkSpelling(text, unsigned string) error {
	marks := "ep"
	if strings.HasPrefix(unsigned, "0x") {
		marks = "p"
	}
	if strings.ContainsAny(unsigned, "_") || strings.HasPrefix(unsigned, "0b") || strings.HasPrefix(unsigned, "0o") {
		return fmt.Errorf("%q is not a decimal or hexadecimal number", text)
	}
	if len(unsigned) > 3*maxExponent {
		return fmt.Errorf("a number of %d characters is too long", len(unsigned))
	}
	i := strings.IndexAny(unsigned, marks)
	if i < 0 {
		return nil
	}
	e, err := strconv.Atoi(unsigned[i+1:])
	if errors.Is(err, strconv.ErrRange) || err == nil && (e > maxExponent || e < -maxExponent) {
		return fmt.Errorf("%q: the exponent must lie between -%d and %d", text, maxExponent, maxExponent)
	}
	return nil
}

// real returns the number to 128 bits and a sticky rest: no format here has so
// many that a second rounding could show.
func (n exactNumber) real() quant.Real {
	if n.kind != quant.Finite {
		return quant.Real{Kind: n.kind, Neg: n.negative}
	}
	r := realOf(n.value)
	r.Neg = n.negative
	return r
}

// realOf returns an exact rational to 128 bits and a sticky rest.
func realOf(x *big.Rat) quant.Real {
	if x.Sign() == 0 {
		return quant.Real{}
	}
	num, den := new(big.Int).Abs(x.Num()), new(big.Int).Set(x.Denom())
	// |x| 2^shift lies in (2^127, 2^129).
	shift := 128 - num.BitLen() + den.BitLen()
	if shift > 0 {
		num.Lsh(num, uint(shift))
	} else {
		den.Lsh(den, uint(-shift))
	}
	q, rest := num.QuoRem(num, den, new(big.Int))
	r := quant.Real{Neg: x.Sign() < 0, Sticky: rest.Sign() != 0, Exp: -shift}
	if over := q.BitLen() - 128; over > 0 {
		r.Sticky = r.Sticky || q.TrailingZeroBits() < uint(over)
		r.Exp += over
		q.Rsh(q, uint(over))
	}
	r.Lo = new(big.Int).And(q, new(big.Int).SetUint64(math.MaxUint64)).Uint64()
	r.Hi = new(big.Int).Rsh(q, 64).Uint64()
	return r
}

// ratOf returns a finite binary64 number as a rational.
func ratOf(x float64) *big.Rat { return new(big.Rat).SetFloat64(x) }

// word64 prints a number in the fewest decimal digits that give it back, and
// specials as inf, -inf, nan.
func word64(x float64) string {
	switch {
	case x != x:
		return "nan"
	case math.IsInf(x, 1):
		return "inf"
	case math.IsInf(x, -1):
		return "-inf"
	}
	return strconv.FormatFloat(x, 'g', -1, 64)
}

// jsonNumber is a finite number as such and a special as a string: JSON has no
// number for it.
func jsonNumber(x float64) any {
	if x != x || math.IsInf(x, 0) {
		return word64(x)
	}
	return x
}

// decimal prints a rational exactly where that takes at most digits places, else
// rounded to as many significant ones.
func decimal(x *big.Rat, digits int) string {
	if n, exact := x.FloatPrec(); exact && n <= digits {
		return x.FloatString(n)
	}
	return new(big.Float).SetPrec(256).SetRat(x).Text('g', digits)
}

// hexExact prints an exact rational with a power of two as denominator as a
// hexadecimal float.
func hexExact(x *big.Rat) string {
	prec := uint(max(x.Num().BitLen(), 1))
	return new(big.Float).SetPrec(prec).SetMode(big.ToZero).SetRat(x).Text('x', -1)
}
