package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"strings"
	"testing"

	"ulpine/quant"
	"ulpine/quant/oracle"
	"ulpine/quant/random"
)

// roundLines runs round --json and returns its objects.
func roundLines(t *testing.T, args ...string) []map[string]any {
	t.Helper()
	out := must(t, append([]string{"round", "--json"}, args...)...)
	var all []map[string]any
	for line := range strings.Lines(out) {
		var o map[string]any
		if err := json.Unmarshal([]byte(line), &o); err != nil {
			t.Fatalf("%q: %v", line, err)
		}
		for _, key := range []string{"value", "below", "above", "result", "code", "up"} {
			if _, ok := o[key]; !ok {
				t.Fatalf("no key %q in %s", key, line)
			}
		}
		all = append(all, o)
	}
	return all
}

// TestRoundConversions: published and independently recomputed nearest-even
// conversions (IEEE 754 binary16; OFP8 1.0; MX 1.0 element types), by their codes.
func TestRoundConversions(t *testing.T) {
	for _, c := range publishedConversions {
		values, codes := strings.Fields(c.values), strings.Fields(c.codes)
		for i, o := range roundLines(t, append([]string{"--format", c.format}, values...)...) {
			if o["code"] != codes[i] {
				t.Errorf("%s of %s: code %v, want %s", c.format, values[i], o["code"], codes[i])
			}
		}
	}
}

// TestRoundOnce: decimals are rounded once, not by way of binary64 or binary32.
func TestRoundOnce(t *testing.T) {
	for _, c := range []struct{ format, value, code string }{
		// Just above a tie of binary16; binary64 would cut the excess off.
		{"fp16", "1.00048828125000000000000000000000001", "3c01"},
		{"fp16", "1.00048828125", "3c00"},
		{"fp16", "0x1.0020000001p0", "3c01"}, // 1+2^-11+2^-40; 3c00 by way of binary32
		{"fp64", "1.00000000000000011102230246251565404", "3ff0000000000000"},
		{"fp64", "1.00000000000000011102230246251565405", "3ff0000000000001"}, // 1+2^-53 = ...5404236...
		{"fp64", "4.9e-324", "0000000000000001"},
	} {
		if o := roundLines(t, "--format", c.format, c.value)[0]; o["code"] != c.code {
			t.Errorf("%s of %s: %v, want %s", c.format, c.value, o["code"], c.code)
		}
	}
}

// TestRoundOneFractionalBit: 0.2 with one fractional bit goes down with 60 % and up
// with 40 %, 0.2 in the mean (common practice).
func TestRoundOneFractionalBit(t *testing.T) {
	o := roundLines(t, "--format", "E2M1", "--rounding", "stochastic", "0.2")[0]
	if o["below"] != 0.0 || o["above"] != 0.5 || o["up_exact"] != "2/5" || o["expected"] != 0.2 {
		t.Errorf("%v", o)
	}
}

// TestRoundAgainstOracle holds every field to exact rationals, for random numbers,
// roundings and policies.
func TestRoundAgainstOracle(t *testing.T) {
	r := rand.New(rand.NewPCG(31, 32))
	formats := []string{
		"fp16", "bf16", "fp32", "fp64", "E4M3", "E5M2", "E3M2", "E2M3", "E2M1", "E6M9", "E5M10(subnormals=flush)",
		"E4M3(top=ieee,bias=3)", "E5M0", "E3M2(top=nan)",
		"Q2.6", "UQ3.5", "posit8", "posit16", "binary8p4-draft", "binary5p2-draft",
	}
	oracles := map[string]*oracle.Format{} // those of posits are long lists
	for round := range 400 {
		name := formats[r.IntN(len(formats))]
		a := arithmetic{
			rounding: []string{"nearest-even", "nearest-away", "toward-zero", "up", "down", "to-odd", "stochastic", "stochastic", "stochastic"}[r.IntN(9)],
			overflow: []string{"default", "saturate", "nan"}[r.IntN(3)],
		}
		if a.rounding == "stochastic" && r.IntN(3) > 0 {
			a.bits = 1 + r.IntN(32)
			a.variant = []string{"", "truncated", "centred", "centred-even"}[r.IntN(4)]
		}
		p, err := a.point(name, 32)
		if err != nil {
			t.Fatal(err)
		}
		f := oracles[name]
		if f == nil {
			if f, err = oracleOf(p.Format); err != nil {
				t.Fatal(err)
			}
			oracles[name] = f
		}
		for range 10 {
			text := randomNumber(r, p.Format)
			n, err := parseNumber(text)
			if err != nil {
				t.Fatal(err)
			}
			word := r.Uint32()
			got := roundNumber(p, n, word, a.given())
			if msg := checkRounded(&got, p, f, a, word); msg != "" {
				t.Fatalf("round %d: %v of %s, %d given bits: %s", round, p, text, a.bits, msg)
			}
		}
	}
}

// randomNumber is a number in or near the range of a format.
func randomNumber(r *rand.Rand, f quant.Format) string {
	l := f.Limits()
	lo, hi := math.Log2(l.MinSubnormal), math.Log2(l.Max)
	e := int(lo) - 3 + r.IntN(int(hi-lo)+6)
	sign := []string{"", "-"}[r.IntN(2)]
	switch r.IntN(4) {
	case 0: // few bits: values, ties
		x := new(big.Rat).SetInt64(int64(1 + r.IntN(64)))
		return sign + hexExact(shiftRat(x, e-3))
	case 1:
		return fmt.Sprintf("%s%d/%d", sign, 1+r.IntN(1000), 1+r.IntN(1000))
	case 2:
		return fmt.Sprintf("%s0x1.%013xp%d", sign, r.Uint64()>>12, e)
	}
	return fmt.Sprintf("%s%d.%de%d", sign, r.IntN(10), r.Uint64(), int(float64(e)*0.30103))
}

func shiftRat(x *big.Rat, e int) *big.Rat {
	p := new(big.Rat).SetInt(new(big.Int).Lsh(big.NewInt(1), uint(max(e, -e))))
	if e < 0 {
		return x.Quo(x, p)
	}
	return x.Mul(x, p)
}

// checkRounded compares one rounding with the oracle; "" where they agree.
func checkRounded(got *roundedNumber, p quant.Point, f *oracle.Format, a arithmetic, word uint32) string {
	o := oracleRounding(p.Rounding)
	draw := uint64(word >> (32 - max(o.Bits, 1)))
	want, _ := f.Round(got.value, got.negative, o, a.overflow, draw)
	if !sameBits(want, got.result) {
		return fmt.Sprintf("result %v, want %v", got.result, want)
	}
	if got.value.Sign() == 0 {
		return ""
	}
	// The neighbours enclose the number and no value lies between.
	if x := got.value; !below(got.below, x) || below(got.above, x) && !equal(got.above, x) {
		return fmt.Sprintf("neighbours %v, %v", got.below, got.above)
	}
	if equal(got.below, got.value) != equal(got.above, got.value) {
		return fmt.Sprintf("a value's neighbours %v, %v are not both itself", got.below, got.above)
	}
	if o.Mode == "stochastic" {
		return checkChance(got, f, a, o)
	}
	if got.up.IsInt() && got.up.Sign() == 1 != (got.result == got.above && got.above != got.below) {
		return fmt.Sprintf("up %v", got.up)
	}
	return ""
}

// checkChance compares probability and expected value.
func checkChance(got *roundedNumber, f *oracle.Format, a arithmetic, o oracle.Rounding) string {
	o.Bits = uint(a.bits)
	away := f.Chance(got.value, o)
	toward := new(big.Rat).Sub(big.NewRat(1, 1), away)
	// What the two choices give, by the oracle's own rounding with extreme draws.
	low, _ := f.Round(got.value, false, oracle.Rounding{Mode: "stochastic", Bits: 32}, a.overflow, 0)
	high, _ := f.Round(got.value, false, oracle.Rounding{Mode: "stochastic", Bits: 62}, a.overflow, 1<<62-1)
	up, mean, finite := new(big.Rat), new(big.Rat), true
	for _, c := range []struct {
		x float64
		p *big.Rat
	}{{low, toward}, {high, away}} {
		if c.p.Sign() == 0 {
			continue
		}
		if c.x == got.above && got.above != got.below {
			up.Add(up, c.p)
		}
		if math.IsNaN(c.x) || math.IsInf(c.x, 0) {
			finite = false
			continue
		}
		mean.Add(mean, new(big.Rat).Mul(ratOf(c.x), c.p))
	}
	switch {
	case got.up.Cmp(up) != 0:
		return fmt.Sprintf("up %v, want %v", got.up, up)
	case finite != (got.expected != nil):
		return fmt.Sprintf("expected value %v", got.expected)
	case finite && got.expected.Cmp(mean) != 0:
		return fmt.Sprintf("expected value %v, want %v", got.expected, mean)
	}
	return ""
}

// below reports a <= x, infinities included.
func below(a float64, x *big.Rat) bool {
	return math.IsInf(a, -1) || !math.IsInf(a, 1) && ratOf(a).Cmp(x) <= 0
}

func equal(a float64, x *big.Rat) bool { return !math.IsInf(a, 0) && ratOf(a).Cmp(x) == 0 }

// TestRoundFrequencies: results drawn with few bits come up as often as the exact
// probability says, within 5 standard errors.
func TestRoundFrequencies(t *testing.T) {
	var args []string
	const n = 4000
	for range n {
		args = append(args, "-1.3")
	}
	ups := 0
	lines := roundLines(t, append([]string{"--format", "E2M1", "--rounding", "stochastic", "--random-bits", "3", "--seed", "9"}, args...)...)
	for _, o := range lines {
		if o["result"] == o["above"] {
			ups++
		}
	}
	// -1.3 lies between -1.5 and -1; 0.6 of 3 bits is T = 4: away 1/2.
	if p := lines[0]["up_exact"]; p != "1/2" {
		t.Fatalf("up %v", p)
	}
	if d := math.Abs(float64(ups) - n/2); d > 5*math.Sqrt(n)/2 {
		t.Errorf("%d of %d up", ups, n)
	}
	// The draws are the documented ones.
	w := quant.Draws{Seed: random.Derive(9, random.RoundingBits)}.Word(0)
	if want := w>>29+4 >= 8; want != (lines[0]["result"] == lines[0]["below"]) {
		t.Error("value 0 does not draw word 0 of the seed's stream")
	}
}

// TestRoundInput: standard input, negative numbers as arguments, specials.
func TestRoundInput(t *testing.T) {
	var o, e bytes.Buffer
	if code := execute([]string{"round", "--format", "fp16", "--json", "-"}, strings.NewReader("0.5\n# no\n\n-inf\nNaN\n-0\n"), &o, &e); code != 0 {
		t.Fatal(e.String())
	}
	lines := strings.Split(strings.TrimSpace(o.String()), "\n")
	if len(lines) != 4 {
		t.Fatalf("%d lines: %s", len(lines), o.String())
	}
	for i, want := range []string{`"result":0.5`, `"result":"-inf"`, `"result":"nan"`, `"result":-0`} {
		if !strings.Contains(lines[i], want) {
			t.Errorf("line %d: %s lacks %s", i, lines[i], want)
		}
	}
	for _, args := range [][]string{
		{"-0.3", "--format", "fp16", "-.25"},
		{"--format=fp16", "--", "-0.3", "-.25"},
		{"--format", "fp16", "-0.3", "--", "-.25"},
	} {
		all := roundLines(t, args...)
		if len(all) != 2 || all[0]["code"] != "b4cd" || all[1]["code"] != "b400" {
			t.Errorf("%v: %v", args, all)
		}
	}
}

// TestRoundBlock: the numbers of a line share scales (the example of TestMatmulBlocks).
func TestRoundBlock(t *testing.T) {
	out := must(t, "round", "--format", "MXFP4", "1", "-0.5", "0.3", "7.9", "0.01", "-3.1", "0", "2.5")
	want := []string{"1", "-0.5", "0.5", "6", "0", "-3", "0", "2"}
	lines := strings.Split(strings.TrimSpace(out), "\n")
	for i, w := range want {
		if f := strings.Fields(lines[len(lines)-len(want)+i]); f[1] != w {
			t.Errorf("value %d: %v, want %s", i, f, w)
		}
	}
	out = must(t, "round", "--json", "--format", "MXINT8", "1", "7.9")
	if !strings.Contains(out, `"result":7.875`) {
		t.Error(out)
	}
}

// TestRoundErrors: one line, exit code 2, the remedy in it.
func TestRoundErrors(t *testing.T) {
	for _, c := range []struct {
		args []string
		want string
	}{
		{[]string{"--format", "bf61", "1"}, "bf16"},
		{[]string{"1"}, "--format"},
		{[]string{"--format", "fp16"}, "standard input"},
		{[]string{"--format", "fp16", "one"}, `"one" is not a number`},
		{[]string{"--format", "fp16", "1e999999999"}, "exponent"},
		{[]string{"--format", "fp16", "1p999999999"}, "exponent"},
		{[]string{"--format", "fp16", "1/0"}, "not a number"},
		{[]string{"--format", "fp16", "--random-bits", "4", "1"}, "only stochastic"},
		{[]string{"--format", "fp16", "--rounding", "stochastic", "--random-bits", "33", "1"}, "1 to 32"},
		{[]string{"--format", "fp16", "--rounding", "stochastic(8)", "--random-bits", "3", "1"}, "already"},
		{[]string{"--format", "fp16", "--rounding", "upward", "1"}, "toward-zero"},
		{[]string{"--format", "E4M3", "--overflow", "infinity", "1"}, "no infinity"},
		{[]string{"--format", "E4M3", "--overflow", "wrap", "1"}, "wrap"},
		{[]string{"--format", "E40M3", "1"}, "exponent bits"},
		{[]string{"--format", "fp16", "--rounding", "stochastic(8, share=4)", "1"}, "stochastic(8)"},
		{[]string{"--formt", "fp16", "1"}, "--formt"},
		{[]string{"--format", "fp16", "--seed", "-3", "1"}, "-3"},
	} {
		_, errs, code := ulpine(t, append([]string{"round"}, c.args...)...)
		if code != exitBadInput || !strings.Contains(errs, c.want) || strings.Count(errs, "\n") != 1 || strings.Contains(errs, "\x00") {
			t.Errorf("%v: code %d, %q lacks %q", c.args, code, errs, c.want)
		}
	}
}

// FuzzParseNumber: what is read is finite and exact, or refused; never a panic.
func FuzzParseNumber(f *testing.F) {
	for _, s := range []string{"0.1", "-1/3", "0x1.8p-3", "inf", "-nan", "1e20001", "0x", "--1", "1e5/3", "0x1p+5", "010/3", "1_0"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		n, err := parseNumber(s)
		if err == nil && n.kind == quant.Finite && n.value.Sign() != 0 && (n.value.Sign() < 0) != n.negative {
			t.Errorf("%q: sign", s)
		}
		if err == nil && n.kind == quant.Finite {
			p := quant.Point{Format: quant.Binary64}
			got, _ := p.Round(n.real(), 0)
			if want, _ := n.value.Float64(); got != want {
				t.Errorf("%q: %v, math/big has %v", s, got, want)
			}
		}
	})
}
