package main

import (
	"fmt"
	"math"
	"strings"

	"github.com/spf13/cobra"

	"ulpine/quant"
	"ulpine/quant/random"
)

// coder is a format that gives its values codes.
type coder interface {
	Encode(x float64) (uint64, bool)
	Decode(code uint64) float64
}

// codeOf is the code of a value in hexadecimal, as many digits as the width
// takes; false where the value, or the format, has none.
func codeOf(f quant.Format, x float64) (string, bool) {
	c, ok := f.(coder)
	if !ok {
		return "", false
	}
	code, ok := c.Encode(x)
	if !ok {
		return "", false
	}
	return hexCode(code, f.Limits().Bits), true
}

// hexCode prints a code of a width in bits.
func hexCode(code uint64, bits int) string { return fmt.Sprintf("%0*x", (bits+3)/4, code) }

// arithmetic are the flags that spell a rounding out.
type arithmetic struct {
	rounding, overflow, variant string
	bits                        int
	seed                        uint64
}

// arithmeticFlags adds --rounding, --overflow, --random-bits, --variant and --seed.
func arithmeticFlags(cmd *cobra.Command) *arithmetic {
	a := &arithmetic{}
	f := cmd.Flags()
	f.StringVar(&a.rounding, "rounding", "nearest-even", "`rounding`: nearest-even, nearest-away, toward-zero, up, down, to-odd, stochastic")
	f.StringVar(&a.overflow, "overflow", "", "`policy` for results beyond the range: infinity, saturate, nan, or wrap for integers (default the format's own)")
	f.IntVar(&a.bits, "random-bits", 0, "random `bits` of stochastic rounding")
	f.StringVar(&a.variant, "variant", "", "`variant` of stochastic rounding with few bits: truncated, centred, centred-even (default truncated)")
	f.Uint64Var(&a.seed, "seed", 1, "seed of the random bits")
	return a
}

// draws is the stream of random words of one rounding point.
func (a *arithmetic) draws(site uint32) quant.Draws {
	return quant.Draws{Seed: random.Derive(a.seed, random.RoundingBits), Site: site}
}

// roundingOf reads the flags; without --random-bits stochastic rounding has bits.
func (a *arithmetic) roundingOf(bits int) (quant.Rounding, error) {
	r, err := quant.ParseRounding(a.rounding)
	if err != nil {
		return r, err
	}
	spelt := strings.Contains(a.rounding, "(")
	switch {
	case r.Mode != quant.Stochastic && (a.bits != 0 || a.variant != ""):
		return r, fmt.Errorf("--random-bits or --variant with rounding %s: only stochastic rounding has them", r.Mode)
	case spelt && (a.bits != 0 || a.variant != ""):
		return r, fmt.Errorf("--rounding %q says the random bits already: leave --random-bits and --variant out", a.rounding)
	case r.Mode != quant.Stochastic || spelt:
		return r, nil
	case a.bits < 0 || a.bits > 32:
		return r, fmt.Errorf("--random-bits %d: 1 to 32 can be used", a.bits)
	case a.bits != 0:
		bits = a.bits
	}
	r.Bits = uint8(bits)
	if a.variant != "" {
		r.Variant, err = quant.ParseVariant(a.variant)
	}
	return r, err
}

// given reports whether the user said how many random bits there are.
func (a *arithmetic) given() bool { return a.bits != 0 || strings.Contains(a.rounding, "(") }

// point reads a format under the flags. Its errors are the input's fault.
func (a *arithmetic) point(format string, bits int) (quant.Point, error) {
	f, err := quant.ParseFormat(format)
	if err != nil {
		return quant.Point{}, badInput(err)
	}
	p := quant.Point{Format: f}
	if p.Rounding, err = a.roundingOf(bits); err != nil {
		return p, badInput(err)
	}
	if a.overflow != "" {
		if p.Overflow, err = quant.ParseOverflow(a.overflow); err != nil {
			return p, badInput(err)
		}
	}
	return p, badInput(p.CheckOperand())
}

// spelt reads a format under the flags, or a format with a rounding and an overflow
// policy of its own, parted by spaces.
func (a *arithmetic) spelt(text string, bits int) (quant.Point, error) {
	fields := strings.Fields(text)
	if len(fields) < 2 {
		return a.point(text, bits)
	}
	if len(fields) > 3 {
		return quant.Point{}, badInput(fmt.Errorf("point %q: want a format, a rounding and an overflow policy", text))
	}
	own := arithmetic{rounding: fields[1]}
	if len(fields) == 3 {
		own.overflow = fields[2]
	}
	return own.point(fields[0], bits)
}

// required is an error for a flag that has no default.
func required(cmd *cobra.Command, flags ...string) error {
	for _, name := range flags {
		if f := cmd.Flags().Lookup(name); f.Value.String() == "" || f.Value.String() == "[]" {
			return badInput(fmt.Errorf("%s needs --%s: %s", cmd.CommandPath(), name, strings.ReplaceAll(f.Usage, "`", "")))
		}
	}
	return nil
}

// places says between which powers of two the values of a format lie: all are
// multiples of 2^finest, and the largest ones are 2^coarsest apart. false for
// families whose gaps are not powers of two.
func places(f quant.Format) (finest, coarsest int, ok bool) {
	l := f.Limits()
	_, split := f.(quant.Float)
	_, integer := f.(quant.Wrapper)
	if !split && !integer || !(l.MinSubnormal > 0) {
		return 0, 0, false
	}
	least := l.MinSubnormal
	if l.Flush { // the least normal value, but its binade has a finer grid
		least = math.Ldexp(l.MinNormal, -l.Fraction)
	}
	_, e := math.Frexp(least)
	finest = e - 1
	if integer {
		return finest, finest, math.Ldexp(1, finest) == least
	}
	_, top := math.Frexp(l.Max)
	return finest, max(top-1-l.Fraction, finest), true
}

// usableBits checks that rounding to a format can use the random bits: exact
// values that are multiples of 2^finest lose coarsest - finest bits at most, and a
// random bit below them never decides anything.
func usableBits(what string, p *quant.Point, finest int) error {
	if p == nil || p.Rounding.Mode != quant.Stochastic {
		return nil
	}
	_, coarsest, ok := places(p.Format)
	r := int(p.Rounding.Bits)
	lost := coarsest - finest
	if !ok || lost < 1 || r <= lost {
		return nil
	}
	return badInput(fmt.Errorf("%d random bits: %s to %s discards at most %d bits, so the others decide nothing; use --random-bits %d", r, what, p.Format, lost, lost))
}

// lowerBits lowers a default number of random bits to what rounding to the point
// can use.
func lowerBits(p *quant.Point, finest int) {
	if p == nil || p.Rounding.Mode != quant.Stochastic {
		return
	}
	if _, coarsest, ok := places(p.Format); ok && coarsest-finest >= 1 {
		p.Rounding.Bits = uint8(min(int(p.Rounding.Bits), coarsest-finest))
	}
}
