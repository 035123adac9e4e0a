package main

import (
	"encoding/xml"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestSumStalls: where sums stall. Harmonic series: bfloat16 5.0625 and binary16
// 7.0859375 (N. J. Higham's note of 2018-12-03, second hand); ones at 2^p; 0.1 in
// binary16 and bfloat16: computed with exact rationals, as are all others.
func TestSumStalls(t *testing.T) {
	for _, c := range []struct{ args, want string }{
		{"--terms harmonic --length 4096 --sum bf16", "bf16: stalls at 5.0625: term 64 is the last that changes it"},
		{"--terms harmonic --length 4096 --sum fp16", "fp16: stalls at 7.0859375: term 512 is the last that changes it"},
		{"--terms harmonic --length 4096 --sum E6M9", "E6M9: stalls at 6.40625: term 256 is"},
		{"--terms harmonic --length 4096 --sum fp16 --rounding toward-zero", "fp16: stalls at 5.74609375: term 256 is"},
		{"--terms harmonic --length 64 --sum E4M3", "E4M3: stalls at 3: term 8 is"},
		{"--terms ones --length 8192 --sum fp16", "fp16: stalls at 2048: term 2048 is"},
		{"--terms ones --length 1024 --sum bf16 --rounding nearest-away", "bf16: stalls at 512: term 384 is"},
		{"--terms tenth --length 20000 --sum fp16", "fp16: stalls at 256: term"},
		{"--terms tenth --length 3000 --sum bf16", "bf16: stalls at 32: term"},
		{"--terms ones --length 65536 --sum fp16 --order lanes(4)", "fp16: stalls at 8192: no longer sum than that of 8192 terms differs"},
		{"--terms ones --length 8192 --sum fp16;chunk(64)", "fp16;chunk(64): does not stall within 8192 terms"},
		{"--terms ones --length 8192 --sum fp16;pairwise", "does not stall"},
	} {
		args := append([]string{"sum"}, strings.Fields(c.args)...)
		if out := must(t, args...); !strings.Contains(out, c.want) {
			t.Errorf("%s: no %q in\n%s", c.args, c.want, out)
		}
	}
	if testing.Short() {
		return
	}
	// Malone, Irish Math. Soc. Bulletin 71 (2013), second hand.
	out := must(t, "sum", "--terms", "harmonic", "--length", "4194310", "--sum", "fp32")
	if !strings.Contains(out, "stalls at 15.403682708740234: term 2097151 is") {
		t.Errorf("binary32:\n%s", out)
	}
}

// TestSumStochastic: stochastic rounding does not stall, and stays near the exact
// sum: ones in bfloat16, 16 random bits.
func TestSumStochastic(t *testing.T) {
	s, err := newSumStudy(&arithmetic{rounding: "nearest-even", overflow: "default", seed: 4}, []string{"bf16 stochastic(16)", "bf16"}, "", "", "uniform", 1<<14)
	if err != nil {
		t.Fatal(err)
	}
	if err := s.run(); err != nil {
		t.Fatal(err)
	}
	last := len(s.lengths) - 1
	if r := s.all[0].ratio[last]; r < 0.9 || r > 1.1 || s.all[0].stalled(s.length) {
		t.Errorf("stochastic: %v of the exact sum", r)
	}
	if r := s.all[1].ratio[last]; r > 0.1 || !s.all[1].stalled(s.length) {
		t.Errorf("nearest: %v of the exact sum", r)
	}
}

// TestSumSequentialIsSumRows: the running sum is the sum that package quant forms.
func TestSumSequentialIsSumRows(t *testing.T) {
	for _, text := range []string{"E5M4", "bf16 stochastic(7)", "fp16 up", "E6M9; through binary32"} {
		a := &arithmetic{rounding: "nearest-even", overflow: "default", seed: 11}
		s, err := newSumStudy(a, []string{text}, "", "", "uniform", 300)
		if err != nil {
			t.Fatal(err)
		}
		one := s.all[0]
		terms := s.source.terms(s.length, one.terms)
		one.sequential(terms, s.lengths, s.draws)
		running := one.sums
		one.sums = nil
		if err := one.byLength(terms, s.lengths, s.draws); err != nil {
			t.Fatal(err)
		}
		for i := range running {
			if !sameBits(running[i], one.sums[i]) {
				t.Errorf("%s: %d terms give %v and %v", text, s.lengths[i], running[i], one.sums[i])
			}
		}
	}
}

// TestSumFileAndFigure: a user's data, the table, the figure.
func TestSumFileAndFigure(t *testing.T) {
	dir := t.TempDir()
	file := writeArray(t, dir, "x.npy", true, []int{2, 3}, []float64{1, 2, 3, -6, 0.25, 2048})
	svg := filepath.Join(dir, "f.svg")
	out := must(t, "sum", "--terms", file, "--sum", "fp16", "--sum", "fp64", "--figure", svg)
	for _, want := range []string{"6 terms", "length  fp16", "4       0     -        0        -", "2048  0.99988"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	data, err := os.ReadFile(svg)
	if err != nil {
		t.Fatal(err)
	}
	if err := xml.Unmarshal(data, new(struct{})); err != nil {
		t.Error(err)
	}
	for _, want := range []string{"fp16", "fp64", "number of terms"} {
		if !strings.Contains(string(data), want) {
			t.Errorf("no %q in the figure", want)
		}
	}
}

func TestSumErrors(t *testing.T) {
	dir := t.TempDir()
	empty := writeArray(t, dir, "empty.npy", true, []int{0}, nil)
	for _, c := range []struct{ args, want string }{
		{"--terms ones", "--sum"},
		{"--sum fp17", "fp16"},
		{"--sum fp16 --terms primes", "harmonic"},
		{"--sum fp16 --terms none.npy", "none.npy"},
		{"--sum fp16 --terms " + empty, "no values"},
		{"--sum fp16 --length -4", "--length -4"},
		{"--sum fp16 --length 99999999", "33554431"},
		{"--sum fp16;spiral", "sequential"},
		{"--sum fp16 --order chunk(0)", "at least 1"},
		{"--sum fp16 --operands E99", "E99"},
		{"--sum fp16 --rounding stochastic --random-bits 17", "at most 16"},
	} {
		_, errs, code := ulpine(t, append([]string{"sum"}, strings.Fields(c.args)...)...)
		if code != exitBadInput || !strings.Contains(errs, c.want) || strings.Count(errs, "\n") != 1 {
			t.Errorf("%s: code %d, %q lacks %q", c.args, code, errs, c.want)
		}
	}
}
