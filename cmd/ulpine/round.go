package main

import (
	"bufio"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"math/big"
	"regexp"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"ulpine/quant"
)

func newRound() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "round --format F [--rounding R] VALUE... | -",
		Short: "Round numbers to a format, exactly, with neighbours, code and chances",
		Long: `Round numbers, each an exact decimal (0.1), hexadecimal float (0x1.8p-3) or
fraction (1/3); - reads them from standard input, one a line.

below and above are the values of the format at or next to the number; both are
the number itself where the format has it, and inf or -inf beyond its range. up is
the exact probability that the result is above: of the given random bits, or of
ideal stochastic rounding where --random-bits is not given (the result is then
drawn with 32 bits). A number that the format has does not move: its up is 0.
Value number n of the line draws word n of the seed's stream.`,
		Example: `  ulpine round --format E4M3 0.1 17 465
  ulpine round --format bf16 --rounding stochastic --random-bits 4 -0.3 --json`,
		DisableFlagParsing: true, // negative numbers are not flags: see splitNumbers
	}
	a := arithmeticFlags(cmd)
	format := cmd.Flags().String("format", "", "the `format` to round to (fp16, bf16, E4M3, E6M9, ...)")
	asJSON := cmd.Flags().Bool("json", false, "one JSON object a value")
	cmd.RunE = func(cmd *cobra.Command, raw []string) error {
		args, help, err := splitNumbers(cmd, raw)
		if err != nil || help {
			return err
		}
		if err := required(cmd, "format"); err != nil {
			return err
		}
		p, err := a.point(*format, 32)
		if err != nil {
			return err
		}
		if p.Rounding.Source != (quant.Source{}) {
			return badInput(fmt.Errorf("rounding %s: shared draws and registers serve tensors; use matmul or sum, or stochastic(%d) here", p.Rounding, p.Rounding.Bits))
		}
		numbers, err := readNumbers(cmd, args)
		if err != nil {
			return err
		}
		if _, blocked := p.Format.(quant.Blocked); blocked {
			return roundBlock(cmd.OutOrStdout(), p, numbers, a.draws(0), *asJSON)
		}
		rounded := make([]roundedNumber, len(numbers))
		for i, n := range numbers {
			rounded[i] = roundNumber(p, n, a.draws(0).Word(uint64(i)), a.given())
		}
		if *asJSON {
			return roundJSON(cmd.OutOrStdout(), rounded)
		}
		return roundText(cmd.OutOrStdout(), p, rounded, a.given())
	}
	return cmd
}

var negativeNumber = regexp.MustCompile(`^-(\.?[0-9]|(?i:inf|nan))`)

// splitNumbers parses the flags of a verb whose arguments may be negative numbers,
// which the flag package would take for flags, and returns the arguments.
func splitNumbers(cmd *cobra.Command, raw []string) (args []string, help bool, err error) {
	const mark = "\x00" // no command line can hold it
	marked := make([]string, len(raw))
	for i, s := range raw {
		if negativeNumber.MatchString(s) {
			s = mark + s
		}
		marked[i] = s
	}
	cmd.InitDefaultHelpFlag()
	if err := cmd.Flags().Parse(marked); err != nil {
		text := strings.ReplaceAll(strings.ReplaceAll(err.Error(), mark, ""), `\x00`, "")
		return nil, false, badInput(fmt.Errorf("%s (see %q)", text, cmd.CommandPath()+" --help"))
	}
	if help, _ = cmd.Flags().GetBool("help"); help {
		return nil, true, cmd.Help()
	}
	for _, s := range cmd.Flags().Args() {
		args = append(args, strings.TrimPrefix(s, mark))
	}
	return args, false, nil
}

// readNumbers reads the numbers of the arguments, or of standard input for "-".
func readNumbers(cmd *cobra.Command, args []string) ([]exactNumber, error) {
	if len(args) == 0 {
		return nil, badInput(fmt.Errorf("%s takes numbers, or - to read them from standard input", cmd.CommandPath()))
	}
	var numbers []exactNumber
	if len(args) == 1 && args[0] == "-" {
		lines := bufio.NewScanner(cmd.InOrStdin())
		for at := 1; lines.Scan(); at++ {
			text := strings.TrimSpace(lines.Text())
			if text == "" || strings.HasPrefix(text, "#") {
				continue
			}
			n, err := parseNumber(text)
			if err != nil {
				return nil, badInput(fmt.Errorf("standard input, line %d: %w", at, err))
			}
			numbers = append(numbers, n)
		}
		return numbers, badInput(lines.Err())
	}
	for _, arg := range args {
		n, err := parseNumber(arg)
		if err != nil {
			return nil, badInput(err)
		}
		numbers = append(numbers, n)
	}
	return numbers, nil
}

// roundedNumber is what is known of one rounding.
type roundedNumber struct {
	exactNumber
	format       quant.Format
	below, above float64
	result       float64
	event        quant.Event
	up           *big.Rat // probability that the result is above
	expected     *big.Rat // nil where a possible result is not finite
	mean         float64  // the expected value in binary64
}

// roundNumber rounds one number with the top bits of word; given says that the
// number of random bits is the user's.
func roundNumber(p quant.Point, n exactNumber, word uint32, given bool) roundedNumber {
	x := n.real()
	r := roundedNumber{exactNumber: n, format: p.Format, up: new(big.Rat)}
	r.result, r.event = p.Round(x, word)
	r.below, r.above = r.result, r.result
	if x.Kind == quant.Finite && (!x.IsZero() || p.Format.Limits().NoZero) {
		b := p.Format.Bracket(x)
		r.below, r.above = neighbours(p.Format, n.value, n.negative, b)
		if r.below != r.above {
			r.chances(p, x, b, given)
			return r
		}
	}
	r.mean = r.result
	if !math.IsNaN(r.mean) && !math.IsInf(r.mean, 0) {
		r.expected = ratOf(r.mean)
	}
	return r
}

// neighbours are the values of the format at or around a finite number, infinities
// beyond its range; equal where the number is a value, or is taken for one.
func neighbours(f quant.Format, x *big.Rat, negative bool, b quant.Bracket) (below, above float64) {
	l := f.Limits()
	switch {
	case x.Cmp(ratOf(l.Max)) > 0:
		return l.Max, math.Inf(1)
	case x.Cmp(ratOf(l.Lowest)) < 0:
		return math.Inf(-1), l.Lowest
	}
	toward, away := b.Toward, b.Away
	m := new(big.Rat).Abs(x)
	switch {
	case l.Flush && m.Sign() != 0 && toward < l.MinNormal:
		toward, away = 0, l.MinNormal // what lies between becomes zero
	case b.Exact && !l.NoZero && m.Sign() != 0 && m.Cmp(ratOf(l.MinSubnormal)) < 0:
		toward, away = 0, b.Toward // a posit's least value, which small numbers become
	case b.Exact:
		away = toward
	}
	if negative {
		toward, away = -away+0, -toward+0
	}
	// The range may end inside the gap: unsigned formats, two's complement.
	if toward < l.Lowest {
		toward = math.Inf(-1)
	}
	if away > l.Max {
		away = math.Inf(1)
	}
	return toward, away
}

// chances finds the probability of the result above and the expected value.
func (r *roundedNumber) chances(p quant.Point, x quant.Real, b quant.Bracket, given bool) {
	low, _ := p.Round(x, 0)
	high, _ := p.Round(x, math.MaxUint32)
	chance := new(big.Rat) // of high, the result of the largest draw
	switch {
	case low == high || low != low && high != high:
		high = low
	case given:
		chance = drawnChance(p, x, high)
	default:
		chance = idealChance(p.Format, r.value, b)
	}
	rest := new(big.Rat).Sub(big.NewRat(1, 1), chance)
	if high == r.above {
		r.up.Add(r.up, chance)
	}
	if low == r.above {
		r.up.Add(r.up, rest)
	}
	r.expect(low, rest)
	r.expect(high, chance)
	if r.expected != nil {
		r.mean, _ = r.expected.Float64()
	}
}

// expect adds a possible result to the expected value.
func (r *roundedNumber) expect(x float64, chance *big.Rat) {
	switch {
	case chance.Sign() == 0:
	case math.IsNaN(x) || math.IsInf(x, 0):
		r.mean += x
		r.expected = nil
	case !math.IsNaN(r.mean) && !math.IsInf(r.mean, 0):
		term := ratOf(x)
		term.Mul(term, chance)
		if r.expected != nil {
			term.Add(term, r.expected)
		}
		r.expected = term
	}
}

// drawnChance is the exact share of the 2^r draws that give high. Results change
// once as the draw grows: the turning point is found by bisection, so that the
// share is that of the rounding itself.
func drawnChance(p quant.Point, x quant.Real, high float64) *big.Rat {
	bits := uint(p.Rounding.Bits)
	lo, hi := uint64(0), uint64(1)<<bits-1 // lo gives low, hi gives high
	for hi-lo > 1 {
		mid := (lo + hi) / 2
		v, _ := p.Round(x, uint32(mid<<(32-bits)))
		if v == high || v != v && high != high {
			hi = mid
		} else {
			lo = mid
		}
	}
	return new(big.Rat).SetFrac(new(big.Int).SetUint64(1<<bits-hi), new(big.Int).SetUint64(1<<bits))
}

// idealChance is the fraction of the gap below |x|: exact where the format
// measures its gaps so, to 64 bits where it does not (posits) or where the gap ends
// beyond binary64.
func idealChance(f quant.Format, value *big.Rat, b quant.Bracket) *big.Rat {
	if !math.IsInf(b.Away, 0) {
		toward := ratOf(b.Toward)
		gap := new(big.Rat).Sub(ratOf(b.Away), toward)
		x := new(big.Rat).Abs(value)
		x.Quo(x.Sub(x, toward), gap)
		top := new(big.Int).Lsh(x.Num(), 64)
		if top.Quo(top, x.Denom()).Cmp(new(big.Int).SetUint64(b.Fraction)) == 0 {
			return x
		}
	}
	fraction := new(big.Int).SetUint64(b.Fraction)
	return new(big.Rat).SetFrac(fraction, new(big.Int).Lsh(big.NewInt(1), 64))
}

// eventWord names a range event.
func eventWord(e quant.Event) string {
	return []string{"", "overflow", "underflow", "saturated", "nan"}[e]
}

func roundText(w io.Writer, p quant.Point, all []roundedNumber, given bool) error {
	stochastic := p.Rounding.Mode == quant.Stochastic
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	how := p.Rounding.String()
	if stochastic && !given {
		how = "stochastic, ideal chances, result drawn with 32 random bits"
	}
	fmt.Fprintf(w, "%s, %s\n", p.Format, how)
	fmt.Fprint(t, "value\tbelow\tabove\tresult\tcode")
	if stochastic {
		fmt.Fprint(t, "\tup\t\texpected")
	}
	fmt.Fprintln(t, "\tevent")
	for i := range all {
		r := &all[i]
		code, ok := codeOf(r.format, r.result)
		if !ok {
			code = "-"
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s", r.text, word64(r.below), word64(r.above), word64(r.result), code)
		if stochastic {
			expected := word64(r.mean)
			if r.expected != nil {
				expected = decimal(r.expected, 20)
			}
			fmt.Fprintf(t, "\t%s\t%s\t%s", shortRat(r.up), decimal(r.up, 12), expected)
		}
		word := eventWord(r.event)
		if word == "" {
			word = "-"
		}
		fmt.Fprintf(t, "\t%s\n", word)
	}
	return t.Flush()
}

// shortRat prints a fraction, or "long" where it does not fit a column.
func shortRat(x *big.Rat) string {
	if s := x.RatString(); len(s) <= 40 {
		return s
	}
	return "(long)"
}

func roundJSON(w io.Writer, all []roundedNumber) error {
	enc := json.NewEncoder(w)
	for i := range all {
		r := &all[i]
		up, _ := r.up.Float64()
		object := map[string]any{
			"value": r.jsonValue(), "text": r.text, "below": jsonNumber(r.below), "above": jsonNumber(r.above),
			"result": jsonNumber(r.result), "code": nil, "up": up, "up_exact": r.up.RatString(),
			"expected": jsonNumber(r.mean), "event": eventWord(r.event), "format": r.format.String(),
		}
		if r.expected != nil {
			object["expected_exact"] = r.expected.RatString()
		}
		if code, ok := codeOf(r.format, r.result); ok {
			object["code"] = code
		}
		if err := enc.Encode(object); err != nil {
			return err
		}
	}
	return nil
}

// jsonValue is the number as JSON has it: the nearest binary64 number, a special's
// word, or the user's own text where binary64 does not reach.
func (n exactNumber) jsonValue() any {
	switch n.kind {
	case quant.Infinite:
		return map[bool]string{false: "inf", true: "-inf"}[n.negative]
	case quant.NotANumber:
		return "nan"
	}
	x, _ := n.value.Float64()
	if math.IsInf(x, 0) || x == 0 && n.value.Sign() != 0 {
		return n.text
	}
	if x == 0 && n.negative {
		return math.Copysign(0, -1)
	}
	return x
}

// roundBlock rounds the numbers as one line of a format whose values share scales.
func roundBlock(w io.Writer, p quant.Point, numbers []exactNumber, d quant.Draws, asJSON bool) error {
	src, dst := make([]float64, len(numbers)), make([]float64, len(numbers))
	for i, n := range numbers {
		switch {
		case n.kind == quant.NotANumber:
			src[i] = math.NaN()
		case n.kind == quant.Infinite:
			src[i] = math.Inf(map[bool]int{false: 1, true: -1}[n.negative])
		default:
			src[i], _ = n.value.Float64() // tensors hold binary64
		}
	}
	var counts quant.Counts
	scale := quant.RoundTensor(dst, src, quant.Shape{Outer: 1, Axis: len(src), Inner: 1}, &p, d, 0, &counts)
	if asJSON {
		enc := json.NewEncoder(w)
		for i, n := range numbers {
			err := enc.Encode(map[string]any{
				"value": n.jsonValue(), "text": n.text, "result": jsonNumber(dst[i] * scale),
				"term": jsonNumber(dst[i]), "scale": scale, "format": p.Format.String(),
			})
			if err != nil {
				return err
			}
		}
		return nil
	}
	fmt.Fprintf(w, "%s, %s; the numbers are one line of a tensor, from binary64; factor of the whole tensor %s\n", p.Format, p.Rounding, word64(scale))
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "value\tresult")
	for i, n := range numbers {
		fmt.Fprintf(t, "%s\t%s\n", n.text, word64(dst[i]*scale))
	}
	return t.Flush()
}
