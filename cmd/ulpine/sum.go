package main

import (
	"fmt"
	"io"
	"math"
	"math/big"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"ulpine/quant"
)

func newSum() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "sum --sum F [--sum G ...] [--terms T] [--length N]",
		Short: "Feed a long sum through accumulators: where does each stall?",
		Long: `Add terms in several accumulators and print the computed sum and its ratio to the
exact one against length.

--sum is a format, or a whole accumulation: "bf16 stochastic(8)",
"fp16; chunk(64); outer fp32", "fp16; through binary32". --terms is ones, harmonic
(1, 1/2, 1/3, ...), uniform (between 0 and 1), tenth (0.1 each time), or an NPY file
whose values are added in their order. Terms are rounded, nearest-even, to the
accumulator's own format, or to --operands; the exact sum is that of the rounded
terms. An accumulator has stalled when none of the last half of the terms changed
it.`,
		Example: `  ulpine sum --terms harmonic --length 4096 --sum bf16 --sum fp16 --sum "bf16 stochastic(8)"`,
		Args:    exactly(),
	}
	a := arithmeticFlags(cmd)
	f := cmd.Flags()
	sums := f.StringArray("sum", nil, "an `accumulator`; give the flag several times")
	terms := f.String("terms", "ones", "what is added: ones, harmonic, uniform, tenth, or an NPY `file`")
	length := f.Int("length", 0, "the `number` of terms (default 65536, or all of a file)")
	order := f.String("order", "", "`order` of additions where --sum does not say it (default sequential)")
	operands := f.String("operands", "", "round the terms to this `format` instead of the accumulator's")
	figure := f.String("figure", "", "draw computed / exact against length to this SVG `file`")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		if err := required(cmd, "sum"); err != nil {
			return err
		}
		s, err := newSumStudy(a, *sums, *order, *operands, *terms, *length)
		if err != nil {
			return err
		}
		if err := s.run(); err != nil {
			return err
		}
		if err := s.print(cmd.OutOrStdout()); err != nil {
			return err
		}
		if *figure == "" {
			return nil
		}
		if err := writeFile(*figure, s.draw); err != nil {
			return err
		}
		_, err = fmt.Fprintln(cmd.OutOrStdout(), "figure written to", *figure)
		return err
	}
	return cmd
}

// accumulator is one sum of the study.
type accumulator struct {
	label string
	acc   quant.Accumulate
	terms quant.Point // what terms are rounded to
	sums  []float64   // computed, one a length
	exact []float64   // the exact sum in binary64, one a length
	ratio []float64   // computed / exact; NaN where the exact sum is zero
	last  int         // the last term, or listed length, that changed the sum
	known bool        // last is a term, not a length
}

// sumStudy is a comparison of accumulators on the same terms.
type sumStudy struct {
	source  termSource
	length  int
	lengths []int // 1, 2, 4, ... and the length itself
	draws   quant.Streams
	all     []*accumulator
}

// newSumStudy checks what the user asks for.
func newSumStudy(a *arithmetic, sums []string, order, operands, terms string, length int) (*sumStudy, error) {
	s := &sumStudy{draws: quant.Streams{Row: a.draws(siteSumRow), Column: a.draws(siteSumColumn)}}
	var err error
	if s.source, err = newTermSource(terms, a.seed); err != nil {
		return nil, err
	}
	if s.length, err = s.source.length(length); err != nil {
		return nil, badInput(err)
	}
	for n := 1; n < s.length; n *= 2 {
		s.lengths = append(s.lengths, n)
	}
	s.lengths = append(s.lengths, s.length)
	for _, text := range sums {
		one, err := newAccumulator(a, text, order, operands)
		if err != nil {
			return nil, err
		}
		s.all = append(s.all, one)
	}
	return s, nil
}

// newAccumulator reads one --sum under the other flags.
func newAccumulator(a *arithmetic, text, order, operands string) (*accumulator, error) {
	one := &accumulator{label: text}
	parts := strings.Split(text, ";")
	acc, err := quant.ParseAccumulate("sum " + text)
	if err != nil {
		return nil, badInput(fmt.Errorf("--sum %q: %w", text, err))
	}
	if len(strings.Fields(parts[0])) == 1 {
		if acc.Sum, err = a.point(strings.TrimSpace(parts[0]), quant.DefaultRandomBits); err != nil {
			return nil, err
		}
	}
	if acc.Product != nil {
		return nil, badInput(fmt.Errorf("--sum %q: there are no products here; use ulpine matmul", text))
	}
	if order != "" && acc.Order == (quant.Order{}) && !strings.Contains(text, "sequential") {
		if acc.Order, err = quant.ParseOrder(order); err != nil {
			return nil, badInput(err)
		}
	}
	if _, shared := acc.Sum.Format.(quant.Blocked); shared {
		return nil, badInput(fmt.Errorf("--sum %q: values of this format share scales: sums cannot have it", text))
	}
	one.acc, one.terms = acc, quant.Point{Format: acc.Sum.Format}
	if operands != "" {
		if one.terms.Format, err = quant.ParseFormat(operands); err != nil {
			return nil, badInput(err)
		}
	}
	return one, badInput(acc.Check())
}

// run feeds every accumulator.
func (s *sumStudy) run() error {
	for _, a := range s.all {
		terms := s.source.terms(s.length, a.terms)
		a.exact = exactSums(terms, s.lengths)
		var err error
		if a.acc.Order.Kind == quant.Sequential && plainDraws(a.acc) {
			a.sequential(terms, s.lengths, s.draws)
		} else if err = a.byLength(terms, s.lengths, s.draws); err != nil {
			return err
		}
		for i, sum := range a.sums {
			r := math.NaN()
			if a.exact[i] != 0 {
				r = sum / a.exact[i]
			}
			a.ratio = append(a.ratio, r)
		}
	}
	return nil
}

// sequential adds term by term, which shows the last one that changed the sum.
func (a *accumulator) sequential(terms []float64, lengths []int, d quant.Streams) {
	t := tracer{acc: a.acc, sums: d}
	s, at := 0.0, 0
	a.known = true
	for k, x := range terms {
		next := t.round(&a.acc.Sum, quant.Exactly(s).Add(quant.Exactly(x)), k)
		if !sameBits(next, s) {
			a.last = k + 1
		}
		s = next
		if k+1 == lengths[at] {
			a.sums = append(a.sums, s)
			at++
		}
	}
}

// byLength forms the sum of the first terms anew for every length: other orders have
// no running sum.
func (a *accumulator) byLength(terms []float64, lengths []int, d quant.Streams) error {
	m, err := quant.NewMultiplier[float64](a.acc)
	if err != nil {
		return badInput(err)
	}
	for i, n := range lengths {
		sum := make([]float64, 1)
		m.SumRows(sum, quant.Matrix[float64]{Data: terms, Row: n, Col: 1}, 1, n, d, nil)
		a.sums = append(a.sums, sum[0])
		if i == 0 || !sameBits(sum[0], a.sums[i-1]) {
			a.last = n
		}
	}
	return nil
}

// exactSums are the exact sums of the first terms, rounded once to binary64; NaN
// where a term is not finite. 2200 bits hold every sum of binary64 numbers.
func exactSums(terms []float64, lengths []int) []float64 {
	s := new(big.Float).SetPrec(2200)
	x := new(big.Float)
	finite, at := true, 0
	var all []float64
	for k, v := range terms {
		if finite = finite && !math.IsNaN(v) && !math.IsInf(v, 0); finite {
			s.Add(s, x.SetFloat64(v))
		}
		if k+1 == lengths[at] {
			f, _ := s.Float64()
			if !finite {
				f = math.NaN()
			}
			all = append(all, f)
			at++
		}
	}
	return all
}

// stalled reports whether the last half of the terms left the sum as it was.
func (a *accumulator) stalled(length int) bool { return length > 1 && a.last <= length/2 }

// verdict says where the accumulator stalls.
func (a *accumulator) verdict(length int) string {
	end := word64(a.sums[len(a.sums)-1])
	switch {
	case a.stalled(length) && a.known:
		return fmt.Sprintf("stalls at %s: term %d is the last that changes it", end, a.last)
	case a.stalled(length):
		return fmt.Sprintf("stalls at %s: no longer sum than that of %d terms differs", end, a.last)
	}
	return fmt.Sprintf("does not stall within %d terms", length)
}

// print prints the table and the verdicts.
func (s *sumStudy) print(w io.Writer) error {
	fmt.Fprintf(w, "%s, %d terms; computed sum and computed / exact\n", s.source.name(), s.length)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprint(t, "length")
	for _, a := range s.all {
		fmt.Fprintf(t, "\t%s\t", a.label)
	}
	fmt.Fprintln(t)
	for i, n := range s.lengths {
		fmt.Fprint(t, n)
		for _, a := range s.all {
			ratio := "-"
			if !math.IsNaN(a.ratio[i]) {
				ratio = strconv.FormatFloat(a.ratio[i], 'f', 5, 64)
			}
			fmt.Fprintf(t, "\t%s\t%s", word64(a.sums[i]), ratio)
		}
		fmt.Fprintln(t)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	fmt.Fprintln(w)
	for _, a := range s.all {
		fmt.Fprintf(w, "%s: %s\n", a.label, a.verdict(s.length))
	}
	return nil
}
