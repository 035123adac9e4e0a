package main

import (
	"bufio"
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"

	"ulpine/quant"
	"ulpine/quant/random"
)

// maxExhaustive bounds the vectors of an exhaustive file.
const maxExhaustive = 1 << 24

// operation is an operation that vectors are written for.
type operation struct {
	name     string
	operands []string
	formula  string
	exact    func(x []float64) quant.Real
	// finest is the place of which all exact results are multiples when all operands
	// are multiples of 2^place.
	finest func(place int) int
}

var operations = []operation{
	{
		"round",
		[]string{"a"},
		"R(a)",
		func(x []float64) quant.Real { return quant.Exactly(x[0]) },
		func(p int) int { return p },
	},
	{
		"add",
		[]string{"a", "b"},
		"R(a + b)",
		func(x []float64) quant.Real { return quant.Exactly(x[0]).Add(quant.Exactly(x[1])) },
		func(p int) int { return p },
	},
	{
		"multiply",
		[]string{"a", "b"},
		"R(a b)",
		func(x []float64) quant.Real { return quant.ExactProduct(x[0], x[1]) },
		func(p int) int { return 2 * p },
	},
	{
		"fma",
		[]string{"a", "b", "c"},
		"R(a b + c), rounded once",
		func(x []float64) quant.Real { return quant.ExactProduct(x[0], x[1]).Add(quant.Exactly(x[2])) },
		func(p int) int { return min(p, 2*p) },
	},
}

// vectorSet is one file of test vectors.
type vectorSet struct {
	op          operation
	from        quant.Format // of the operands
	codes       coder        // from
	point       quant.Point  // of the result
	seed        uint64
	count       int
	exhaustive  bool
	draws       quant.Draws
	cornerCount int // vectors that come first, made of corners
}

func newVectors() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "vectors --format F --operation OP (--count N | --exhaustive)",
		Short: "Write test vectors for a format, a rounding and an operation",
		Long: `Write test vectors that a hardware test bench reads: one a line, its fields
labelled (a=3c00 b=0001 result=3c00 flags=inexact), codes in hexadecimal. The
comment lines at the top, starting with #, say all that the results depend on.

Sampled vectors begin with corners (zeros, least and largest values, one and its
neighbours, specials), the others are drawn so that ties, cancellation and the ends
of the range are common.`,
		Args: exactly(),
	}
	a := arithmeticFlags(cmd)
	f := cmd.Flags()
	format := f.String("format", "", "the `format` of the result")
	from := f.String("from", "", "the `format` of the operands (default the result's; for round binary32, or binary64 where the result needs it)")
	op := f.String("operation", "", "the `operation`: round, add, multiply, fma")
	count := f.Int("count", 0, "the `number` of sampled vectors")
	exhaustive := f.Bool("exhaustive", false, "all combinations of operands")
	file := f.String("out", "", "write to this `file` (default standard output)")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		if err := required(cmd, "format", "operation"); err != nil {
			return err
		}
		v, err := newVectorSet(a, *format, *from, *op, *count, *exhaustive)
		if err != nil {
			return err
		}
		if *file == "" {
			w := bufio.NewWriter(cmd.OutOrStdout())
			if err := v.write(w); err != nil {
				return err
			}
			return w.Flush()
		}
		if err := writeFile(*file, v.write); err != nil {
			return err
		}
		_, err = fmt.Fprintf(cmd.OutOrStdout(), "%d vectors written to %s\n", v.count, *file)
		return err
	}
	return cmd
}

// newVectorSet checks what the user asks for.
func newVectorSet(a *arithmetic, format, from, op string, count int, exhaustive bool) (*vectorSet, error) {
	v := &vectorSet{seed: a.seed, count: count, exhaustive: exhaustive, draws: a.draws(0)}
	if err := v.chooseOperation(op); err != nil {
		return nil, badInput(err)
	}
	var err error
	if v.point, err = a.point(format, quant.DefaultRandomBits); err != nil {
		return nil, err
	}
	if v.point.Rounding.Source != (quant.Source{}) {
		return nil, badInput(fmt.Errorf("rounding %s: vectors carry the random bits of each line, whatever their source; use stochastic(%d)", v.point.Rounding, v.point.Rounding.Bits))
	}
	if v.from, err = v.operandFormat(from); err != nil {
		return nil, badInput(err)
	}
	for _, f := range []quant.Format{v.from, v.point.Format} {
		_, shared := f.(quant.Blocked)
		if c, ok := f.(coder); !ok || shared {
			return nil, badInput(fmt.Errorf("format %s: its values have no codes of their own; use the format of its elements", f))
		} else if f == v.from {
			v.codes = c
		}
	}
	if err := v.checkBits(a.given()); err != nil {
		return nil, err
	}
	return v, v.checkCount()
}

func (v *vectorSet) chooseOperation(name string) error {
	var names []string
	for _, o := range operations {
		if o.name == name {
			v.op = o
			return nil
		}
		names = append(names, o.name)
	}
	return fmt.Errorf("unknown operation %q: one of %s", name, strings.Join(names, ", "))
}

// operandFormat reads --from, or chooses: the narrowest standard format that has
// every value of the result for round, the result's own for the others.
func (v *vectorSet) operandFormat(name string) (quant.Format, error) {
	to := v.point.Format
	switch {
	case name != "":
		return quant.ParseFormat(name)
	case v.op.name != "round":
		return to, nil
	case to.String() == quant.Binary64.String():
		return nil, fmt.Errorf("round to %s: no wider format is known to round from; name one with --from", to)
	case quant.Fits32(to) && to.String() != quant.Binary32.String():
		return quant.Binary32, nil
	}
	return quant.Binary64, nil
}

// checkBits refuses random bits that no result can use, and lowers a default.
func (v *vectorSet) checkBits(given bool) error {
	place, _, ok := places(v.from)
	if !ok {
		return nil
	}
	finest := v.op.finest(place)
	if !given {
		lowerBits(&v.point, finest)
	}
	return usableBits("operation "+v.op.name, &v.point, finest)
}

// checkCount settles the number of vectors.
func (v *vectorSet) checkCount() error {
	all, capped := v.combinations()
	switch {
	case v.exhaustive && v.count != 0:
		return badInput(fmt.Errorf("--exhaustive with --count: use one of them"))
	case v.exhaustive && capped:
		return badInput(fmt.Errorf("--exhaustive: %d operands of %d bits are more than %d vectors; use --count, or narrower operands with --from",
			len(v.op.operands), v.from.Limits().Bits, maxExhaustive))
	case v.exhaustive:
		v.count = all
	case v.count < 1:
		return badInput(fmt.Errorf("say how many vectors: --count N, or --exhaustive"))
	}
	return nil
}

// combinations is the number of operand tuples, capped at maxExhaustive.
func (v *vectorSet) combinations() (n int, capped bool) {
	bits := v.from.Limits().Bits * len(v.op.operands)
	if bits > 24 {
		return maxExhaustive, true
	}
	return 1 << bits, false
}

// write writes header and vectors.
func (v *vectorSet) write(w io.Writer) error {
	next := v.all
	if !v.exhaustive {
		next = v.sampler()
	}
	if err := v.header(w); err != nil {
		return err
	}
	operands := make([]uint64, len(v.op.operands))
	for i := range v.count {
		next(i, operands)
		if _, err := fmt.Fprintln(w, v.line(operands, v.draws.Word(uint64(i)))); err != nil {
			return err
		}
	}
	return nil
}

// all yields operand tuple number i of all, the last operand changing fastest.
func (v *vectorSet) all(i int, operands []uint64) {
	bits := v.from.Limits().Bits
	for k := len(operands) - 1; k >= 0; k-- {
		operands[k] = uint64(i) & (1<<bits - 1)
		i >>= bits
	}
}

// line computes one vector.
func (v *vectorSet) line(operands []uint64, word uint32) string {
	var b strings.Builder
	x := make([]float64, len(operands))
	bits := v.from.Limits().Bits
	for k, code := range operands {
		x[k] = v.codes.Decode(code)
		fmt.Fprintf(&b, "%s=%s ", v.op.operands[k], hexCode(code, bits))
	}
	if r := v.point.Rounding; r.Mode == quant.Stochastic {
		u := word >> (32 - r.Bits)
		word = u << (32 - r.Bits)
		fmt.Fprintf(&b, "u=%s ", hexCode(uint64(u), int(r.Bits)))
	}
	exact := v.op.exact(x)
	result, event := v.point.Round(exact, word)
	code, ok := codeOf(v.point.Format, result)
	if !ok {
		code = "none"
	}
	fmt.Fprintf(&b, "result=%s flags=%s", code, vectorFlags(exact, result, event))
	return b.String()
}

// vectorFlags are the words of the flags, "-" for none.
func vectorFlags(exact quant.Real, result float64, event quant.Event) string {
	var flags []string
	r := quant.Exactly(result)
	r.Neg = r.Neg != (r.IsZero() && r.Neg != exact.Neg) // the sign of a zero is not inexact
	if exact.Kind != quant.NotANumber && exact != r {
		flags = append(flags, "inexact")
	}
	if word := eventWord(event); word != "" {
		flags = append(flags, word)
	}
	if len(flags) == 0 {
		return "-"
	}
	return strings.Join(flags, ",")
}

// header states everything that the vectors depend on.
func (v *vectorSet) header(w io.Writer) error {
	var b strings.Builder
	say := func(format string, a ...any) { fmt.Fprintf(&b, "# "+format+"\n", a...) }
	say("test vectors of ulpine, arithmetic version %d", quant.ArithmeticVersion)
	say("operation: %s, result = %s", v.op.name, v.op.formula)
	say("operands %s: codes of %s, %s", strings.Join(v.op.operands, " "), v.from, layoutWords(v.from))
	say("result: code of %s, %s", v.point.Format, layoutWords(v.point.Format))
	say("rounding: %s", v.point.Rounding)
	if r := v.point.Rounding; r.Mode == quant.Stochastic {
		say("u: the %d random bits of the rounding; away from zero iff T + u >= 2^%d, T the fraction of the gap times 2^%d, %s",
			r.Bits, r.Bits, r.Bits, r.Variant)
	}
	overflow := v.point.Overflow
	if overflow == quant.FormatDefault {
		overflow = v.point.Format.Limits().DefaultOverflow
	}
	say("overflow: %s, decided after rounding with unbounded exponent", overflow)
	say("an exact zero of opposite terms is +0 in every rounding; NaN results have the code of the quiet NaN without sign")
	say("flags: inexact (the result is not the exact one); overflow (a finite result beyond the range became infinite or NaN, or wrapped);")
	say("  saturated (a result beyond the range, infinity included, became its end); underflow (a result other than zero became zero);")
	say("  nan (the result is NaN otherwise); - for none. They are not the status flags of IEEE 754. result=none: the format has no code for NaN")
	if v.exhaustive {
		say("vectors: %d, all combinations of operands", v.count)
	} else {
		say("vectors: %d, the first %d of corners, the others sampled; seed %d", v.count, v.cornerCount, v.seed)
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// layoutWords describes a code.
func layoutWords(f quant.Format) string {
	l := f.Limits()
	if _, ok := f.(quant.Float); !ok {
		return fmt.Sprintf("%d bits", l.Bits)
	}
	finest, _, _ := places(f)
	s := fmt.Sprintf("%d bits: sign, %d exponent (bias %d), %d fraction", l.Bits, l.Exponent, 1-l.Fraction-finest, l.Fraction)
	if l.Flush {
		s += "; subnormals read as zero and results below the least normal value become zero"
	}
	return s
}

// operandDraws is the stream that operands are drawn from, apart from the rounding's.
func (v *vectorSet) operandDraws() quant.Draws {
	return quant.Draws{Seed: random.Derive(v.seed, random.Data)}
}
