package main

import (
	"encoding/csv"
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"ulpine/datasets/npy"
	"ulpine/quant"
	"ulpine/quant/oracle"
)

// writeArray writes an NPY file into a directory and returns its name.
func writeArray(t *testing.T, dir, name string, wide bool, shape []int, values []float64) string {
	t.Helper()
	file := filepath.Join(dir, name)
	f, err := os.Create(file)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if err := npy.Write(f, &npy.Array{Shape: shape, Wide: wide, Values: values}); err != nil {
		t.Fatal(err)
	}
	return file
}

// oraclePoint is a rounding point in the oracle's words.
type oraclePoint struct {
	format *oracle.Format
	r      oracle.Rounding
}

func oraclePointOf(t *testing.T, text string) *oraclePoint {
	t.Helper()
	p, err := quant.ParsePoint(text)
	if err != nil {
		t.Fatal(err)
	}
	f, err := oracleOf(p.Format)
	if err != nil {
		t.Fatal(err)
	}
	return &oraclePoint{f, oracleRounding(p.Rounding)}
}

// round rounds a rational with the top bits of a word; the test data never leave
// the range.
func (p *oraclePoint) round(t *testing.T, x *big.Rat, word uint32) *big.Rat {
	t.Helper()
	draw := uint64(word >> (32 - max(p.r.Bits, 1)))
	v, _ := p.format.Round(x, false, p.r, "", draw)
	if math.IsNaN(v) || math.IsInf(v, 0) {
		t.Fatal("the test's data leave the range")
	}
	return new(big.Rat).SetFloat64(v)
}

// TestMatmulAgainstOracle forms products of matrices in every order and holds each
// element to additions in exact rationals.
func TestMatmulAgainstOracle(t *testing.T) {
	dir := t.TempDir()
	r := rand.New(rand.NewPCG(41, 42))
	orders := []string{"sequential", "chunk(3)", "lanes(4)", "pairwise", "wide", "chunk(100)", "lanes(1)"}
	points := []string{"fp16", "bf16", "fp32", "E6M9", "fp16 toward-zero", "bf16 to-odd", "fp16 stochastic(8)", "E6M9 stochastic(11,centred-even)", "fp32 up", "fp64"}
	for round := range 80 {
		i, k, j := 1+r.IntN(3), r.IntN(12), 1+r.IntN(3)
		draw := func(n int) []float64 {
			x := make([]float64, n)
			for k := range x {
				x[k] = float64(float32(math.Ldexp(float64(r.IntN(4095)-2047), -9-r.IntN(6))))
			}
			return x
		}
		a, b := draw(i*k), draw(k*j)
		fileA := writeArray(t, dir, "a.npy", round%3 == 0, []int{i, k}, a)
		fileB := writeArray(t, dir, "b.npy", round%5 == 0, []int{k, j}, b)
		order, sum := orders[r.IntN(len(orders))], points[r.IntN(len(points))]
		args := []string{"matmul", fileA, fileB, "--order", order, "--sum", sum, "--seed", "77", "--out", filepath.Join(dir, "c.npy"), "--trace", "0,0", "--trace-to", filepath.Join(dir, "t.csv")}
		c := expectation{sum: oraclePointOf(t, sum), order: order}
		if r.IntN(2) == 0 {
			product := points[r.IntN(len(points))]
			args, c.product = append(args, "--product", product), oraclePointOf(t, product)
		}
		if strings.HasPrefix(order, "chunk") && r.IntN(2) == 0 {
			outer := points[r.IntN(len(points))]
			args, c.outer = append(args, "--outer", outer), oraclePointOf(t, outer)
		}
		if r.IntN(3) == 0 {
			args = append(args, "--operands", "E5M6")
			first := oraclePointOf(t, "E5M6")
			for _, x := range [][]float64{a, b} {
				for n := range x {
					x[n], _ = first.round(t, new(big.Rat).SetFloat64(x[n]), 0).Float64()
				}
			}
		}
		must(t, args...)
		got, err := readArray(filepath.Join(dir, "c.npy"))
		if err != nil {
			t.Fatal(err)
		}
		if wide := strings.Contains(sum, "fp64") || c.outer != nil && c.outer.format.Bits() == 64; got.Wide != wide {
			t.Errorf("%v: float64 %v", args, got.Wide)
		}
		for row := range i {
			for col := range j {
				want := c.element(t, a[row*k:][:k], column(b, k, j, col), uint32(row), uint32(col))
				if v := got.Values[row*j+col]; v != want || math.Signbit(v) && v == 0 {
					t.Fatalf("%v: element %d,%d of %dx%dx%d is %v, want %v", args, row, col, i, k, j, v, want)
				}
			}
		}
		checkTrace(t, filepath.Join(dir, "t.csv"), k, got.Values[0])
	}
}

func column(b []float64, k, j, col int) []float64 {
	var x []float64
	for n := range k {
		x = append(x, b[n*j+col])
	}
	return x
}

// expectation computes elements by the oracle.
type expectation struct {
	product, outer, sum *oraclePoint
	order               string
}

func (c *expectation) element(t *testing.T, a, b []float64, row, col uint32) float64 {
	t.Helper()
	arith := arithmetic{seed: 77}
	terms := quant.Streams{Row: arith.draws(siteTermRow), Column: arith.draws(siteTermColumn)}
	sums := quant.Streams{Row: arith.draws(siteSumRow), Column: arith.draws(siteSumColumn)}
	term := func(k int) *big.Rat {
		x := new(big.Rat).Mul(new(big.Rat).SetFloat64(a[k]), new(big.Rat).SetFloat64(b[k]))
		if c.product != nil {
			return c.product.round(t, x, streamWord(terms, k, row, col))
		}
		return x
	}
	o, err := quant.ParseOrder(c.order)
	if err != nil {
		t.Fatal(err)
	}
	var s *big.Rat
	if o.Kind == quant.Wide {
		s = new(big.Rat)
		for k := range a {
			s.Add(s, term(k))
		}
		s = c.sum.round(t, s, streamWord(sums, len(a), row, col))
	} else {
		s, err = oracle.Walk(oracle.Order{Kind: kindWord(o), K: o.K}, len(a), new(big.Rat), term, func(step oracle.Step, x, y *big.Rat) *big.Rat {
			p := c.sum
			if step.Outer && c.outer != nil {
				p = c.outer
			}
			return p.round(t, new(big.Rat).Add(x, y), streamWord(sums, step.Number, row, col))
		})
		if err != nil {
			t.Fatal(err)
		}
	}
	v, exact := s.Float64()
	if !exact {
		t.Fatal("a sum that binary64 does not hold")
	}
	return v
}

// checkTrace reads a trace: every term once, ascending within its part, and the
// element at the end.
func checkTrace(t *testing.T, file string, k int, element float64) {
	t.Helper()
	data, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	rows, err := csv.NewReader(strings.NewReader(string(data))).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if strings.Join(rows[0], ",") != "step,where,k,a,b,product_exact,added,sum,sum_hex" {
		t.Fatalf("header %v", rows[0])
	}
	last := "0"
	terms := map[string]bool{}
	for _, row := range rows[1:] {
		if row[2] != "" {
			if terms[row[2]] {
				t.Errorf("term %s twice", row[2])
			}
			terms[row[2]] = true
		}
		last = row[7]
	}
	pairwise := !strings.Contains(string(data), "lane") && strings.Contains(string(data), "node")
	if len(terms) != k && !pairwise {
		t.Errorf("%d terms of %d in\n%s", len(terms), k, data)
	}
	if v, err := strconv.ParseFloat(last, 64); err != nil || v != element {
		t.Errorf("the trace ends with %s, the element is %v", last, element)
	}
}

// TestTraceExample is a trace worked by hand: 1 + 2^-11 is a tie in binary16.
func TestTraceExample(t *testing.T) {
	dir := t.TempDir()
	a := writeArray(t, dir, "a.npy", false, []int{1, 3}, []float64{1, 0x1p-11, 2048})
	b := writeArray(t, dir, "b.npy", false, []int{3, 1}, []float64{1, 1, 1})
	got := must(t, "matmul", a, b, "--sum", "fp16", "--trace", "0,0")
	want := `step,where,k,a,b,product_exact,added,sum,sum_hex
0,,0,1,1,0x1p+00,1,1,0x1p+00
1,,1,0.00048828125,1,0x1p-11,0.00048828125,1,0x1p+00
2,,2,2048,1,0x1p+11,2048,2048,0x1p+11
`
	if got != want {
		t.Errorf("got\n%s", got)
	}
}

// TestMatmulCounts: overflow, saturation and NaN are printed by point.
func TestMatmulCounts(t *testing.T) {
	dir := t.TempDir()
	a := writeArray(t, dir, "a.npy", false, []int{2, 2}, []float64{400, 400, 1, math.Inf(1)})
	b := writeArray(t, dir, "b.npy", false, []int{2, 1}, []float64{400, 0})
	out := must(t, "matmul", a, b, "--product", "fp16", "--sum", "fp16", "--out", filepath.Join(dir, "c.npy"))
	for _, want := range []string{"overflow", "products  binary16  2x1x2", "2x1, float32"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	fields := map[string][]string{}
	for line := range strings.Lines(out) {
		f := strings.Fields(line)
		fields[f[0]] = f
	}
	if f := fields["products"]; f[3] != "1" || f[6] != "1" { // 160000 overflows, inf times 0 is NaN
		t.Errorf("products %v", f)
	}
	out = must(t, "matmul", a, b, "--product", "fp16", "--sum", "fp16", "--overflow", "saturate", "--out", filepath.Join(dir, "c.npy"))
	if !strings.Contains(out, "binary16 nearest-even saturate") {
		t.Errorf("%s", out)
	}
}

// TestMatmulErrors: one line, exit code 2.
func TestMatmulErrors(t *testing.T) {
	dir := t.TempDir()
	a := writeArray(t, dir, "a.npy", false, []int{2, 3}, make([]float64, 6))
	b := writeArray(t, dir, "b.npy", false, []int{3, 2}, make([]float64, 6))
	cube := writeArray(t, dir, "cube.npy", false, []int{1, 3, 2}, make([]float64, 6))
	data, err := os.ReadFile(b)
	if err != nil {
		t.Fatal(err)
	}
	file := func(name, from, to string, cut int) string {
		f := filepath.Join(dir, name)
		if err := os.WriteFile(f, []byte(strings.Replace(string(data), from, to, 1)[:len(data)-cut]), 0o600); err != nil {
			t.Fatal(err)
		}
		return f
	}
	ints, fortran := file("ints.npy", "<f4", "<i4", 0), file("fortran.npy", "False,", "True, ", 0)
	short, big := file("short.npy", "", "", 3), file("big.npy", "<f4", ">f4", 0)
	c := filepath.Join(dir, "c.npy")
	for _, x := range []struct {
		args []string
		want string
	}{
		{[]string{a, a, "--sum", "fp16"}, "2x3"},
		{[]string{a, cube, "--sum", "fp16"}, "(1, 3, 2)"},
		{[]string{a, ints, "--sum", "fp16"}, "float32"},
		{[]string{a, big, "--sum", "fp16"}, "little-endian"},
		{[]string{a, fortran, "--sum", "fp16"}, "C order"},
		{[]string{a, short, "--sum", "fp16"}, "24 bytes, found 21"},
		{[]string{a, dir + "/none.npy", "--sum", "fp16"}, "none.npy"},
		{[]string{a, "--sum", "fp16"}, "A.npy B.npy"},
		{[]string{a, b}, "--sum"},
		{[]string{a, b, "--sum", "fp17"}, "fp16"},
		{[]string{a, b, "--sum", "fp16", "--product", "exakt"}, "exakt"},
		{[]string{a, b, "--sum", "fp16", "--order", "spiral"}, "sequential"},
		{[]string{a, b, "--sum", "fp16", "--order", "chunk"}, "chunk(64)"},
		{[]string{a, b, "--sum", "fp16", "--order", "wide", "--through", "binary32"}, "wide"},
		{[]string{a, b, "--sum", "fp16", "--outer", "fp32"}, "chunk"},
		{[]string{a, b, "--sum", "MXFP4"}, "only operands"},
		{[]string{a, b, "--sum", "fp16", "--product", "MXINT8"}, "only operands"},
		{[]string{a, b, "--sum", "fp16 nearest-even nan more"}, "overflow policy"},
		{[]string{a, b, "--sum", "fp16", "--through", "fp8"}, "binary32"},
		{[]string{a, b, "--sum", "fp16", "--rounding", "stochastic", "--random-bits", "20"}, "at most 16"},
		{[]string{a, b, "--operands", "E2M1 nearest-even", "--sum", "E2M1", "--rounding", "stochastic(16)"}, "--random-bits 3"},
		{[]string{a, b, "--sum", "fp16", "--trace", "2,0"}, "2x2"},
		{[]string{a, b, "--sum", "fp16", "--trace", "one"}, "--trace 0,2"},
	} {
		args := append([]string{"matmul", "--out", c}, x.args...)
		_, errs, code := ulpine(t, args...)
		if code != exitBadInput || !strings.Contains(errs, x.want) || strings.Count(errs, "\n") != 1 {
			t.Errorf("%v: code %d, %q lacks %q", x.args, code, errs, x.want)
		}
	}
	if _, err := os.Stat(c); err == nil {
		t.Error("a result was written in spite of an error")
	}
	if _, errs, code := ulpine(t, "matmul", a, b, "--sum", "fp16"); code != exitBadInput || !strings.Contains(errs, "--out") {
		t.Errorf("code %d, %s", code, errs)
	}
}

// TestPrefixes: the fallback of the trace agrees with the additions themselves
// where both exist, stochastic rounding included.
func TestPrefixes(t *testing.T) {
	m := &matmulJob{arithmetic: &arithmetic{seed: 3}, i: 3, j: 2, k: 9, traceRow: 2, traceCol: 1}
	acc, err := quant.ParseAccumulate("product bf16 stochastic(5); sum E6M5 stochastic(7)")
	if err != nil {
		t.Fatal(err)
	}
	m.acc = acc
	p := quant.Product[float32]{
		I: 3, J: 2, K: 9, A: quant.Matrix[float32]{Row: 9, Col: 1}, B: quant.Matrix[float32]{Row: 2, Col: 1}, C: make([]float32, 6),
		Terms: quant.Streams{Row: m.draws(siteTermRow), Column: m.draws(siteTermColumn)},
		Sums:  quant.Streams{Row: m.draws(siteSumRow), Column: m.draws(siteSumColumn)},
	}
	a, b := make([]float32, 27), make([]float32, 18)
	r := rand.New(rand.NewPCG(1, 2))
	for i := range a {
		a[i] = r.Float32()
	}
	for i := range b {
		b[i] = r.Float32()
	}
	p.A.Data, p.B = a, quant.Matrix[float32]{Data: b, Row: 2, Col: 1}
	mul, err := quant.NewMultiplier[float32](acc)
	if err != nil {
		t.Fatal(err)
	}
	mul.Mul(p, nil, nil)
	lines, err := traceOf(m, p)
	if err != nil {
		t.Fatal(err)
	}
	short, err := prefixes(m, p)
	if err != nil {
		t.Fatal(err)
	}
	for n := range lines {
		if fmt.Sprint(lines[n].sum) != fmt.Sprint(short[n].sum) {
			t.Errorf("step %d: %v and %v", n, lines[n].sum, short[n].sum)
		}
	}
}

// TestMatmulBlocks: operands with shared scales: a matrix times the identity is the
// matrix as its blocks decode (MX 1.0, floor rule; codes computed with an independent
// program), and its trace ends with the element.
func TestMatmulBlocks(t *testing.T) {
	dir := t.TempDir()
	v := []float64{1, -0.5, 0.3, 7.9, 0.01, -3.1, 0, 2.5}
	a := writeArray(t, dir, "a.npy", false, []int{1, 8}, v)
	eye := make([]float64, 64)
	for i := range 8 {
		eye[9*i] = 1
	}
	b := writeArray(t, dir, "b.npy", false, []int{8, 8}, eye)
	for _, c := range []struct {
		format string
		want   []float64
	}{
		{"MXFP4", []float64{1, -0.5, 0.5, 6, 0, -3, 0, 2}},
		{"MXFP6(E2M3)", []float64{1, -0.5, 0.25, 7.5, 0, -3, 0, 2.5}},
		{"MXINT8", []float64{1, -0.5, 0.3125, 7.875, 0, -3.125, 0, 2.5}},
	} {
		out := filepath.Join(dir, "c.npy")
		must(t, "matmul", a, b, "--operands", c.format, "--sum", "fp32", "--out", out, "--trace", "0,3", "--trace-to", filepath.Join(dir, "t.csv"))
		got, err := readArray(out)
		if err != nil {
			t.Fatal(err)
		}
		for i, want := range c.want {
			if got.Values[i] != want {
				t.Errorf("%s: %v becomes %v, want %v", c.format, v[i], got.Values[i], want)
			}
		}
		checkTrace(t, filepath.Join(dir, "t.csv"), 8, got.Values[3])
	}
	// One scale for the whole tensor multiplies the finished sums.
	out := filepath.Join(dir, "c.npy")
	must(t, "matmul", a, b, "--operands", "INT8", "--sum", "Q32.0", "--out", out)
	must(t, "matmul", a, b, "--operands", "INT8", "--sum", "fp32", "--out", out, "--trace", "0,3", "--trace-to", filepath.Join(dir, "t.csv"))
	got, err := readArray(out)
	if err != nil {
		t.Fatal(err)
	}
	for i, x := range v {
		if d := math.Abs(got.Values[i] - x); d > 7.9/254*1.01 {
			t.Errorf("INT8: %v becomes %v", x, got.Values[i])
		}
	}
	checkTrace(t, filepath.Join(dir, "t.csv"), 8, got.Values[3])
	// A scale per row of A: the small row keeps its precision.
	two := writeArray(t, dir, "two.npy", false, []int{2, 2}, []float64{127, 1, 0.127, 0.001})
	unit := writeArray(t, dir, "unit.npy", false, []int{2, 2}, []float64{127, 0, 0, 127})
	for format, want := range map[string]float64{"INT8": 0, "INT8(per=channel)": 0.001 * 127} {
		must(t, "matmul", two, unit, "--operands", format, "--sum", "fp32", "--out", out, "--trace", "1,1", "--trace-to", filepath.Join(dir, "t.csv"))
		got, err := readArray(out)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(got.Values[3]-want) > 1e-5 {
			t.Errorf("%s: %v, want %v", format, got.Values[3], want)
		}
	}
}

// streamWord is the random word of addition k of result (i, j), written once more:
// 16 bits at the top of the mix of two words.
func streamWord(s quant.Streams, k int, i, j uint32) uint32 {
	row, column := s.Row.Lane(uint32(k), i)|1, s.Column.Lane(uint32(k), j)
	return (row*column + (row>>16)*(column>>16)) << 16
}
