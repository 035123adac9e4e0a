package main

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"ulpine/quant"
)

// maxTable is the widest code whose table is printed, in bits.
const maxTable = 8

func newNumber() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "number NAME",
		Short: "Show the figures of a number format, and the codes of a narrow one",
		Long: `Show a number format: width, largest and least values, unit roundoff, dynamic
range, specials, what overflow does by default, and every code of a format of 8
bits or fewer.

Formats: fp16, bf16, fp32, fp64; E4M3 and E5M2 of OCP; the MX elements E3M2, E2M3,
E2M1; EeMm for any other split of exponent and fraction bits, options in
parentheses: E6M9(bias=15,subnormals=flush).`,
		Args: exactly("NAME"),
	}
	asJSON := cmd.Flags().Bool("json", false, "one JSON object")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		f, err := quant.ParseFormat(args[0])
		if err != nil {
			return badInput(err)
		}
		figures := figuresOf(f)
		if *asJSON {
			return json.NewEncoder(cmd.OutOrStdout()).Encode(figures)
		}
		return figures.print(cmd.OutOrStdout(), f)
	}
	return cmd
}

// figures are what a reader asks of a format first. Values that a family does not
// have are left out.
type figures struct {
	Name            string      `json:"name"`
	Bits            int         `json:"bits"`
	Exponent        int         `json:"exponent_bits"`
	Fraction        int         `json:"fraction_bits"`
	Bias            *int        `json:"bias,omitempty"`
	Max             float64     `json:"max"`
	Lowest          float64     `json:"lowest"`
	LeastNormal     *float64    `json:"least_normal,omitempty"`
	LeastSubnormal  *float64    `json:"least_subnormal,omitempty"`
	LeastPositive   float64     `json:"least_positive"`
	UnitRoundoff    *float64    `json:"unit_roundoff,omitempty"`
	Step            *float64    `json:"step,omitempty"`
	RangeDecibels   float64     `json:"dynamic_range_db"`
	RangeBinades    float64     `json:"dynamic_range_binades"`
	Infinity        bool        `json:"infinity"`
	NaN             bool        `json:"nan"`
	NegativeZero    bool        `json:"negative_zero"`
	Flush           bool        `json:"subnormals_flushed"`
	SharedScale     bool        `json:"shared_scale"`
	DefaultOverflow string      `json:"default_overflow"`
	Codes           []codeValue `json:"codes,omitempty"`
}

// codeValue is one line of the table of codes.
type codeValue struct {
	Code  string `json:"code"`
	Value any    `json:"value"`
	value float64
}

func figuresOf(f quant.Format) figures {
	l := f.Limits()
	g := figures{
		Name: f.String(), Bits: l.Bits, Exponent: l.Exponent, Fraction: l.Fraction,
		Max: l.Max, Lowest: l.Lowest, LeastPositive: l.MinSubnormal,
		RangeDecibels: 20 * (math.Log10(l.Max) - math.Log10(l.MinSubnormal)),
		RangeBinades:  math.Log2(l.Max) - math.Log2(l.MinSubnormal),
		Infinity:      l.HasInfinity, NaN: l.HasNaN, NegativeZero: !l.OneZero, Flush: l.Flush,
		DefaultOverflow: l.DefaultOverflow.String(),
	}
	_, g.SharedScale = f.(quant.Blocked)
	finest, coarsest, known := places(f)
	_, float := f.(quant.Float)
	_, draft := f.(quant.Draft)
	switch {
	case float && known, draft:
		bias, u := 1-math.Ilogb(l.MinNormal), math.Ldexp(1, -1-l.Fraction)
		if l.MinNormal == 0 { // a format of subnormal values alone
			bias = 1 - l.Fraction - finest
		} else {
			g.LeastNormal, g.UnitRoundoff = &l.MinNormal, &u
		}
		g.Bias = &bias
		if !l.Flush && l.MinSubnormal != l.MinNormal {
			g.LeastSubnormal = &l.MinSubnormal
		}
	case known && finest == coarsest:
		step := math.Ldexp(1, finest)
		g.Step = &step
	}
	g.Codes = codesOf(f)
	return g
}

// codesOf lists every code of a narrow format.
func codesOf(f quant.Format) []codeValue {
	c, ok := f.(coder)
	bits := f.Limits().Bits
	if !ok || bits > maxTable {
		return nil
	}
	var all []codeValue
	for code := range uint64(1) << bits {
		v := c.Decode(code)
		all = append(all, codeValue{hexCode(code, bits), jsonNumber(v), v})
	}
	return all
}

func (g *figures) print(w io.Writer, f quant.Format) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	row := func(name, format string, a ...any) { fmt.Fprintf(t, "%s\t%s\n", name, fmt.Sprintf(format, a...)) }
	row("format", "%s", g.Name)
	switch {
	case g.Bias != nil:
		row("width", "%d bits: sign, %d exponent, %d fraction; bias %d", g.Bits, g.Exponent, g.Fraction, *g.Bias)
	default:
		row("width", "%d bits", g.Bits)
	}
	if g.SharedScale {
		row("scale", "%s", scaleWords(f))
	}
	row("largest", "%s", valueAndCode(f, g.Max))
	if g.Lowest != -g.Max {
		row("lowest", "%s", valueAndCode(f, g.Lowest))
	}
	if g.LeastNormal != nil {
		row("least normal", "%s", valueAndCode(f, *g.LeastNormal))
	}
	switch {
	case g.LeastSubnormal != nil:
		row("least subnormal", "%s", valueAndCode(f, *g.LeastSubnormal))
	case g.Flush:
		row("least subnormal", "none: subnormal results become zero")
	case g.LeastNormal == nil || *g.LeastNormal != g.LeastPositive:
		row("least above zero", "%s", valueAndCode(f, g.LeastPositive))
	}
	if g.UnitRoundoff != nil {
		row("unit roundoff", "%s (to nearest)", power(*g.UnitRoundoff))
	}
	if g.Step != nil {
		row("step", "%s", power(*g.Step))
	}
	row("dynamic range", "%.1f dB, %.2f binades, from least to largest value", g.RangeDecibels, g.RangeBinades)
	row("specials", "%s", g.specials())
	row("overflow", "%s by default", overflowSentence(g.DefaultOverflow))
	if err := t.Flush(); err != nil {
		return err
	}
	return g.printCodes(w)
}

// scaleWords says who shares the scale of a format.
func scaleWords(f quant.Format) string {
	b, ok := f.(quant.Block)
	if !ok {
		return "shared by the values of a tensor or channel; the figures are those of the codes"
	}
	s := b.Spec()
	return fmt.Sprintf("shared by blocks of %d, in %s; elements in %s, which the figures are of", s.Size, s.Scale, s.Element)
}

// printCodes prints the table of codes, the fields of a floating-point code apart.
func (g *figures) printCodes(w io.Writer) error {
	if len(g.Codes) == 0 {
		return nil
	}
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "\ncode\tbits\tvalue")
	for code, c := range g.Codes {
		bits := fmt.Sprintf("%0*b", g.Bits, code)
		if g.Bias != nil {
			bits = strings.TrimRight(bits[:1]+" "+bits[1:1+g.Exponent]+" "+bits[1+g.Exponent:], " ")
		}
		fmt.Fprintf(t, "%s\t%s\t%s\n", c.Code, bits, word64(c.value))
	}
	return t.Flush()
}

// specials lists what besides finite numbers has a code.
func (g *figures) specials() string {
	var words []string
	if g.Infinity {
		words = append(words, "infinities")
	}
	if g.NaN {
		words = append(words, "NaN")
	}
	if g.NegativeZero {
		words = append(words, "negative zero")
	}
	if len(words) == 0 {
		return "none"
	}
	return strings.Join(words, ", ")
}

// overflowSentence says where results beyond the range go.
func overflowSentence(policy string) string {
	switch policy {
	case "infinity":
		return "to infinity"
	case "saturate":
		return "to the largest finite value (saturate)"
	case "nan":
		return "to NaN"
	case "wrap":
		return "wraps around"
	}
	return policy
}

// valueAndCode prints a value as decimal, power of two where it is one, and code.
func valueAndCode(f quant.Format, x float64) string {
	s := word64(x)
	if p := power(x); p != s {
		s += " = " + p
	}
	if code, ok := codeOf(f, x); ok {
		s += ", code " + code
	}
	return s
}

// power prints a power of two as such.
func power(x float64) string {
	if m, e := math.Frexp(x); m == 0.5 && (e > 4 || e < 1) {
		return fmt.Sprintf("2^%d", e-1)
	}
	return word64(x)
}
