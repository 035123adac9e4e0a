package quant

import (
	"fmt"
	"math"
)

// ScaleRule says how the scale of a block follows from its largest finite magnitude
// m, the element type reaching up to E, of which 2^e is the largest power of two.
type ScaleRule uint8

// The rules. A block without a nonzero finite magnitude has the scale 1 or, where the
// format lacks it, the nearest to it.
const (
	// ScaleFloor is that of OCP MX 1.0, section 6.3: the largest power of two at most
	// m, over 2^e. The block's largest magnitudes may be beyond E then.
	ScaleFloor ScaleRule = iota
	// ScaleUp is the least scale at least m/E: nothing is beyond E.
	ScaleUp
	// ScaleNearest is the scale nearest to m/E, ties to even.
	ScaleNearest
	// ScaleLeastError takes, of the scales from ScaleFloor's to ScaleUp's, that with
	// the least sum of squared errors of the block's finite values rounded to
	// nearest-even, the smaller one of equals. Errors, squares and their sum, in
	// order, are those of binary64.
	ScaleLeastError
)

var ruleWords = []string{"floor", "up", "nearest", "least-error"}

// String returns the rule's word: "floor", "up", "nearest", "least-error".
func (r ScaleRule) String() string { return word(ruleWords, uint8(r), "rule") }

// BlockSpec writes a block format out. Zero values of all but Element give an MX
// format: blocks of 32, scales in E8M0 by the floor rule, no scale of the tensor.
type BlockSpec struct {
	Element Format // scalar, its values binary32 numbers
	Size    int    // elements of a block, 0: 32; the last one of a line may be short
	Scale   Format // nil: E8M0
	Rule    ScaleRule
	// Tensor: a second scale above those of the blocks, one a tensor, in binary32: the
	// tensor's largest finite magnitude over E times the largest block scale, to
	// nearest-even. It multiplies the finished sums of a product.
	Tensor bool
}

// Block is a format whose elements share the scale of their block: v becomes
// R[element](v/X) X, with the scale X from the rule. A value type, comparable
// with ==.
//
// Scales are kept so small that no term is beyond binary32. Under the floor rule that
// matters to no binary32 tensor, but to MXINT8, which reaches down to -2 X, in the
// last binade. Infinities and NaN do not enter the scale; they are rounded as elements.
type Block struct {
	spec     BlockSpec
	largest  float64 // largest scale in use
	least    float64 // least positive scale
	binary32 bool    // all terms are binary32 numbers
}

const standardBlock = 32

// NewBlock checks a block format.
func NewBlock(s BlockSpec) (Block, error) {
	if s.Size == 0 {
		s.Size = standardBlock
	}
	if s.Scale == nil {
		s.Scale = PowerScale{}
	}
	if s.Element == nil {
		return Block{}, fmt.Errorf("quant: blocks without an element format")
	}
	if _, shared := s.Element.(Blocked); shared {
		return Block{}, fmt.Errorf("quant: blocks of %s: elements have a scalar format", s.Element)
	}
	e := s.Element.Limits()
	switch {
	case !e.Binary32 || e.NoZero || !(e.Max > 0):
		return Block{}, fmt.Errorf("quant: blocks of %s: elements are binary32 numbers, zero and positive ones among them", s.Element)
	case s.Size < 1:
		return Block{}, fmt.Errorf("quant: blocks of %d elements: at least 1", s.Size)
	case s.Rule > ScaleLeastError:
		return Block{}, fmt.Errorf("quant: unknown %s of block scales", s.Rule)
	}
	if err := positiveScale(s.Scale); err != nil {
		return Block{}, fmt.Errorf("quant: blocks of %s: %w", s.Element, err)
	}
	l := s.Scale.Limits()
	if s.Rule == ScaleLeastError && l.Bits > 8 {
		return Block{}, fmt.Errorf("quant: blocks of %s: rule least-error tries the scales one by one: it needs a scale format of at most 8 bits, %s has %d", s.Element, s.Scale, l.Bits)
	}
	b := Block{spec: s, least: leastPositive(s.Scale), binary32: termsFit(s.Element, s.Scale)}
	b.largest = b.scaleOf(TowardZero, ExactQuotient(math.MaxFloat32, max(e.Max, -e.Lowest)))
	return b, nil
}

// leastPositive is the least positive value of a scalar format.
func leastPositive(f Format) float64 {
	l := f.Limits()
	if l.Flush || l.MinSubnormal == 0 {
		return l.MinNormal
	}
	return l.MinSubnormal
}

// scaleOf rounds a positive real to a scale in use.
func (b Block) scaleOf(m Mode, x Real) float64 {
	p := Point{Format: b.spec.Scale, Rounding: Rounding{Mode: m}, Overflow: Saturate}
	v, _ := p.Round(x, 0)
	if b.largest > 0 {
		v = min(v, b.largest)
	}
	return max(v, b.least)
}

// Spec is what the format was made of, defaults filled in.
func (b Block) Spec() BlockSpec { return b.spec }

// BitsPerValue counts an element with its part of a full block's scale.
func (b Block) BitsPerValue() float64 {
	return float64(b.spec.Element.Limits().Bits) + float64(b.spec.Scale.Limits().Bits)/float64(b.spec.Size)
}

// Limits are those of an element, except that Binary32 speaks of the terms.
func (b Block) Limits() Limits {
	l := b.spec.Element.Limits()
	l.Binary32 = b.binary32
	return l
}

// termsFit reports whether every element times every scale, not beyond the largest
// one, is a binary32 number.
func termsFit(element, scale Format) bool {
	p, q := significandBits(element), significandBits(scale)
	if q > 1 {
		p += q
	}
	return p <= 24 && float64(unitOf(element)*unitOf(scale)) >= math.SmallestNonzeroFloat32
}

// significandBits bounds the significant bits of the values of a scalar format whose
// values are binary32 numbers.
func significandBits(f Format) int {
	switch f := f.(type) {
	case PowerScale:
		return 1
	case Fixed:
		return f.width
	case Table:
		return 24
	}
	return f.Limits().Fraction + 1
}

// unitOf is a power of two, or a value, of which all values are multiples, or a
// lower bound of it.
func unitOf(f Format) float64 {
	l := f.Limits()
	switch {
	case l.Flush || l.MinSubnormal == 0:
		return math.Ldexp(l.MinNormal, -l.Fraction)
	case significandBits(f) == 24:
		return math.Ldexp(min(l.MinSubnormal, leastMagnitude(f)), -23)
	}
	return l.MinSubnormal
}

// leastMagnitude is the least magnitude of the values that are not zero.
func leastMagnitude(f Format) float64 {
	t, ok := f.(Table)
	least := f.Limits().MinSubnormal
	for i := range t.Len() {
		if v := math.Abs(t.at(i)); ok && v > 0 && v < least {
			least = v
		}
	}
	return least
}

// Bracket implements Format for an element.
func (b Block) Bracket(x Real) Bracket { return b.spec.Element.Bracket(x) }

// Scaling implements Blocked.
func (b Block) Scaling(x []float64) Scaling {
	if !b.spec.Tensor {
		return Scaling{Factor: 1}
	}
	largest := largestFinite(x)
	if largest == 0 {
		return Scaling{Factor: 1}
	}
	most := float64(b.spec.Element.Limits().Max * b.largest)
	return Scaling{Factor: scaleFactor(ExactQuotient(largest, most))}
}

// factorPoint is made once: a scale a tensor should not allocate.
var factorPoint = Point{Format: Binary32, Overflow: Saturate}

// scaleFactor rounds a positive real to the positive finite binary32 numbers.
func scaleFactor(x Real) float64 {
	v, _ := factorPoint.Round(x, 0)
	return max(v, math.SmallestNonzeroFloat32)
}

// RoundLine implements Blocked.
func (b Block) RoundLine(line []float64, s Scaling, p *Point, word []uint32, n *Counts) {
	element := Point{Format: b.spec.Element, Rounding: p.Rounding, Overflow: p.Overflow}
	for at := 0; at < len(line); at += b.spec.Size {
		block := line[at:min(at+b.spec.Size, len(line))]
		x := b.scale(block, s.Factor)
		for i, v := range block {
			var w uint32
			if word != nil {
				w = word[at+i]
			}
			r, e := element.Round(ExactQuotient(v, float64(x*s.Factor)), w)
			n.Count(e)
			block[i] = float64(r * x)
		}
	}
}

// scale is the scale X of a block under the scale of its tensor.
func (b Block) scale(block []float64, tensor float64) float64 {
	m := largestFinite(block)
	if m == 0 {
		return b.scaleOf(NearestEven, Exactly(1))
	}
	floor := func() float64 {
		e := ExactQuotient(m, tensor).Exp + 127 - exponentOf(b.spec.Element.Limits().Max)
		return b.scaleOf(TowardZero, Real{Hi: 1 << 63, Exp: e - 127})
	}
	full := ExactQuotient(m, float64(b.spec.Element.Limits().Max*tensor))
	switch b.spec.Rule {
	case ScaleFloor:
		return floor()
	case ScaleUp:
		return b.scaleOf(Up, full)
	case ScaleNearest:
		return b.scaleOf(NearestEven, full)
	}
	return b.leastError(block, tensor, floor(), b.scaleOf(Up, full))
}

// leastError tries the scales from lo to hi.
func (b Block) leastError(block []float64, tensor, lo, hi float64) float64 {
	best, least := lo, math.Inf(1)
	p := Point{Format: b.spec.Element, Overflow: Saturate}
	for x := lo; x <= hi; x = b.spec.Scale.Bracket(Exactly(x)).Away {
		sum, unit := 0.0, float64(x*tensor)
		for _, v := range block {
			if v-v != 0 {
				continue
			}
			r, _ := p.Round(ExactQuotient(v, unit), 0)
			d := v - float64(r*unit)
			sum += float64(d * d)
		}
		if sum < least {
			best, least = x, sum
		}
	}
	return best
}

// EncodeBlock rounds the values of one block, at most Size of them, and returns the
// codes of its scale and of its elements; false where one has no code. word is as in
// RoundLine.
func (b Block) EncodeBlock(block []float64, s Scaling, p *Point, word []uint32) (scale uint64, codes []uint64, ok bool) {
	x := b.scale(block, s.Factor)
	terms := append([]float64(nil), block...)
	b.RoundLine(terms, s, p, word, nil)
	scale, ok = b.spec.Scale.(Coded).Encode(x)
	for _, v := range terms {
		code, known := b.spec.Element.(Coded).Encode(v / x) // exact: the element
		codes, ok = append(codes, code), ok && known
	}
	return scale, codes, ok
}
