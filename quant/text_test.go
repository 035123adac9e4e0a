package quant

import (
	"strings"
	"testing"
)

// TestTextRoundTrips: what String writes, the parsers read back.
func TestTextRoundTrips(t *testing.T) {
	for _, text := range []string{
		"nearest-even", "nearest-away", "toward-zero", "up", "down", "to-odd",
		"stochastic(16)", "stochastic(1)", "stochastic(32)", "stochastic(8, centred)", "stochastic(8, centred-even)",
	} {
		r, err := ParseRounding(text)
		if err != nil || r.String() != text {
			t.Errorf("%q reads as %v, %v", text, r, err)
		}
	}
	for _, text := range []string{"sequential", "chunk(64)", "wide", "pairwise", "lanes(8)"} {
		o, err := ParseOrder(text)
		if err != nil || o.String() != text {
			t.Errorf("%q reads as %v, %v", text, o, err)
		}
	}
	for _, text := range []string{
		"binary16 nearest-even infinity", "E4M3 stochastic(16) saturate", "bfloat16 stochastic(8,centred) nan",
		"E5M10(subnormals=flush) up saturate",
	} {
		p, err := ParsePoint(text)
		if err != nil {
			t.Errorf("%q: %v", text, err)
			continue
		}
		again, err := ParsePoint(p.String())
		if err != nil || again.String() != p.String() || again.Format != p.Format || again.Rounding != p.Rounding {
			t.Errorf("%q reads as %v, %v", text, again, err)
		}
	}
	for _, text := range []string{
		"product binary32 nearest-even infinity; sum binary16 nearest-even infinity; sequential",
		"product exact; sum bfloat16 stochastic(8) saturate; chunk(64); outer binary32 nearest-even infinity",
		"product exact; sum E4M3 nearest-even saturate; lanes(4); through binary32",
	} {
		a, err := ParseAccumulate(text)
		if err != nil || a.String() != text {
			t.Errorf("%q reads as %v, %v", text, a, err)
		}
	}
}

// TestTextDefaults: the short forms.
func TestTextDefaults(t *testing.T) {
	r, err := ParseRounding(" Stochastic ")
	if err != nil || r != (Rounding{Mode: Stochastic, Bits: DefaultRandomBits}) {
		t.Errorf("stochastic: %+v, %v", r, err)
	}
	p, err := ParsePoint("fp16")
	if err != nil || p != (Point{Format: Binary16}) || p.String() != "binary16 nearest-even infinity" {
		t.Errorf("fp16: %+v, %v", p, err)
	}
	a, err := ParseAccumulate("sum fp32")
	if err != nil || a.Product != nil || a.Order != (Order{}) || a.Outer != nil || a.Through32 {
		t.Errorf("sum fp32: %+v, %v", a, err)
	}
	if Mode(99).String() == "" || Overflow(99).String() == "" || (Order{Kind: 99}).String() == "" || Variant(9).String() == "" {
		t.Error("unknown constants have no text")
	}
}

// TestTextErrors: each refusal names the fault.
func TestTextErrors(t *testing.T) {
	refused := func(err error, text, want string) {
		t.Helper()
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v, want an error with %q", text, err, want)
		}
	}
	for text, want := range map[string]string{
		"nearest": "one of nearest-even", "stochastic(0)": "1 to 32", "stochastic(33)": "1 to 32", "stochastic(x)": "1 to 32",
		"stochastic(8,round)": "truncated", "up(3)": "only stochastic", "stochastic(3": "closing",
	} {
		_, err := ParseRounding(text)
		refused(err, text, want)
	}
	for text, want := range map[string]string{
		"row": "one of sequential", "chunk": "at least 1", "chunk(0)": "at least 1", "lanes(-2)": "at least 1",
		"wide(3)": "takes no number", "chunk(x)": "whole number", "chunk(3": "closing", "pairwise(0)": "takes no number",
	} {
		_, err := ParseOrder(text)
		refused(err, text, want)
	}
	for text, want := range map[string]string{
		"": "want a format", "fp16 up nan wide": "want a format", "fp17": "unknown format", "fp16 sideways": "unknown rounding",
		"fp16 up wrap": "only integers", "E4M3 up infinity": "no infinity", "fp16 up over": "unknown overflow",
	} {
		_, err := ParsePoint(text)
		refused(err, text, want)
	}
	for text, want := range map[string]string{
		"product exact": "sum: point without a format", "sum fp16; through fp16": "only binary32",
		"sum fp16 stochastic(17)": "at most 16", "sum fp16; product fp16 stochastic(32)": "product: 32 random bits",
		"sum fp16; outer fp16 stochastic(20)": "outer: 20", "sum fp16; wide; through binary32": "wide", "sum fp16; zigzag": "order",
	} {
		_, err := ParseAccumulate(text)
		refused(err, text, want)
	}
	if _, err := NewMultiplier[float32](Accumulate{Sum: Point{Format: Binary64}}); err == nil || !strings.Contains(err.Error(), "float64") {
		t.Errorf("binary64 sums in float32: %v", err)
	}
	if _, err := NewMultiplier[float32](Accumulate{Sum: Point{Format: Binary32}, Order: Order{Kind: Chunk}}); err == nil {
		t.Error("chunks of no terms are accepted")
	}
	for _, p := range []Point{
		{Format: Binary16, Rounding: Rounding{Bits: 3}},
		{Format: Binary16, Rounding: Rounding{Mode: 77}},
		{Format: Binary16, Rounding: Rounding{Mode: Stochastic, Variant: 7}},
		{Format: Binary16, Overflow: 17},
		{},
	} {
		if p.Check() == nil {
			t.Errorf("%+v is accepted", p)
		}
	}
}

// FuzzParse: the parsers neither panic nor accept what they cannot write back.
func FuzzParse(f *testing.F) {
	for _, s := range []string{
		"fp16", "E4M3(top=ieee,bias=3)", "chunk(64)", "stochastic(8,centred)", "sum fp16; product exact; lanes(4)", "E0M0()", "(", "E99M99",
		"Q2.14(overflow=wrap)", "posit16", "LNS5.10", "table(name=x,-1,0,1)", "binary8p4-draft", "E8M0", "INT8(scale=99.9%,zero=fit)",
		"block(E2M1,block=16,scale=E4M3,rule=nearest,tensor=binary32)", "MXFP8(E5M2)", "aligned(4,24)", "stochastic(8,equal,share=4,register=9)",
	} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		if x, err := ParseFormat(s); err == nil {
			if y, err := ParseFormat(x.String()); err != nil || y != x {
				t.Errorf("format %q: %v reads back as %v, %v", s, x, y, err)
			}
		}
		if x, err := ParseRounding(s); err == nil {
			if y, err := ParseRounding(x.String()); err != nil || y != x {
				t.Errorf("rounding %q: %v, %v", s, y, err)
			}
		}
		if x, err := ParseOrder(s); err == nil {
			if y, err := ParseOrder(x.String()); err != nil || y != x {
				t.Errorf("order %q: %v, %v", s, y, err)
			}
		}
		if x, err := ParseAccumulate(s); err == nil {
			if y, err := ParseAccumulate(x.String()); err != nil || y.String() != x.String() {
				t.Errorf("accumulation %q: %v, %v", s, y, err)
			}
		}
	})
}
