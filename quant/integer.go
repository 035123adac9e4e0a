package quant

import (
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// maxInteger bounds the bits of scaled integers.
const maxInteger = 24

// wholeTensor is the percentile that takes in every element, in parts per million.
const wholeTensor = 1_000_000

// IntegerSpec writes a format of integers under the scale of a tensor out: v becomes
// the code R(v/scale) + Zero, saturating. In a product a code less Zero is the term,
// and the scale multiplies the finished sum.
type IntegerSpec struct {
	Bits     int  // 2 to 24
	Unsigned bool // codes from 0, else two's complement
	// Scale is fixed; 0: from the tensor.
	Scale float64
	// Percentile, in parts per million, of the tensor's finite elements that the scale
	// takes in, 0 meaning all: a percentile is the value of the least rank that is at
	// least that part of the elements. What lies beyond saturates.
	Percentile int
	// Zero is the code of zero. Fit chooses it from the tensor, so that the codes span
	// from the least to the largest element, zero always among them.
	Zero int64
	Fit  bool
	// Channel: each channel of the tensor has a scale of its own, see RoundChannels.
	Channel bool
}

// Integer is a format of integers with the scale of a tensor or of its channels. A
// value type, comparable with ==.
//
// Scales are binary32 numbers, rounded to nearest-even from the exact quotient:
//
//	symmetric   m / (largest code - Zero), m the largest magnitude, or its percentile
//	fitted      (hi - lo) / (largest code - least code), lo and hi the extremes, or
//	            percentiles from both sides, zero among them; their difference is that
//	            of binary64. Zero is then least code - lo/scale, to nearest-even.
//
// A tensor of zeros has the scale 1. INT8 so uses -127 to 127, and -128 only for what
// lies beyond a percentile or a fixed scale.
type Integer struct {
	spec   IntegerSpec
	lo, hi int64  // least and largest code
	code   Format // of the terms unless Zero is fitted; here, so that no line makes it anew
}

// NewInteger checks a format of scaled integers.
func NewInteger(s IntegerSpec) (Integer, error) {
	f := Integer{spec: s}
	switch {
	case s.Bits < 2 || s.Bits > maxInteger:
		return Integer{}, fmt.Errorf("quant: integers of %d bits: 2 to %d are known", s.Bits, maxInteger)
	case s.Scale != 0 && !(s.Scale > 0 && s.Scale <= math.MaxFloat32):
		return Integer{}, fmt.Errorf("quant: scale %v of integers: want a positive number", s.Scale)
	case s.Percentile < 0 || s.Percentile > wholeTensor:
		return Integer{}, fmt.Errorf("quant: percentile of %d parts per million: want 1 to %d", s.Percentile, wholeTensor)
	case s.Percentile != 0 && s.Scale != 0:
		return Integer{}, fmt.Errorf("quant: integers with both a fixed scale and a percentile")
	case s.Fit && s.Zero != 0:
		return Integer{}, fmt.Errorf("quant: integers with both a fixed and a fitted zero")
	}
	if s.Percentile == wholeTensor {
		f.spec.Percentile = 0
	}
	if s.Scale != 0 {
		f.spec.Scale = scaleFactor(Exactly(s.Scale))
	}
	f.lo, f.hi = integerRange(s.Bits, s.Unsigned)
	if s.Zero < f.lo || s.Zero >= f.hi {
		return Integer{}, fmt.Errorf("quant: zero at code %d: want %d to %d", s.Zero, f.lo, f.hi-1)
	}
	f.code = f.terms(s.Zero)
	return f, nil
}

// Spec is what the format was made of.
func (f Integer) Spec() IntegerSpec { return f.spec }

// Limits are those of a code.
func (f Integer) Limits() Limits {
	l := f.terms(0).Limits()
	l.Binary32 = true
	return l
}

// Bracket implements Format for a code.
func (f Integer) Bracket(x Real) Bracket { return f.terms(0).Bracket(x) }

// terms is the fixed-point format of codes less the zero point.
func (f Integer) terms(zero int64) Fixed {
	return Fixed{lo: f.lo - zero, hi: f.hi - zero, width: f.spec.Bits, overflow: Saturate}
}

// Scaling implements Blocked.
func (f Integer) Scaling(x []float64) Scaling {
	s := Scaling{Factor: f.spec.Scale, Zero: f.spec.Zero}
	if !f.spec.Fit {
		if s.Factor == 0 {
			s.Factor = factorOver(f.magnitude(x), f.hi-s.Zero)
		}
		return s
	}
	lo, hi := f.extremes(x)
	if s.Factor == 0 {
		s.Factor = factorOver(hi-lo, f.hi-f.lo)
	}
	p := Point{Format: Fixed{lo: -1 << 52, hi: 1 << 52, width: 53}, Overflow: Saturate}
	n, _ := p.Round(ExactQuotient(-lo, s.Factor), 0)
	s.Zero = min(f.lo+int64(n), f.hi)
	return s
}

// factorOver is the binary32 number nearest to a magnitude over n, 1 where the
// magnitude is zero.
func factorOver(m float64, n int64) float64 {
	if m == 0 {
		return 1
	}
	return scaleFactor(ExactQuotient(min(m, math.MaxFloat64), float64(n)))
}

// magnitude is the largest finite magnitude, or its percentile.
func (f Integer) magnitude(x []float64) float64 {
	if f.spec.Percentile == 0 {
		return largestFinite(x)
	}
	own := borrowScratch()
	defer own.giveBack()
	m := own.tensor[:0]
	for _, v := range x {
		if v-v == 0 {
			m = append(m, math.Abs(v))
		}
	}
	own.tensor = m
	slices.Sort(m)
	return ranked(m, f.spec.Percentile)
}

// extremes are the least and the largest finite element, or percentiles from both
// sides, stretched to zero.
func (f Integer) extremes(x []float64) (lo, hi float64) {
	part := f.spec.Percentile
	if part == 0 {
		for _, v := range x {
			if v-v == 0 {
				lo, hi = min(lo, v), max(hi, v)
			}
		}
		return lo, hi
	}
	own := borrowScratch()
	defer own.giveBack()
	m := own.tensor[:0]
	for _, v := range x {
		if v-v == 0 {
			m = append(m, v)
		}
	}
	own.tensor = m
	slices.Sort(m)
	hi = max(0, ranked(m, part))
	slices.Reverse(m)
	return min(0, ranked(m, part)), hi
}

// ranked is the element of x, in its order, whose rank is the least at or above the
// part; 0 of none.
func ranked(x []float64, part int) float64 {
	if len(x) == 0 {
		return 0
	}
	rank := (uint64(len(x))*uint64(part) + wholeTensor - 1) / wholeTensor
	return x[max(rank, 1)-1]
}

// Calibrated returns the format with scale and zero fixed to what a sample gives.
func (f Integer) Calibrated(sample []float64) Integer {
	s := f.Scaling(sample)
	f.spec.Scale, f.spec.Zero, f.spec.Fit, f.spec.Percentile = s.Factor, s.Zero, false, 0
	f.code = f.terms(s.Zero)
	return f
}

// RoundLine implements Blocked.
func (f Integer) RoundLine(line []float64, s Scaling, p *Point, word []uint32, n *Counts) {
	term := Point{Format: f.code, Rounding: p.Rounding, Overflow: p.Overflow}
	if s.Zero != f.spec.Zero {
		term.Format = f.terms(s.Zero)
	}
	for i, v := range line {
		var w uint32
		if word != nil {
			w = word[i]
		}
		r, e := term.Round(ExactQuotient(v, s.Factor), w)
		n.Count(e)
		line[i] = r
	}
}

// Encode returns the code of a term, two's complement unless unsigned.
func (f Integer) Encode(term float64, s Scaling) (uint64, bool) {
	code, ok := f.terms(s.Zero).Encode(term)
	return (code + uint64(s.Zero)) & (1<<f.spec.Bits - 1), ok
}

// String returns the canonical name: "INT8", "UINT4(scale=99.9%,zero=fit,per=channel)".
func (f Integer) String() string {
	s := f.spec
	name := fmt.Sprintf("INT%d", s.Bits)
	if s.Unsigned {
		name = "U" + name
	}
	var o []string
	switch {
	case s.Scale != 0:
		o = append(o, "scale="+strconv.FormatFloat(s.Scale, 'g', -1, 32))
	case s.Percentile != 0:
		o = append(o, "scale="+strconv.FormatFloat(float64(s.Percentile)/1e4, 'f', -1, 64)+"%")
	}
	switch {
	case s.Fit:
		o = append(o, "zero=fit")
	case s.Zero != 0:
		o = append(o, fmt.Sprintf("zero=%d", s.Zero))
	}
	if s.Channel {
		o = append(o, "per=channel")
	}
	if len(o) == 0 {
		return name
	}
	return name + "(" + strings.Join(o, ",") + ")"
}

var integerName = regexp.MustCompile(`^(?i)(U?)INT(\d{1,3})$`)

// parseInteger reads what Integer.String writes; scale=max is the default.
func parseInteger(word string) (Format, bool, error) {
	head, o, err := nameAndOptions(word)
	m := integerName.FindStringSubmatch(head)
	if m == nil {
		return nil, false, nil
	}
	s := IntegerSpec{Unsigned: m[1] != ""}
	s.Bits, _ = strconv.Atoi(m[2])
	if err == nil {
		err = s.read(&o)
	}
	if err == nil {
		err = o.rest("integers have scale=max, scale=0.01 or scale=99.9%, zero=0 or zero=fit, per=tensor or per=channel")
	}
	var f Integer
	if err == nil {
		f, err = NewInteger(s)
	}
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return f, true, nil
}

// read reads the options.
func (s *IntegerSpec) read(o *options) (err error) {
	if text, ok := o.take("scale"); ok && !strings.EqualFold(text, "max") {
		number, percent := strings.CutSuffix(text, "%")
		v, err := strconv.ParseFloat(number, 64)
		switch {
		case err != nil || !(v > 0 && v <= math.MaxFloat32) || percent && v > 100:
			return fmt.Errorf("scale %q: max, a positive number or a percentile as in 99.9%%", text)
		case percent:
			s.Percentile = max(1, int(math.Floor(v*1e4+0.5)))
		default:
			s.Scale = v
		}
	}
	if text, ok := o.take("zero"); ok {
		if s.Fit = strings.EqualFold(text, "fit"); !s.Fit {
			if s.Zero, err = strconv.ParseInt(text, 10, 32); err != nil {
				return fmt.Errorf("zero %q: a code, or fit", text)
			}
		}
	}
	if text, ok := o.take("per"); ok {
		s.Channel = strings.EqualFold(text, "channel")
		if !s.Channel && !strings.EqualFold(text, "tensor") {
			return fmt.Errorf("per %q: tensor or channel", text)
		}
	}
	return nil
}
