package main

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"math/big"
	"strconv"

	"ulpine/quant"
	"ulpine/quant/oracle"
)

// traceLine is one addition of a sum.
type traceLine struct {
	where        string
	term         int        // -1: no term
	a, b         float64    // the operands of the term
	exact        quant.Real // their product
	added        quant.Real // what is added: the rounded product, a finished chunk, a node
	sum          float64    // the partial sum after the addition
	hasPrefix    bool       // the line is the sum of the first terms, in an order without a walk here
	scaledFactor float64    // the factor of a scaling, 0 for additions
}

// tracer performs the additions of one element once more, one by one, by the
// definition of the order, with the random words that the product's additions have.
type tracer struct {
	acc          quant.Accumulate
	terms, sums  quant.Streams
	i, j         uint32
	a, b         []float64
	lines        []traceLine
	lastAddition int
}

// traceOf returns the additions of the traced element, and fails where their end is
// not the element that the multiplier formed.
func traceOf[T quant.Element](m *matmulJob, p quant.Product[T]) ([]traceLine, error) {
	t := &tracer{acc: m.acc, terms: p.Terms, sums: p.Sums, i: uint32(m.traceRow), j: uint32(m.traceCol), lastAddition: m.k - 1}
	for k := range m.k {
		t.a = append(t.a, float64(p.A.At(m.traceRow, k)))
		t.b = append(t.b, float64(p.B.(quant.Matrix[T]).At(k, m.traceCol)))
	}
	s, err := t.total()
	if err != nil {
		return prefixes(m, p)
	}
	if p.Scale != nil {
		scale := p.Scale[m.traceRow]
		s = t.round(&t.acc.Sum, quant.ExactProduct(scale, s), t.lastAddition+1)
		t.lines = append(t.lines, traceLine{where: "scale", term: -1, scaledFactor: scale, sum: s})
	}
	if got := p.C[m.traceRow*m.j+m.traceCol]; !sameElement(T(s), got) {
		return nil, fmt.Errorf("a defect in ulpine itself: the additions one by one give %v, the product has %v", s, got)
	}
	return t.lines, nil
}

// round rounds to a point of the sum for addition k, zero as +0.
func (t *tracer) round(p *quant.Point, x quant.Real, k int) float64 {
	var word uint32
	if p.Rounding.Mode == quant.Stochastic {
		word = t.sums.Word(uint32(k), t.i, t.j)
	}
	if t.acc.Through32 {
		single := quant.Point{Format: quant.Binary32}
		v, _ := single.Round(x, 0)
		x = quant.Exactly(v)
	}
	v, _ := p.Round(x, word)
	if v == 0 {
		return 0
	}
	return v
}

// product is the exact product of term k and what the product point makes of it.
func (t *tracer) product(k int) (exact, rounded quant.Real) {
	exact = quant.ExactProduct(t.a[k], t.b[k])
	p := t.acc.Product
	if p == nil {
		return exact, exact
	}
	var word uint32
	if p.Rounding.Mode == quant.Stochastic {
		word = t.terms.Word(uint32(k), t.i, t.j)
	}
	v, _ := p.Round(exact, word)
	if v == 0 {
		v = 0
	}
	return exact, quant.Exactly(v)
}

// total adds the terms in their order.
func (t *tracer) total() (float64, error) {
	if !plainDraws(t.acc) {
		return 0, fmt.Errorf("random bits that are not each addition's own")
	}
	if t.acc.Order.Kind == quant.Wide {
		return t.wide()
	}
	order := oracle.Order{K: t.acc.Order.K}
	switch t.acc.Order.Kind {
	case quant.Sequential, quant.Chunk, quant.Pairwise, quant.Lanes:
		order.Kind = kindWord(t.acc.Order)
	default:
		return 0, fmt.Errorf("no walk of order %s", t.acc.Order)
	}
	s, err := oracle.Walk(order, len(t.a), quant.Real{}, func(k int) quant.Real { _, x := t.product(k); return x }, t.add)
	if err != nil {
		return 0, err
	}
	v, _ := (&quant.Point{Format: quant.Binary64}).Round(s, 0) // a binary64 number already
	return v, nil
}

// plainDraws reports whether every rounding of a sum has random bits of its own, as
// quant.Streams.Word draws them.
func plainDraws(a quant.Accumulate) bool {
	for _, p := range []*quant.Point{a.Product, &a.Sum, a.Outer} {
		if p != nil && p.Rounding.Source != (quant.Source{}) {
			return false
		}
	}
	return true
}

// kindWord is the order's word without its number.
func kindWord(o quant.Order) string {
	return map[quant.OrderKind]string{
		quant.Sequential: "sequential", quant.Chunk: "chunk", quant.Pairwise: "pairwise", quant.Lanes: "lanes",
	}[o.Kind]
}

// add performs one addition and records it.
func (t *tracer) add(s oracle.Step, x, y quant.Real) quant.Real {
	p := &t.acc.Sum
	if s.Outer && t.acc.Outer != nil {
		p = t.acc.Outer
	}
	t.lastAddition = max(t.lastAddition, s.Number)
	line := traceLine{where: s.Where, term: s.Term, added: y}
	if s.Term >= 0 {
		line.a, line.b = t.a[s.Term], t.b[s.Term]
		line.exact, _ = t.product(s.Term)
	}
	line.sum = t.round(p, x.Add(y), s.Number)
	t.lines = append(t.lines, line)
	return quant.Exactly(line.sum)
}

// wide adds the terms exactly and rounds once; its partial sums are shown in
// binary64.
func (t *tracer) wide() (float64, error) {
	total := new(big.Rat)
	for k := range t.a {
		exact, rounded := t.product(k)
		if rounded.Kind != quant.Finite {
			return 0, fmt.Errorf("a term is not finite")
		}
		total.Add(total, ratOfReal(rounded))
		partial, _ := total.Float64()
		t.lines = append(t.lines, traceLine{where: "exact", term: k, a: t.a[k], b: t.b[k], exact: exact, added: rounded, sum: partial})
	}
	s := t.round(&t.acc.Sum, realOf(total), len(t.a))
	t.lastAddition = len(t.a)
	t.lines = append(t.lines, traceLine{where: "rounded once", term: -1, sum: s})
	return s, nil
}

// prefixes are the sums of the first k terms, each as a product of its own: what
// can be said of orders and operands that have no walk here.
func prefixes[T quant.Element](m *matmulJob, p quant.Product[T]) ([]traceLine, error) {
	mul, err := quant.NewMultiplier[T](m.acc)
	if err != nil {
		return nil, err
	}
	b := p.B.(quant.Matrix[T])
	var lines []traceLine
	for n := range m.k {
		q := p
		// The traced row and column keep their numbers, which the random words depend on.
		q.I, q.J, q.K, q.FirstJ = m.traceRow+1, 1, n+1, p.FirstJ+uint64(m.traceCol)
		q.B = quant.Matrix[T]{Data: b.Data[m.traceCol*b.Col:], Row: b.Row, Col: b.Col}
		q.C = make([]T, q.I)
		mul.Mul(q, nil, nil)
		x, y := float64(p.A.At(m.traceRow, n)), float64(b.At(n, m.traceCol))
		exact := quant.ExactProduct(x, y)
		lines = append(lines, traceLine{
			where: "first terms", term: n, a: x, b: y, exact: exact, hasPrefix: true, sum: float64(q.C[m.traceRow]),
		})
	}
	return lines, nil
}

// ratOfReal returns a finite real that was not cut off.
func ratOfReal(r quant.Real) *big.Rat {
	n := new(big.Int).SetUint64(r.Hi)
	n.Lsh(n, 64).Add(n, new(big.Int).SetUint64(r.Lo))
	if r.Neg {
		n.Neg(n)
	}
	x := new(big.Rat).SetInt(n)
	p := new(big.Rat).SetInt(new(big.Int).Lsh(big.NewInt(1), uint(max(r.Exp, -r.Exp))))
	if r.Exp < 0 {
		return x.Quo(x, p)
	}
	return x.Mul(x, p)
}

// realWord prints a real exactly, as a hexadecimal float.
func realWord(r quant.Real) string {
	switch {
	case r.Kind == quant.NotANumber:
		return "nan"
	case r.Kind == quant.Infinite && r.Neg:
		return "-inf"
	case r.Kind == quant.Infinite:
		return "inf"
	case r.IsZero() && r.Neg:
		return "-0x0p+00"
	case r.IsZero():
		return "0x0p+00"
	}
	return hexExact(ratOfReal(r))
}

// realDecimal prints a real that binary64 holds in decimal, else exactly.
func realDecimal(r quant.Real) string {
	v, _ := (&quant.Point{Format: quant.Binary64}).Round(r, 0)
	if r.Kind != quant.Finite || quant.Exactly(v) == r || v == 0 && r.IsZero() {
		return word64(v)
	}
	return realWord(r)
}

// writeTrace writes the lines as CSV to the user's file or to standard output.
func (m *matmulJob) writeTrace(out io.Writer, lines []traceLine) error {
	if m.traceTo == "" {
		return traceCSV(out, lines)
	}
	return writeFile(m.traceTo, func(w io.Writer) error { return traceCSV(w, lines) })
}

// traceCSV writes a line an addition: its place in the order, the term's number and
// operands, the exact product (hexadecimal), what is added, and the sum so far.
func traceCSV(out io.Writer, lines []traceLine) error {
	w := bufio.NewWriter(out)
	fmt.Fprintln(w, "step,where,k,a,b,product_exact,added,sum,sum_hex")
	for n, l := range lines {
		k, a, b, exact, added := "", "", "", "", ""
		if l.term >= 0 {
			k, a, b, exact = strconv.Itoa(l.term), word64(l.a), word64(l.b), realWord(l.exact)
		}
		switch {
		case l.scaledFactor != 0:
			added = "times " + word64(l.scaledFactor)
		case !l.hasPrefix && l.where != "rounded once":
			added = realDecimal(l.added)
		}
		fmt.Fprintf(w, "%d,%s,%s,%s,%s,%s,%s,%s,%s\n", n, l.where, k, a, b, exact, added, word64(l.sum), hexWord(l.sum))
	}
	return w.Flush()
}

// hexWord prints a number as a hexadecimal float.
func hexWord(x float64) string {
	if x != x || math.IsInf(x, 0) {
		return word64(x)
	}
	return strconv.FormatFloat(x, 'x', -1, 64)
}
