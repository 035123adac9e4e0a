package main

import (
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"ulpine/datasets/npy"
	"ulpine/quant"
)

// The sites of a product's random words: stored operands draw word n of their own
// stream for element n; inside sums rows and columns have streams of their own.
const (
	siteA = iota + 1
	siteB
	siteTermRow
	siteTermColumn
	siteSumRow
	siteSumColumn
)

// maxTerms is the longest sum of package quant.
const maxTerms = 1<<25 - 1

func newMatmul() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "matmul A.npy B.npy --sum F --out C.npy",
		Short: "Multiply two matrices with every product and partial sum rounded",
		Long: `Multiply two matrices (NPY files of float32 or float64) with every product and
every partial sum rounded as a datapath would, and write the result: float32, or
float64 where the sum's format needs it.

--operands rounds the inputs first; where a format has a scale per channel, the rows
of A are the channels, and B has one scale. --product is exact (one rounding a step) or a
format; --outer is the format in which finished chunks are added. A format may be
followed by a rounding and an overflow policy of its own ("fp16 toward-zero
saturate"); the flags hold for the others.

Random bits come from the stream of roundings of --seed at step 0 and phase 0;
sites are 1 for the elements of A, 2 for those of B, 3 and 4 for rows and columns
in products, 5 and 6 in sums (go doc ulpine/quant says how they are used).

--trace i,j writes every addition of one element of the result as CSV.`,
		Example: `  ulpine matmul a.npy b.npy --sum fp16 --order "chunk(64)" --outer fp32 --out c.npy
  ulpine matmul a.npy b.npy --operands E4M3 --product exact --sum E6M9 --trace 0,0`,
		Args: exactly("A.npy", "B.npy"),
	}
	a := arithmeticFlags(cmd)
	j := matmulJob{arithmetic: a}
	f := cmd.Flags()
	f.StringVar(&j.operands, "operands", "", "round A and B to this `format` first")
	f.StringVar(&j.product, "product", "exact", "`format` of products, or exact")
	f.StringVar(&j.sum, "sum", "", "`format` of partial sums")
	f.StringVar(&j.outer, "outer", "", "`format` in which finished chunks are added (default that of --sum)")
	f.StringVar(&j.order, "order", "sequential", "`order` of additions: sequential, \"chunk(k)\", \"lanes(k)\", pairwise, wide")
	f.StringVar(&j.through, "through", "", "binary32: the adder first rounds to binary32, then to the sum's format")
	f.StringVar(&j.out, "out", "", "write the result to this NPY `file`")
	f.StringVar(&j.trace, "trace", "", "row and column `i,j` of the element whose additions are written, counted from 0")
	f.StringVar(&j.traceTo, "trace-to", "", "write the trace to this CSV `file` (default standard output)")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		if err := required(cmd, "sum"); err != nil {
			return err
		}
		if j.out == "" && j.trace == "" {
			return badInput(fmt.Errorf("%s needs --out C.npy, or --trace i,j", cmd.CommandPath()))
		}
		return j.run(args[0], args[1], cmd.OutOrStdout(), cmd.ErrOrStderr())
	}
	return cmd
}

// matmulJob is one product of matrices as the user asks for it.
type matmulJob struct {
	*arithmetic
	operands, product, sum, outer, order, through, out, trace, traceTo string

	first      *quant.Point // of the operands; nil: as they are
	acc        quant.Accumulate
	i, j, k    int // C is i x j, sums have k terms
	traceRow   int
	traceCol   int
	wideResult bool
}

// run checks everything before it computes anything.
func (m *matmulJob) run(fileA, fileB string, out, errw io.Writer) error {
	if err := m.readPoints(); err != nil {
		return err
	}
	a, err := readMatrix(fileA)
	if err != nil {
		return err
	}
	b, err := readMatrix(fileB)
	if err != nil {
		return err
	}
	m.i, m.k, m.j = a.Shape[0], a.Shape[1], b.Shape[1]
	switch {
	case b.Shape[0] != m.k:
		return badInput(fmt.Errorf("shapes do not match: %s is %dx%d and %s is %dx%d; the %d columns of the first must be as many as the %d rows of the second",
			fileA, m.i, m.k, fileB, b.Shape[0], m.j, m.k, b.Shape[0]))
	case m.k > maxTerms:
		return badInput(fmt.Errorf("sums of %d terms: at most %d", m.k, maxTerms))
	}
	if err := m.readTrace(); err != nil {
		return err
	}
	if err := m.checkBits(a.Wide || b.Wide); err != nil {
		return err
	}
	m.wideResult = !quant.Fits32(m.acc.Sum.Format) || m.acc.Outer != nil && !quant.Fits32(m.acc.Outer.Format)
	raw := m.first == nil && (a.Wide || b.Wide)
	if m.wideResult || raw || m.first != nil && !quant.Fits32(m.first.Format) {
		return multiply[float64](m, a, b, out, errw)
	}
	return multiply[float32](m, a, b, out, errw)
}

// readPoints reads the formats and the order.
func (m *matmulJob) readPoints() error {
	scalar := func(text, flag string) (*quant.Point, error) {
		p, err := m.spelt(text, quant.DefaultRandomBits)
		if err != nil {
			return nil, err
		}
		if _, shared := p.Format.(quant.Blocked); shared {
			return nil, badInput(fmt.Errorf("--%s %s: values of this format share scales: only operands can have it", flag, p.Format))
		}
		return &p, nil
	}
	if m.operands != "" {
		p, err := m.spelt(m.operands, quant.DefaultRandomBits)
		if err != nil {
			return err
		}
		m.first = &p
	}
	var err error
	if m.product != "exact" {
		if m.acc.Product, err = scalar(m.product, "product"); err != nil {
			return err
		}
	}
	sum, err := scalar(m.sum, "sum")
	if err != nil {
		return err
	}
	m.acc.Sum = *sum
	if m.outer != "" {
		if m.acc.Outer, err = scalar(m.outer, "outer"); err != nil {
			return err
		}
	}
	if m.acc.Order, err = quant.ParseOrder(m.order); err != nil {
		return badInput(err)
	}
	if m.acc.Outer != nil && m.acc.Order.Kind != quant.Chunk {
		return badInput(fmt.Errorf("--outer with order %s: only chunks are added in an outer format, as in --order \"chunk(64)\"", m.acc.Order))
	}
	if m.through != "" && !strings.EqualFold(m.through, "binary32") && !strings.EqualFold(m.through, "fp32") {
		return badInput(fmt.Errorf("--through %q: only binary32 is known", m.through))
	}
	m.acc.Through32 = m.through != ""
	return badInput(m.acc.Check())
}

// checkBits refuses random bits that no rounding of the product can use, and lowers
// a default. wide says that an input is binary64.
func (m *matmulJob) checkBits(wide bool) error {
	place := -149 // of binary32 numbers
	if wide {
		place = -1074
	}
	var err error
	usable, known := false, true
	check := func(what string, p *quant.Point, finest int) {
		if p == nil || p.Rounding.Mode != quant.Stochastic {
			return
		}
		if !m.given() {
			lowerBits(p, finest)
		}
		if e := usableBits(what, p, finest); e != nil {
			err = e
		} else {
			usable = true
		}
	}
	of := func(f quant.Format) int {
		finest, _, ok := places(f)
		known = known && ok
		return finest
	}
	if m.first != nil {
		check("rounding the operands", m.first, place)
		place = of(m.first.Format)
	}
	place *= 2
	if known {
		check("rounding exact products", m.acc.Product, place)
		if m.acc.Product != nil {
			place = of(m.acc.Product.Format)
		}
	}
	if known {
		check("rounding sums", &m.acc.Sum, place)
	}
	if usable || !known {
		return nil
	}
	return err
}

// readTrace reads --trace.
func (m *matmulJob) readTrace() error {
	if m.trace == "" {
		return nil
	}
	row, col, ok := strings.Cut(m.trace, ",")
	var errRow, errCol error
	m.traceRow, errRow = strconv.Atoi(strings.TrimSpace(row))
	m.traceCol, errCol = strconv.Atoi(strings.TrimSpace(col))
	if !ok || errRow != nil || errCol != nil {
		return badInput(fmt.Errorf("--trace %q: want row and column, as in --trace 0,2", m.trace))
	}
	if m.traceRow < 0 || m.traceRow >= m.i || m.traceCol < 0 || m.traceCol >= m.j {
		return badInput(fmt.Errorf("--trace %s: the result is %dx%d, its rows and columns are counted from 0", m.trace, m.i, m.j))
	}
	return nil
}

// readMatrix reads a matrix of two axes.
func readMatrix(file string) (*npy.Array, error) {
	a, err := readArray(file)
	if err != nil {
		return nil, err
	}
	if len(a.Shape) != 2 {
		return nil, badInput(fmt.Errorf("%s has the shape %s: a matrix has two axes", file, shapeWords(a.Shape)))
	}
	return a, nil
}

// readArray reads an NPY file; what is wrong with it is the input's fault.
func readArray(file string) (*npy.Array, error) {
	f, err := os.Open(file)
	if err != nil {
		return nil, badInput(err)
	}
	defer f.Close()
	a, err := npy.Read(f)
	if err != nil {
		return nil, badInput(fmt.Errorf("%s: %w", file, err))
	}
	return a, nil
}

// shapeWords prints a shape as (2, 3).
func shapeWords(shape []int) string {
	words := make([]string, len(shape))
	for i, d := range shape {
		words[i] = strconv.Itoa(d)
	}
	return "(" + strings.Join(words, ", ") + ")"
}

// multiply forms the product in tensors of T.
func multiply[T quant.Element](m *matmulJob, a, b *npy.Array, out, errw io.Writer) error {
	left, right := make([]T, len(a.Values)), make([]T, len(b.Values))
	var stored, products, sums quant.Counts
	factors := m.prepare(a, b, func(i int, x float64) { left[i] = T(x) }, func(i int, x float64) { right[i] = T(x) }, &stored)
	mul, err := quant.NewMultiplier[T](m.acc)
	if err != nil {
		return badInput(err)
	}
	p := quant.Product[T]{
		I: m.i, J: m.j, K: m.k,
		A: quant.Matrix[T]{Data: left, Row: m.k, Col: 1}, B: quant.Matrix[T]{Data: right, Row: m.j, Col: 1},
		C:     make([]T, m.i*m.j),
		Terms: quant.Streams{Row: m.draws(siteTermRow), Column: m.draws(siteTermColumn)},
		Sums:  quant.Streams{Row: m.draws(siteSumRow), Column: m.draws(siteSumColumn)},
	}
	if slices.ContainsFunc(factors, func(f float64) bool { return f != 1 }) {
		p.Scale = factors
	}
	mul.Mul(p, &products, &sums)
	report := out
	if m.trace != "" {
		if m.traceTo == "" {
			report = errw // standard output is the trace's
		}
		lines, err := traceOf(m, p)
		if err != nil {
			return err
		}
		if err := m.writeTrace(out, lines); err != nil {
			return err
		}
	}
	if m.out != "" {
		c := npy.Array{Shape: []int{m.i, m.j}, Wide: m.wideResult, Values: make([]float64, len(p.C))}
		for i, v := range p.C {
			c.Values[i] = float64(v)
		}
		if err := writeFile(m.out, func(w io.Writer) error { return npy.Write(w, &c) }); err != nil {
			return err
		}
	}
	return m.report(report, stored, products, sums)
}

// prepare rounds the operands, if it is asked for, hands them over and returns the
// factors of the finished sums of every row. The rows of A are its channels; B has
// one scale.
func (m *matmulJob) prepare(a, b *npy.Array, setA, setB func(int, float64), n *quant.Counts) []float64 {
	factors := make([]float64, m.i)
	for i := range factors {
		factors[i] = 1
	}
	left, right := a.Values, b.Values
	if m.first != nil {
		// The axis of the sums is the second of A and the first of B.
		left, right = make([]float64, len(a.Values)), make([]float64, len(b.Values))
		quant.RoundChannels(left, a.Values, quant.Shape{Outer: m.i, Axis: m.k, Inner: 1}, m.first, m.draws(siteA), 0, n, factors)
		f := quant.RoundTensor(right, b.Values, quant.Shape{Outer: 1, Axis: m.k, Inner: m.j}, m.first, m.draws(siteB), 0, n)
		for i := range factors {
			factors[i] = float64(factors[i] * f) // both are binary32 numbers: exact
		}
	}
	for i, v := range left {
		setA(i, v)
	}
	for i, v := range right {
		setB(i, v)
	}
	return factors
}

// report prints what was computed and what left its range.
func (m *matmulJob) report(w io.Writer, stored, products, sums quant.Counts) error {
	kind := "float32"
	if m.wideResult {
		kind = "float64"
	}
	fmt.Fprintf(w, "%dx%d times %dx%d; %s\n", m.i, m.k, m.k, m.j, m.acc)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "point\tformat\tresults\toverflow\tunderflow\tsaturated\tNaN")
	line := func(name string, p *quant.Point, n string, c quant.Counts, under string) {
		fmt.Fprintf(t, "%s\t%s\t%s\t%d\t%s\t%d\t%d\n", name, p.Format, n, c.Overflow, under, c.Saturated, c.NaN)
	}
	if m.first != nil {
		line("operands", m.first, strconv.Itoa(m.i*m.k+m.k*m.j), stored, strconv.FormatUint(stored.Underflow, 10))
	}
	if m.acc.Product != nil {
		line("products", m.acc.Product, fmt.Sprintf("%dx%dx%d", m.i, m.j, m.k), products, "-")
	}
	line("sums", &m.acc.Sum, fmt.Sprintf("%dx%d of %d terms", m.i, m.j, m.k), sums, "-")
	if err := t.Flush(); err != nil {
		return err
	}
	if m.out != "" {
		fmt.Fprintf(w, "%s written: %dx%d, %s\n", m.out, m.i, m.j, kind)
	}
	return nil
}

// sameElement reports equal bits of two values of a tensor.
func sameElement[T quant.Element](a, b T) bool {
	return math.Float64bits(float64(a)) == math.Float64bits(float64(b)) || a != a && b != b
}
