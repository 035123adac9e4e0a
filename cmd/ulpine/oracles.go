package main

import (
	"fmt"
	"math"
	"math/big"

	"ulpine/quant"
	"ulpine/quant/oracle"
)

// oracleOf describes a format to the oracle: a floating-point format by its widths
// and least value, integers and other narrow families by the list of their values.
// An error says that the oracle has no definition of the format.
func oracleOf(f quant.Format) (*oracle.Format, error) {
	if _, blocked := f.(quant.Blocked); blocked {
		return nil, fmt.Errorf("%s: its values share scales: the oracle rounds numbers one by one", f)
	}
	if float, ok := f.(quant.Float); ok {
		return oracleOfFloat(float)
	}
	if _, integer := f.(quant.Wrapper); integer {
		return oracleOfIntegers(f)
	}
	return nil, fmt.Errorf("%s: the oracle has no definition of this family", f)
}

// oracleOfFloat reads the layout off the format's figures, which tests hold to
// published ones.
func oracleOfFloat(f quant.Float) (*oracle.Format, error) {
	l := f.Limits()
	s := oracle.Split{
		Exponent: l.Exponent, Fraction: l.Fraction, Flush: l.Flush, Top: "finite",
		Overflow: l.DefaultOverflow.String(),
	}
	switch {
	case l.HasInfinity:
		s.Top = "ieee"
	case l.HasNaN:
		s.Top = "nan"
	}
	finest, _, ok := places(f)
	if !ok {
		return nil, fmt.Errorf("%s: no least value", f)
	}
	s.Bias = 1 - l.Fraction - finest
	return oracle.NewSplit(s)
}

// maxListed is the width up to which integers are listed.
const maxListed = 16

// oracleOfIntegers lists the codes of integers and fixed point, two's complement
// where there are negative values.
func oracleOfIntegers(f quant.Format) (*oracle.Format, error) {
	l := f.Limits()
	finest, _, ok := places(f)
	if !ok || l.Bits > maxListed {
		return nil, fmt.Errorf("%s: the oracle lists integers of at most %d bits", f, maxListed)
	}
	step := ratOf(math.Ldexp(1, finest))
	list := oracle.List{Width: l.Bits, Overflow: l.DefaultOverflow.String()}
	first, count := int64(0), int64(1)<<l.Bits
	if l.Lowest < 0 {
		first = -count / 2
	}
	at := func(n int64) *big.Rat { return new(big.Rat).Mul(step, new(big.Rat).SetInt64(n)) }
	for n := first; n < first+count; n++ {
		list.Values = append(list.Values, oracle.Value{X: at(n), Code: uint64(n) & uint64(count-1)})
	}
	list.Above, list.Below = at(first+count), at(first-1)
	if got, _ := at(first + count - 1).Float64(); got != l.Max {
		return nil, fmt.Errorf("%s: its largest value %v is not that of %d bits", f, l.Max, l.Bits)
	}
	return oracle.NewList(list)
}

// oracleRounding puts a rounding into the oracle's words.
func oracleRounding(r quant.Rounding) oracle.Rounding {
	o := oracle.Rounding{Mode: r.Mode.String()}
	if r.Mode == quant.Stochastic {
		o.Bits, o.Variant = uint(r.Bits), r.Variant.String()
	}
	return o
}

// sameBits reports equal bits, any NaN being like any other.
func sameBits(a, b float64) bool {
	return math.Float64bits(a) == math.Float64bits(b) || a != a && b != b
}
