package oracle

import (
	"fmt"
	"math/big"
	"sort"
)

// NewPosit returns the posit format of a width of 3 to 16 bits, two exponent bits
// (Standard for Posit Arithmetic (2022), from memory). Rounding never gives zero or
// NaR; the tie between two neighbours is the posit of one more bit between them.
func NewPosit(width int) (*Format, error) {
	if width < 3 || width > 16 {
		return nil, fmt.Errorf("oracle: posits of %d bits are not listed", width)
	}
	p := posits{}
	for pattern := uint64(0); pattern < 1<<(width-1); pattern++ {
		p.at = append(p.at, positValue(pattern, width))
		p.tie = append(p.tie, positValue(2*pattern+1, width+1))
	}
	most := p.at[len(p.at)-1]
	f := &Format{
		NaN: true, OneZero: true, Overflow: "saturate", gaps: p, most: most, lowest: negated(most),
		width: width, emptyNaN: 1 << (width - 1),
	}
	f.decode = func(code uint64) float64 {
		sign := int64(1)
		if code>>(width-1)&1 == 1 {
			sign, code = -1, -code&(1<<width-1)
		}
		if code>>(width-1)&1 == 1 {
			return nan
		}
		x := new(big.Rat).Mul(p.at[code], big.NewRat(sign, 1))
		v, _ := x.Float64()
		return v
	}
	return f, nil
}

// positValue is the value of a pattern without its sign, by the definition: after
// the sign a run of equal bits and the bit that ends it, two exponent bits, the
// fraction; bits that are cut off are zeros.
func positValue(pattern uint64, width int) *big.Rat {
	if pattern == 0 {
		return new(big.Rat)
	}
	text := fmt.Sprintf("%0*b", width-1, pattern)
	run := 1
	for run < len(text) && text[run] == text[0] {
		run++
	}
	k := run - 1
	if text[0] == '0' {
		k = -run
	}
	rest := text[min(run+1, len(text)):] + "00"
	e := 2*int(rest[0]-'0') + int(rest[1]-'0')
	x := big.NewRat(1, 1)
	for i, bit := range rest[2:] {
		if bit == '1' {
			x.Add(x, times2(big.NewRat(1, 1), -i-1))
		}
	}
	return times2(x, 4*k+e)
}

// posits are the magnitudes of a posit format and the ties above them.
type posits struct{ at, tie []*big.Rat }

// gap implements gapper. What lies below the least value is that value.
func (p posits) gap(x *big.Rat, _ bool) gap {
	m := new(big.Rat).Abs(x)
	n := sort.Search(len(p.at), func(i int) bool { return p.at[i].Cmp(m) > 0 }) - 1
	if n == 0 || n == len(p.at)-1 {
		v := m // beyond: the policy decides
		if n == 0 {
			v = p.at[1]
		}
		return gap{toward: v, away: v, over: new(big.Int), width: big.NewInt(1)}
	}
	f := new(big.Rat).Quo(new(big.Rat).Sub(m, p.at[n]), new(big.Rat).Sub(p.at[n+1], p.at[n]))
	return gap{
		toward: p.at[n], away: p.at[n+1], over: f.Num(), width: f.Denom(), odd: n%2 == 1,
		ownTie: true, side: m.Cmp(p.tie[n]),
	}
}
