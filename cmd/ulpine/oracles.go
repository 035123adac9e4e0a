package main

import (
	"fmt"
	"math"

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
	switch f := f.(type) {
	case quant.Float:
		return oracleOfFloat(f)
	case quant.Draft:
		l := f.Limits()
		return oracle.NewSplit(oracle.Split{
			Exponent: l.Exponent, Fraction: l.Fraction, Bias: 1 << (l.Exponent - 1), Top: "infinity", Overflow: l.DefaultOverflow.String(),
		})
	case quant.Posit:
		return oracle.NewPosit(f.Limits().Bits)
	case quant.Table:
		return oracleOfTable(f)
	case quant.ADC:
		return oracleOfTable(f.Table)
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

// oracleOfIntegers describes fixed point, two's complement where there are negative
// values.
func oracleOfIntegers(f quant.Format) (*oracle.Format, error) {
	l := f.Limits()
	finest, _, ok := places(f)
	if !ok {
		return nil, fmt.Errorf("%s: its values are not the multiples of a power of two", f)
	}
	o, err := oracle.NewInteger(l.Bits, finest, l.Lowest >= 0, l.DefaultOverflow.String())
	if err != nil {
		return nil, err
	}
	if o.Max().Cmp(ratOf(l.Max)) != 0 || o.Lowest().Cmp(ratOf(l.Lowest)) != 0 {
		return nil, fmt.Errorf("%s: its range is not that of %d bits", f, l.Bits)
	}
	return o, nil
}

// oracleOfTable lists the values of a code book, which has to have a zero.
func oracleOfTable(f quant.Table) (*oracle.Format, error) {
	l := f.Limits()
	list := oracle.List{Width: l.Bits, Overflow: l.DefaultOverflow.String()}
	for code := range uint64(f.Len()) {
		list.Values = append(list.Values, oracle.Value{X: ratOf(f.Decode(code)), Code: code})
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
