package kernel

import (
	"math"

	"ulpine/quant/random"
)

// The loops of elementwise rounding: a set's assembly for whole registers, the
// portable loop for the rest, and for all of it where there is no assembly.
//
// Each writes R(src[i]) with the sign of src[i], adds to t[0] how many numbers became
// zero that were not, and makes t[1] other than zero where an element is beyond Limit
// or not a number, whose result has no meaning then.

func (l *loops) nearest32(dst, src []float32, c *Constants, t *[2]uint64) {
	whole := 0
	if l.roundNearest32 != nil {
		if whole = len(src) &^ (wholeLanes - 1); whole > 0 {
			l.roundNearest32(dst[:whole], src[:whole], c, t)
		}
	}
	least, grow, limit := c.SumLeast.single(), c.SumGrow.single(), c.Limit.single()
	dst = dst[whole:len(src)]
	for i, v := range src[whole:] {
		n := math.Float32bits(v)
		if size := math.Float32frombits(n &^ signBit32); !(size <= limit) {
			t[1] = 1
		}
		r := math.Float32bits(near32(v, least, grow)) &^ signBit32
		if r == 0 && v != 0 {
			t[0]++
		}
		dst[i] = math.Float32frombits(r | n&signBit32)
	}
}

func (l *loops) nearest64(dst []float32, src []float64, c *Constants, t *[2]uint64) {
	whole := 0
	if l.roundNearest64 != nil {
		if whole = len(src) &^ (wholeLanes - 1); whole > 0 {
			l.roundNearest64(dst[:whole], src[:whole], c, t)
		}
	}
	least, grow, limit := c.SumLeast.double(), c.SumGrow.double(), c.Limit.double()
	dst = dst[whole:len(src)]
	for i, v := range src[whole:] {
		if !(math.Abs(v) <= limit) {
			t[1] = 1
		}
		r := near64(v, least, grow)
		if r == 0 && v != 0 {
			t[0]++
		}
		dst[i] = float32(math.Copysign(r, v))
	}
}

func (l *loops) stochastic32(dst, src []float32, words []uint32, c *Constants, t *[2]uint64) {
	whole := 0
	if l.roundStochastic32 != nil {
		if whole = len(src) &^ (wholeLanes - 1); whole > 0 {
			l.roundStochastic32(dst[:whole], src[:whole], words[:whole], c, t)
		}
	}
	dst, words = dst[whole:len(src)], words[whole:len(src)]
	limit, least, quantum := c.Limit.single(), c.SumLeast[0], c.Quantum.single()
	mask, half, base := c.RandomMask[0], c.RandomHalf[0], c.BaseShift[0]
	for i, v := range src[whole:] {
		n := math.Float32bits(v)
		size, e := n&^signBit32, n&exponentMask32
		if !(math.Float32frombits(size) <= limit) || size-1 < 1<<23-1 {
			t[1] = 1
		}
		sig := n&fractionMask32 | min(e, 1<<23)
		scale := max(e, least)
		places := (scale-e)>>23 + base // bits of sig below the quantum
		fraction := sig << (32 - places)
		if places > 32 {
			fraction = sig >> (places - 32)
		}
		u := words[i]&mask | half
		whole := sig >> places
		if fraction+u < u {
			whole++
		}
		if whole == 0 && v != 0 {
			t[0]++
		}
		r := float32(float32(whole)*quantum) * math.Float32frombits(scale)
		dst[i] = math.Float32frombits(math.Float32bits(r) | n&signBit32)
	}
}

func (l *loops) stochastic64(dst []float32, src []float64, words []uint32, c *Constants, t *[2]uint64) {
	whole := 0
	if l.roundStochastic64 != nil {
		if whole = len(src) &^ (wholeLanes - 1); whole > 0 {
			l.roundStochastic64(dst[:whole], src[:whole], words[:whole], c, t)
		}
	}
	dst, words = dst[whole:len(src)], words[whole:len(src)]
	limit, least := c.Limit.double(), c.SumLeast.double()
	mask, half, keep := c.RandomMask.bits64(), c.RandomHalf.bits64(), c.Keep.bits64()
	up, down := c.PreShift.bits64(), c.RandomShift.bits64()
	for i, v := range src[whole:] {
		size := math.Abs(v)
		if !(size <= limit) {
			t[1] = 1
		}
		lift := 0.0
		if size < least {
			lift = math.Copysign(least, v)
		}
		u := uint64(words[i])&mask<<up>>down | half
		x := math.Float64frombits((math.Float64bits(truncatedSum(v, lift))+u)&keep) - lift
		if x == 0 && v != 0 {
			t[0]++
		}
		dst[i] = float32(math.Copysign(x, v))
	}
}

// scaled64 is y = alpha y rounded to odd; t[1] marks products beyond Limit, not
// finite, or below SumLeast with y not zero.
func (l *loops) scaled64(y []float64, alpha float64, c *Constants, t *[2]uint64) {
	whole := 0
	if l.scale64 != nil {
		if whole = len(y) &^ (wholeLanes - 1); whole > 0 {
			l.scale64(y[:whole], alpha, c, t)
		}
	}
	limit, least := c.Limit.double(), c.SumLeast.double()
	for i, v := range y[whole:] {
		x := float64(alpha * v)
		size := math.Abs(x)
		if !(size <= limit) || size < least && v != 0 {
			t[1] = 1
		}
		y[whole+i] = oddNeighbour64(x, math.FMA(alpha, v, -x))
	}
}

// added64 is x = x + factor b rounded to odd, factor 1 or -1; t[1] marks sums beyond
// Limit or not finite.
func (l *loops) added64(x, b []float64, factor float64, c *Constants, t *[2]uint64) {
	whole := 0
	if l.add64 != nil {
		if whole = len(x) &^ (wholeLanes - 1); whole > 0 {
			l.add64(x[:whole], b[:whole], factor, c, t)
		}
	}
	limit := c.Limit.double()
	x, b = x[whole:], b[whole:len(x)]
	for i, p := range x {
		q := float64(factor * b[i])
		v := p + q
		z := v - p
		rest := (p - (v - z)) + (q - z)
		if !(math.Abs(v) <= limit) {
			t[1] = 1
		}
		x[i] = oddNeighbour64(v, rest)
	}
}

// streamWords writes the words of blocks q, q+1, ... of a stream: four words each.
// dst has room for whole registers more.
func (l *loops) streamWords(dst []uint32, d random.Draws, q uint64, blocks int) {
	if l.philoxStream == nil {
		for i := range blocks {
			four := d.Words(q + uint64(i))
			copy(dst[4*i:], four[:])
		}
		return
	}
	l.arg = args(d, uint32(q), 0)
	l.arg.Phase = (l.arg.Phase | q>>32<<8) & (1<<32 - 1)
	l.arg.Dst, l.arg.Blocks = dst, blocks
	l.philoxStream(&l.arg)
	l.arg.Dst = nil
}
