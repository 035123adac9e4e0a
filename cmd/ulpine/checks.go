package main

import (
	"fmt"
	"math"
	"strings"

	"ulpine/quant"
	"ulpine/quant/oracle"
	"ulpine/quant/random"
)

// checkFigures: IEEE 754-2019 table 3.5 (binary formats, from memory); OFP8 1.0
// tables 1 and 2, MX 1.0 section 5.3 (second hand); recomputed by exact decoding.
func checkFigures(c *checker) {
	for _, f := range []struct {
		name                   string
		max, normal, subnormal float64
		infinity, nan          bool
	}{
		{"fp16", 65504, 0x1p-14, 0x1p-24, true, true},
		{"bf16", 0x1.fep127, 0x1p-126, 0x1p-133, true, true},
		{"fp32", math.MaxFloat32, 0x1p-126, 0x1p-149, true, true},
		{"fp64", math.MaxFloat64, 0x1p-1022, 0x1p-1074, true, true},
		{"E5M2", 57344, 0x1p-14, 0x1p-16, true, true},
		{"E4M3", 448, 0x1p-6, 0x1p-9, false, true},
		{"E3M2", 28, 0.25, 0.0625, false, false},
		{"E2M3", 7.5, 1, 0.125, false, false},
		{"E2M1", 6, 1, 0.5, false, false},
	} {
		format, err := quant.ParseFormat(f.name)
		if !c.noError(err) {
			continue
		}
		l := format.Limits()
		c.that(l.Max == f.max && l.MinNormal == f.normal && l.MinSubnormal == f.subnormal, "%s: %+v", f.name, l)
		c.that(l.HasInfinity == f.infinity && l.HasNaN == f.nan, "%s: specials", f.name)
	}
}

// publishedConversions are nearest-even conversions: values and their codes (IEEE
// 754, OFP8 1.0 and MX 1.0 formats; computed with independent programs).
var publishedConversions = []struct{ format, values, codes string }{
	{"fp16", "0.1 1/3 2049 2051 65519 65520 0x1p-25 2.9802325e-8 0x1.8p-24", "2e66 3555 6800 6802 7bff 7c00 0000 0001 0002"},
	{"bf16", "0.1 1/3 3.14159265358979 257 259 1.00390625 1.01171875 3.4e38", "3dcd 3eab 4049 4380 4382 3f80 3f82 7f80"},
	{"E8M10", "0.1 1/3 2049", "1ee66 1f555 22800"},
	{"E5M2", "0.1 1.125 1.375 61439 61440 0x1p-17 7.63e-6 0x1.8p-16", "2e 3c 3e 7b 7b 00 01 02"},
	{"E4M3", "0.1 1.0625 1.1875 17 19 464 465 0x1p-10 0.00098", "1d 38 3a 58 5a 7e 7e 00 01"},
	{"E3M2", "0.1 1.125 1.375 31 0x1p-5 0.0313", "02 0c 0e 1f 00 01"},
	{"E2M3", "0.1 1.0625 8 0.0625 0.0626", "01 08 1f 00 01"},
	{"E2M1", "0.25 0.26 0.75 1.25 1.75 2.5 3.5 5 5.1 100", "0 1 2 2 4 4 6 6 7 7"},
}

func checkConversions(c *checker) {
	for _, t := range publishedConversions {
		f, err := quant.ParseFormat(t.format)
		if !c.noError(err) {
			continue
		}
		p := quant.Point{Format: f}
		codes := strings.Fields(t.codes)
		for i, text := range strings.Fields(t.values) {
			n, err := parseNumber(text)
			if !c.noError(err) {
				continue
			}
			v, _ := p.Round(n.real(), 0)
			code, _ := codeOf(f, v)
			c.that(code == codes[i], "%s of %s: code %s, want %s", t.format, text, code, codes[i])
		}
	}
}

// narrowFormats are the formats of at most 8 bits that the oracle defines: every
// split with every layout of the top exponent, fixed point, posits, the draft's.
func narrowFormats() []quant.Format {
	var all []quant.Format
	add := func(name string) {
		if f, err := quant.ParseFormat(name); err == nil {
			all = append(all, f)
		}
	}
	for e := 0; e <= 7; e++ {
		for m := 0; e+m <= 7; m++ {
			for _, top := range []string{"ieee", "nan", "finite"} {
				add(fmt.Sprintf("E%dM%d(top=%s,bias=%d)", e, m, top, 1<<max(e-1, 0)-1))
			}
		}
	}
	for width := 2; width <= 8; width++ {
		add(fmt.Sprintf("posit%d", width))
		for fraction := 0; fraction < width; fraction += 2 {
			add(fmt.Sprintf("Q%d.%d", width-fraction, fraction))
			add(fmt.Sprintf("UQ%d.%d", width-fraction, fraction))
		}
		for p := 1; p < width; p++ {
			add(fmt.Sprintf("binary%dp%d-draft", width, p))
		}
	}
	add("E4M3(subnormals=flush)")
	add("table(-1,-0.7,-0.5,-0.2,0,0.1,0.25,0.3,1,3)")
	return all
}

// checkCodes goes through every code of the narrow formats.
func checkCodes(c *checker) {
	for _, f := range narrowFormats() {
		c.everyCode(f)
	}
}

// everyCode decodes every code of a format and encodes its value again.
func (c *checker) everyCode(f quant.Format) {
	o, err := oracleOf(f)
	if !c.noError(err) {
		return
	}
	codes := f.(coder)
	l := f.Limits()
	for code := range uint64(1) << l.Bits {
		v := codes.Decode(code)
		c.that(sameBits(v, o.Decode(code)), "%s code %x: %v, want %v", f, code, v, o.Decode(code))
		back, ok := codes.Encode(v)
		switch {
		case v != v && !l.HasNaN:
			c.that(!ok, "%s code %x stands for nothing and has the code %x", f, code, back)
		case v != v, v == 0 && l.Flush: // several codes have one value
			c.that(ok && sameBits(codes.Decode(back), v), "%s code %x does not come back", f, code)
		default:
			c.that(ok && back == code, "%s code %x comes back as %x", f, code, back)
		}
	}
}

// sevenRoundings are all directions, and stochastic rounding with few bits.
var sevenRoundings = []quant.Rounding{
	{Mode: quant.NearestEven},
	{Mode: quant.NearestAway},
	{Mode: quant.TowardZero},
	{Mode: quant.Up},
	{Mode: quant.Down},
	{Mode: quant.ToOdd},
	{Mode: quant.Stochastic, Bits: 5, Variant: quant.CentredEven},
}

// pair is a format with its oracle.
type pair struct {
	point quant.Point
	o     *oracle.Format
	r     oracle.Rounding
}

// newPair describes a format to the oracle.
func newPair(f quant.Format) (pair, error) {
	o, err := oracleOf(f)
	return pair{point: quant.Point{Format: f}, o: o}, err
}

// with is the pair under a rounding.
func (p pair) with(r quant.Rounding) pair {
	p.point.Rounding, p.r = r, oracleRounding(r)
	return p
}

// compare rounds a finite binary64 number both ways.
func (p pair) compare(c *checker, x float64, word uint32) {
	got, event := p.point.Round(quant.Exactly(x), word)
	want, word2 := p.o.Round(ratOf(x), math.Signbit(x), p.r, "", uint64(word>>(32-max(p.r.Bits, 1))))
	c.that(sameBits(got, want) && eventWord(event) == word2, "%s of %x (word %08x): %v %s, want %v %s",
		p.point, x, word, got, eventWord(event), want, word2)
}

// checkMidpoints rounds, for every two neighbouring values, both, their midpoint,
// and the binary64 numbers beside each.
func checkMidpoints(c *checker) {
	words := quant.Draws{Seed: random.Derive(1, random.RoundingBits)}
	n := uint64(0)
	for _, f := range narrowFormats() {
		l := f.Limits()
		base, err := newPair(f)
		if !c.noError(err) {
			continue
		}
		codes := f.(coder)
		for code := range uint64(1) << l.Bits {
			v := codes.Decode(code)
			if v != v || math.IsInf(v, 0) {
				continue
			}
			b := f.Bracket(quant.Exactly(v))
			points := []float64{v}
			if gap := b.Away - b.Toward; gap > 0 && !math.IsInf(gap, 0) {
				points = append(points, v+math.Copysign(gap/2, v))
			}
			for _, r := range sevenRoundings {
				p := base.with(r)
				for _, x := range points {
					for _, y := range []float64{x, math.Nextafter(x, math.Inf(1)), math.Nextafter(x, math.Inf(-1))} {
						p.compare(c, y, words.Word(n))
						n++
					}
				}
			}
		}
	}
}

// checkSamples rounds random numbers over the whole range of wider formats.
func checkSamples(c *checker) {
	draws := quant.Draws{Seed: random.Derive(2, random.Data)}
	words := quant.Draws{Seed: random.Derive(2, random.RoundingBits)}
	n := uint64(0)
	for _, name := range []string{"fp16", "bf16", "E6M9", "E8M10", "fp32", "fp64", "Q2.14", "posit16", "E5M10(subnormals=flush)", "E4M3", "E5M2"} {
		f, err := quant.ParseFormat(name)
		if !c.noError(err) {
			continue
		}
		base, err := newPair(f)
		if !c.noError(err) {
			continue
		}
		l := f.Limits()
		low, high := math.Ilogb(l.MinSubnormal)-3, math.Ilogb(l.Max)+3
		for range 700 {
			w := draws.Words(n)
			x := math.Ldexp(1+float64(w[0])/(1<<32), low+int(w[1]%uint32(high-low)))
			if w[2]&1 != 0 {
				x = -x
			}
			if w[2]&6 == 0 { // few bits: ties are common
				x = math.Float64frombits(math.Float64bits(x) &^ (1<<40 - 1))
			}
			if math.IsInf(x, 0) {
				x = math.MaxFloat64
			}
			for _, r := range sevenRoundings {
				base.with(r).compare(c, x, words.Word(n))
			}
			n++
		}
	}
}

// checkPairs adds and multiplies every two operands of the 8-bit formats.
func checkPairs(c *checker) {
	for _, t := range []struct {
		name string
		mode quant.Mode
	}{{"E4M3", quant.NearestEven}, {"E5M2", quant.NearestEven}, {"E4M3", quant.ToOdd}} {
		f, err := quant.ParseFormat(t.name)
		if !c.noError(err) {
			continue
		}
		base, err := newPair(f)
		if !c.noError(err) {
			continue
		}
		p := base.with(quant.Rounding{Mode: t.mode})
		codes := f.(coder)
		for a := range uint64(256) {
			for b := a; b < 256; b++ { // both operations commute
				x, y := codes.Decode(a), codes.Decode(b)
				if math.IsNaN(x+y) || math.IsInf(x+y, 0) {
					continue
				}
				p.compare(c, x+y, 0) // exact in binary64
				got, _ := p.point.Round(quant.ExactProduct(x, y), 0)
				// So is the product, down to its sign of zero.
				want, _ := p.o.Round(ratOf(x*y), math.Signbit(x*y), p.r, "", 0)
				c.that(sameBits(got, want), "%s: %v times %v: %v, want %v", p.point, x, y, got, want)
				sum, _ := p.point.Round(quant.Exactly(x).Add(quant.Exactly(y)), 0)
				again, _ := p.point.Round(quant.Exactly(x+y), 0)
				c.that(sameBits(sum, again), "%s: %v plus %v: %v, want %v", p.point, x, y, sum, again)
			}
		}
	}
}

// checkDraws goes through every draw of few random bits: as many move away from zero
// as the exact probability says (variants of the IEEE P3109 draft, v4.0, 4.7.4).
func checkDraws(c *checker) {
	for _, name := range []string{"E4M3", "fp16", "E2M1"} {
		f, err := quant.ParseFormat(name)
		if !c.noError(err) {
			continue
		}
		o, err := oracleOf(f)
		if !c.noError(err) {
			continue
		}
		for bits := uint8(1); bits <= 8; bits++ {
			for variant := quant.Truncated; variant <= quant.CentredEven; variant++ {
				p := quant.Point{Format: f, Rounding: quant.Rounding{Mode: quant.Stochastic, Bits: bits, Variant: variant}}
				for eighths := range 16 {
					x := 1.5 + float64(eighths)*0x1p-9 + 0x1p-20
					r := quant.Exactly(x)
					low, _ := p.Round(r, 0)
					moved := int64(0)
					for u := range uint32(1) << bits {
						v, _ := p.Round(r, u<<(32-bits))
						toward, _, _ := o.Neighbours(ratOf(x))
						if t, _ := toward.Float64(); v != t {
							moved++
						}
					}
					want := o.Chance(ratOf(x), oracleRounding(p.Rounding))
					n, _ := want.Float64()
					c.that(float64(moved) == n*float64(uint32(1)<<bits), "%s of %v (at least %v): %d of %d draws move, want %v", p, x, low, moved, 1<<bits, want)
				}
			}
		}
	}
}

// checkBlocks: V as one block in four MX formats, MX 1.0 with the floor rule; scales
// and element codes computed with an independent program.
func checkBlocks(c *checker) {
	v := []float64{1, -0.5, 0.3, 7.9, 0.01, -3.1, 0, 2.5}
	for _, t := range []struct {
		name, element, codes string
		scale                float64
	}{
		{"MXFP8(E4M3)", "E4M3", "68 e0 5a 7e 32 f4 00 72", 0x1p-6},
		{"MXFP4", "E2M1", "2 9 1 7 0 d 0 4", 1},
		{"MXFP6(E2M3)", "E2M3", "08 24 02 1f 00 34 00 12", 1},
		{"MXINT8", "Q2.6", "10 f8 05 7e 00 ce 00 28", 4},
	} {
		f, err := quant.ParseFormat(t.name)
		if !c.noError(err) {
			continue
		}
		element, err := quant.ParseFormat(t.element)
		if !c.noError(err) {
			continue
		}
		o, err := oracleOf(element)
		if !c.noError(err) {
			continue
		}
		got := make([]float64, len(v))
		p := quant.Point{Format: f}
		factor := quant.RoundTensor(got, v, quant.Shape{Outer: 1, Axis: len(v), Inner: 1}, &p, quant.Draws{}, 0, nil)
		c.that(factor == 1, "%s: a factor of the whole tensor, %v", t.name, factor)
		for i, hex := range strings.Fields(t.codes) {
			var code uint64
			_, err := fmt.Sscanf(hex, "%x", &code)
			c.noError(err)
			want := o.Decode(code) * t.scale
			c.that(got[i] == want, "%s of %v: %v, want %v", t.name, v[i], got[i], want)
		}
	}
}
