package main

import (
	"math"
	"slices"

	"ulpine/quant"
)

// sampler returns the source of sampled operands: corners first, at most half of
// the vectors, then draws of which a part is aimed at ties and cancellation.
func (v *vectorSet) sampler() func(i int, operands []uint64) {
	corners := v.corners()
	arity := len(v.op.operands)
	combos := 1
	for range arity {
		combos *= len(corners)
	}
	v.cornerCount = min(combos, (v.count+1)/2)
	s := sampled{v: v, draws: v.operandDraws(), mask: 1<<v.from.Limits().Bits - 1}
	if v.from.Limits().Bits == 64 {
		s.mask = math.MaxUint64
	}
	return func(i int, operands []uint64) {
		if i >= v.cornerCount {
			s.draw(uint64(i), operands)
			return
		}
		// Where not all combinations fit, a prime stride picks them from all over.
		n := i
		if v.cornerCount < combos {
			n = int(int64(i) * 1000003 % int64(combos))
		}
		for k := arity - 1; k >= 0; k-- {
			operands[k] = corners[n%len(corners)]
			n /= len(corners)
		}
	}
}

// corners are the codes of the operands' format at which hardware goes wrong.
func (v *vectorSet) corners() []uint64 {
	var codes []uint64
	add := func(x float64) {
		if code, ok := v.codes.Encode(x); ok && !slices.Contains(codes, code) {
			codes = append(codes, code)
		}
	}
	for _, f := range []quant.Format{v.from, v.point.Format} { // the result's ends matter to round
		l := f.Limits()
		for _, x := range []float64{
			0, l.MinSubnormal, 2 * l.MinSubnormal, l.MinNormal - l.MinSubnormal, l.MinNormal, l.MinNormal + l.MinSubnormal,
			1, 2, 1.5, l.Max, l.Max / 2, l.MinSubnormal / 2,
		} {
			for _, y := range v.around(x) {
				add(y)
				add(-y)
			}
		}
		add(l.Lowest)
	}
	add(math.Inf(1))
	add(math.Inf(-1))
	add(math.NaN())
	return codes
}

// around is the value of the operands' format nearest to x and its neighbours.
func (v *vectorSet) around(x float64) []float64 {
	p := quant.Point{Format: v.from, Overflow: quant.Saturate}
	y, _ := p.Round(quant.Exactly(x), 0)
	if y != y {
		return nil
	}
	all := []float64{y}
	for _, mode := range []quant.Mode{quant.Down, quant.Up} {
		p.Rounding.Mode = mode
		if b := v.from.Bracket(quant.Exactly(y)); b.Away > b.Toward && !math.IsInf(b.Away, 0) {
			step := (b.Away - b.Toward) / 4
			if mode == quant.Down {
				step = -step
			}
			z, _ := p.Round(quant.Exactly(y).Add(quant.Exactly(step)), 0)
			all = append(all, z)
		}
	}
	return all
}

// sampled draws operands.
type sampled struct {
	v     *vectorSet
	draws quant.Draws
	mask  uint64
}

// draw yields the operands of vector i from words 8i to 8i+7 of the stream.
func (s *sampled) draw(i uint64, operands []uint64) {
	four, more := s.draws.Words(2*i), s.draws.Words(2*i+1)
	for k := range operands {
		operands[k] = (uint64(four[k])<<32 | uint64(more[k])) & s.mask
	}
	aim := more[3]
	switch s.v.op.name {
	case "round":
		if aim%4 != 0 {
			s.aimAtGap(operands, uint64(four[3])<<32|uint64(more[0]), more[1])
		}
	case "add":
		if aim%2 != 0 { // like exponents: the codes lie near each other
			s.aimNear(operands, 1, operands[0], four[3])
		}
	case "fma":
		p := quant.Point{Format: s.v.from, Overflow: quant.Saturate}
		x, _ := p.Round(quant.ExactProduct(s.v.codes.Decode(operands[0]), s.v.codes.Decode(operands[1])), 0)
		if code, ok := s.v.codes.Encode(-x); ok && aim%2 != 0 {
			s.aimNear(operands, 2, code, four[3])
		}
	}
}

// aimNear replaces operand k by a code a few steps, or a few binades, from one.
func (s *sampled) aimNear(operands []uint64, k int, code uint64, word uint32) {
	step := uint64(int64(int32(word)) >> 28) // -8 to 7
	if word&1 != 0 {
		step <<= max(s.v.from.Limits().Fraction-2, 0)
	}
	sign := uint64(word>>1&1) << (s.v.from.Limits().Bits - 1)
	operands[k] = (code + step) ^ sign
	operands[k] &= s.mask
}

// aimAtGap replaces the operand by a value of the result's format, a midpoint of two
// of them, or the operand's next value to either side of those.
func (s *sampled) aimAtGap(operands []uint64, code uint64, word uint32) {
	to := s.v.point.Format
	x := to.(coder).Decode(code & (1<<to.Limits().Bits - 1))
	if to.Limits().Bits == 64 {
		x = to.(coder).Decode(code)
	}
	if x != x || math.IsInf(x, 0) {
		return
	}
	b := to.Bracket(quant.Exactly(x))
	if word&1 != 0 && b.Away > b.Toward && !math.IsInf(b.Away, 0) {
		x = math.Copysign(b.Toward+(b.Away-b.Toward)/2, x)
	}
	around := s.v.around(x)
	if len(around) == 0 {
		return
	}
	if c, ok := s.v.codes.Encode(around[int(word>>1)%len(around)]); ok {
		operands[0] = c
	}
}
