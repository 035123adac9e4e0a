package oracle

import (
	"fmt"
	"math/big"
)

// NewInteger returns the format of integers of a width times 2^place: two's
// complement, or unsigned. It saturates, or follows the policy named.
func NewInteger(width, place int, unsigned bool, overflow string) (*Format, error) {
	if width < 1 || width > 53 {
		return nil, fmt.Errorf("oracle: integers of %d bits: 1 to 53", width)
	}
	g := steps{place: place, width: width}
	if !unsigned {
		g.lowest = -1 << (width - 1)
	}
	f := &Format{
		OneZero: true, Overflow: overflow, gaps: g, width: width,
		lowest: g.value(g.lowest), most: g.value(g.lowest + 1<<width - 1), emptyNaN: 0,
	}
	f.wrap = func(v *big.Rat) *big.Rat {
		n := times2(new(big.Rat).Set(v), -place).Num()
		n = new(big.Int).Sub(n, big.NewInt(g.lowest))
		n.Mod(n, new(big.Int).Lsh(big.NewInt(1), uint(width)))
		return g.value(n.Int64() + g.lowest)
	}
	f.decode = func(code uint64) float64 {
		n := int64(code & (1<<width - 1))
		if n > g.lowest+1<<width-1 {
			n -= 1 << width
		}
		v, _ := g.value(n).Float64()
		return v
	}
	return f, nil
}

// steps are the multiples of 2^place.
type steps struct {
	place, width int
	lowest       int64
}

func (s steps) value(n int64) *big.Rat { return times2(new(big.Rat).SetInt64(n), s.place) }

// gap implements gapper.
func (s steps) gap(x *big.Rat, _ bool) gap {
	m := times2(new(big.Rat).Abs(x), -s.place)
	n, over := new(big.Int).QuoRem(m.Num(), m.Denom(), new(big.Int))
	return gap{
		toward: times2(new(big.Rat).SetInt(n), s.place),
		away:   times2(new(big.Rat).SetInt(new(big.Int).Add(n, big.NewInt(1))), s.place),
		over:   over, width: m.Denom(), odd: n.Bit(0) == 1,
	}
}
