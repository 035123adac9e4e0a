package main

import (
	"math"
	"math/big"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"ulpine/quant"
	"ulpine/quant/oracle"
)

// readVectors parses the lines of vectors, comments apart.
func readVectors(t *testing.T, text string) (vectors []map[string]string, comments int) {
	t.Helper()
	for line := range strings.Lines(text) {
		if strings.HasPrefix(line, "#") {
			comments++
			continue
		}
		fields := map[string]string{}
		for _, f := range strings.Fields(line) {
			key, value, ok := strings.Cut(f, "=")
			if !ok {
				t.Fatalf("field %q in %q", f, line)
			}
			fields[key] = value
		}
		vectors = append(vectors, fields)
	}
	return vectors, comments
}

func code(t *testing.T, hex string) uint64 {
	t.Helper()
	c, err := strconv.ParseUint(hex, 16, 64)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// exactResult computes an operation in rationals; ok is false where the result is a
// special, which is returned instead.
func exactResult(op string, x []float64) (r *big.Rat, minusZero bool, special float64, ok bool) {
	plain := 0.0 // IEEE arithmetic settles the specials and the signs of zeros
	switch op {
	case "round":
		plain = x[0]
	case "add":
		plain = x[0] + x[1]
	case "multiply":
		plain = x[0] * x[1]
	case "fma":
		plain = math.FMA(x[0], x[1], x[2])
	}
	for _, v := range x {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, false, plain, false
		}
	}
	var rs []*big.Rat
	for _, v := range x {
		rs = append(rs, new(big.Rat).SetFloat64(v))
	}
	r = rs[0]
	switch op {
	case "add":
		r.Add(r, rs[1])
	case "multiply":
		r.Mul(r, rs[1])
	case "fma":
		r.Mul(r, rs[1]).Add(r, rs[2])
	}
	return r, math.Signbit(plain), 0, true
}

// checkVectors recomputes every vector with the oracle.
func checkVectors(t *testing.T, text, op string, p quant.Point, from string) int {
	t.Helper()
	vectors, comments := readVectors(t, text)
	if comments < 9 {
		t.Errorf("%d comment lines", comments)
	}
	source, err := quant.ParseFormat(from)
	if err != nil {
		t.Fatal(err)
	}
	in, err := oracleOf(source)
	if err != nil {
		t.Fatal(err)
	}
	out, err := oracleOf(p.Format)
	if err != nil {
		t.Fatal(err)
	}
	policy := p.Overflow.String()
	if p.Overflow == quant.FormatDefault {
		policy = ""
	}
	for i, v := range vectors {
		var x []float64
		for _, name := range []string{"a", "b", "c"} {
			if hex, ok := v[name]; ok {
				x = append(x, in.Decode(code(t, hex)))
			}
		}
		want, flags := expectedVector(op, x, p, out, policy, v, t)
		got := math.NaN()
		if v["result"] != "none" {
			got = out.Decode(code(t, v["result"]))
		} else if out.NaN {
			t.Fatalf("vector %d %v: no code, though the format has a NaN", i, v)
		}
		if !sameBits(got, want) || v["flags"] != flags {
			t.Fatalf("vector %d %v: want %v, flags %s", i, v, want, flags)
		}
		if n, ok := out.NaNCode(); want != want && ok && code(t, v["result"]) != n {
			t.Fatalf("vector %d: NaN has code %s, want %x", i, v["result"], n)
		}
	}
	return len(vectors)
}

// expectedVector is the oracle's result and flags.
func expectedVector(op string, x []float64, p quant.Point, out *oracle.Format, policy string, v map[string]string, t *testing.T) (float64, string) {
	r, minus, special, finite := exactResult(op, x)
	if !finite {
		return expectedSpecial(special, out, policy)
	}
	draw := uint64(0)
	if u, ok := v["u"]; ok {
		draw = code(t, u)
	}
	want, event := out.Round(r, minus, oracleRounding(p.Rounding), policy, draw)
	var flags []string
	if math.IsNaN(want) || math.IsInf(want, 0) || new(big.Rat).SetFloat64(want).Cmp(r) != 0 {
		flags = append(flags, "inexact")
	}
	if event != "" {
		flags = append(flags, event)
	}
	if flags == nil {
		return want, "-"
	}
	return want, strings.Join(flags, ",")
}

// expectedSpecial says what infinity and NaN become: the policy decides.
func expectedSpecial(x float64, out *oracle.Format, policy string) (float64, string) {
	if policy == "" {
		policy = out.Overflow
	}
	switch {
	case x != x:
		return x, "nan"
	case policy == "saturate":
		end := out.Max()
		if x < 0 {
			end = out.Lowest()
		}
		y, _ := end.Float64()
		return y, "inexact,saturated"
	case policy == "infinity":
		return x, "-"
	}
	return math.NaN(), "inexact,nan"
}

// TestVectorsAgainstOracle recomputes vectors of many settings, each line.
func TestVectorsAgainstOracle(t *testing.T) {
	for _, c := range []struct{ op, format, from, rounding, more string }{
		{"round", "fp16", "binary32", "nearest-even", "--count 1200"},
		{"round", "bf16", "binary32", "to-odd", "--count 1000"},
		{"round", "fp32", "binary64", "nearest-even", "--count 1000"},
		{"round", "E4M3", "fp16", "nearest-even", "--exhaustive"},
		{"round", "E5M2", "fp16", "stochastic", "--exhaustive --random-bits 6 --variant centred"},
		{"round", "E2M1", "E4M3", "nearest-away", "--exhaustive"},
		{"round", "E4M3", "binary32", "nearest-even", "--count 500 --overflow nan"},
		{"add", "fp16", "fp16", "nearest-even", "--count 1200"},
		{"add", "fp64", "fp64", "down", "--count 1000"},
		{"add", "E4M3", "E4M3", "nearest-even", "--exhaustive"},
		{"add", "E2M1", "E2M1", "stochastic", "--exhaustive --random-bits 2"},
		{"add", "E2M3", "E2M3", "up", "--exhaustive"},
		{"multiply", "bf16", "bf16", "nearest-even", "--count 1200"},
		{"multiply", "E5M2", "E5M2", "toward-zero", "--exhaustive --overflow infinity"},
		{"multiply", "fp32", "fp32", "stochastic", "--count 2000 --random-bits 24 --variant centred-even"},
		{"multiply", "fp64", "fp64", "nearest-even", "--count 1500"},
		{"multiply", "E5M10(subnormals=flush)", "E5M10(subnormals=flush)", "nearest-even", "--count 1000"},
		{"fma", "fp16", "fp16", "nearest-even", "--count 1500"},
		{"fma", "fp32", "E4M3", "to-odd", "--count 1500"},
		{"fma", "E2M1", "E2M1", "nearest-even", "--exhaustive"},
		{"fma", "bf16", "bf16", "stochastic", "--count 1000"},
		{"add", "Q2.4", "Q2.4", "nearest-even", "--exhaustive"},
		{"multiply", "Q2.4", "Q2.4", "nearest-even", "--exhaustive --overflow wrap"},
		{"multiply", "UQ0.6", "UQ0.6", "stochastic", "--exhaustive --random-bits 4"},
		{"multiply", "posit6", "posit6", "nearest-even", "--exhaustive"},
		{"add", "binary6p3-draft", "binary6p3-draft", "nearest-even", "--exhaustive"},
	} {
		if testing.Short() && strings.Contains(c.more, "--exhaustive") && (c.from == "fp16" || c.from == "E4M3") {
			continue
		}
		args := append([]string{"vectors", "--operation", c.op, "--format", c.format, "--from", c.from, "--rounding", c.rounding, "--seed", "5"},
			strings.Fields(c.more)...)
		text := must(t, args...)
		p := pointOfHeader(t, text, c.format, c.rounding, c.more)
		if n := checkVectors(t, text, c.op, p, c.from); n < 200 {
			t.Errorf("%v: %d vectors", args, n)
		}
		if c.rounding == "nearest-even" && !strings.Contains(text, "flags=inexact") {
			t.Errorf("%v: no result is inexact", args)
		}
	}
}

// pointOfHeader reads the point back from the file's own comments.
func pointOfHeader(t *testing.T, text, format, rounding, more string) quant.Point {
	t.Helper()
	f, err := quant.ParseFormat(format)
	if err != nil {
		t.Fatal(err)
	}
	p := quant.Point{Format: f}
	for line := range strings.Lines(text) {
		if r, ok := strings.CutPrefix(line, "# rounding: "); ok {
			if p.Rounding, err = quant.ParseRounding(strings.TrimSpace(r)); err != nil {
				t.Fatal(err)
			}
		}
		if o, ok := strings.CutPrefix(line, "# overflow: "); ok {
			word, _, _ := strings.Cut(o, ",")
			if p.Overflow, err = quant.ParseOverflow(word); err != nil {
				t.Fatal(err)
			}
		}
	}
	if p.Rounding.Mode.String() != rounding || strings.Contains(more, "--overflow") && !strings.Contains(more, p.Overflow.String()) {
		t.Fatalf("the header says %v", p)
	}
	return p
}

// TestVectorsCorners: specials, zeros of both signs and the ends of the range are
// among the vectors of a sampled file, which the seed alone decides.
func TestVectorsCorners(t *testing.T) {
	args := []string{"vectors", "--operation", "add", "--format", "fp16", "--count", "8000"}
	text := must(t, args...)
	for _, want := range []string{"a=8000 b=0000", "a=7bff b=7bff", "a=7c00 b=fc00", "a=0001 b=8001", "a=3c00 b=3c01", "b=7e00"} {
		if !strings.Contains(text, want) {
			t.Errorf("no vector %q", want)
		}
	}
	if text != must(t, args...) {
		t.Error("a second file differs")
	}
	if text == must(t, append(args, "--seed", "2")...) {
		t.Error("the seed changes nothing")
	}
	file := filepath.Join(t.TempDir(), "v.txt")
	must(t, append(args, "--out", file)...)
	if data, err := os.ReadFile(file); err != nil || string(data) != text {
		t.Errorf("the file differs (%v)", err)
	}
}

func TestVectorsErrors(t *testing.T) {
	for _, c := range []struct{ args, want string }{
		{"--operation divide --format fp16 --count 3", "multiply"},
		{"--operation add --format fp61 --count 3", "fp16"},
		{"--operation add --format fp16", "--count"},
		{"--operation add --count 3", "--format"},
		{"--operation add --format fp16 --exhaustive", "--from"},
		{"--operation add --format fp16 --exhaustive --count 3", "one of them"},
		{"--operation round --format fp64 --count 3", "--from"},
		{"--operation add --format E2M1 --count 9 --rounding stochastic --random-bits 9", "at most 2 bits"},
		{"--operation round --from fp16 --format E4M3 --count 9 --rounding stochastic --random-bits 32", "--random-bits 29"},
	} {
		_, errs, code := ulpine(t, append([]string{"vectors"}, strings.Fields(c.args)...)...)
		if code != exitBadInput || !strings.Contains(errs, c.want) || strings.Count(errs, "\n") != 1 {
			t.Errorf("%s: code %d, %q lacks %q", c.args, code, errs, c.want)
		}
	}
}
