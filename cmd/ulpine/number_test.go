package main

import (
	"encoding/json"
	"math"
	"strings"
	"testing"

	"ulpine/quant"
)

// TestNumberFigures: the figures of the standard formats. Sources: IEEE 754-2019
// table 3.5 (binary formats, from memory); OFP8 1.0 tables 1 and 2 (second hand);
// MX 1.0 section 5.3 (second hand); all recomputed by exact decoding.
func TestNumberFigures(t *testing.T) {
	for _, c := range []struct {
		name                   string
		bits                   int
		max, normal, subnormal float64
		infinity, nan          bool
		overflow               string
	}{
		{"fp16", 16, 65504, 0x1p-14, 0x1p-24, true, true, "infinity"},
		{"bf16", 16, 0x1.fep127, 0x1p-126, 0x1p-133, true, true, "infinity"},
		{"fp32", 32, math.MaxFloat32, 0x1p-126, 0x1p-149, true, true, "infinity"},
		{"fp64", 64, math.MaxFloat64, 0x1p-1022, 0x1p-1074, true, true, "infinity"},
		{"E8M10", 19, 0x1.ffcp127, 0x1p-126, 0x1p-136, true, true, "infinity"},
		{"E5M2", 8, 57344, 0x1p-14, 0x1p-16, true, true, "saturate"},
		{"E4M3", 8, 448, 0x1p-6, 0x1p-9, false, true, "saturate"},
		{"E3M2", 6, 28, 0.25, 0.0625, false, false, "saturate"},
		{"E2M3", 6, 7.5, 1, 0.125, false, false, "saturate"},
		{"E2M1", 4, 6, 1, 0.5, false, false, "saturate"},
	} {
		var g figures
		if err := json.Unmarshal([]byte(must(t, "number", c.name, "--json")), &g); err != nil {
			t.Fatal(err)
		}
		if g.Bits != c.bits || g.Max != c.max || *g.LeastNormal != c.normal || *g.LeastSubnormal != c.subnormal ||
			g.Infinity != c.infinity || g.NaN != c.nan || g.DefaultOverflow != c.overflow {
			t.Errorf("%s: %+v", c.name, g)
		}
		if want := 1 << c.bits; c.bits <= 8 && len(g.Codes) != want || c.bits > 8 && g.Codes != nil {
			t.Errorf("%s: %d codes", c.name, len(g.Codes))
		}
		if u := math.Ldexp(1, -g.Fraction-1); *g.UnitRoundoff != u {
			t.Errorf("%s: unit roundoff %v", c.name, *g.UnitRoundoff)
		}
	}
}

// TestNumberCodes holds the tables of narrow formats to the oracle's decoding.
func TestNumberCodes(t *testing.T) {
	for _, name := range []string{"E4M3", "E5M2", "E3M2", "E2M3", "E2M1", "E4M3(top=ieee)", "E3M4(bias=9)", "E4M3(subnormals=flush)", "Q2.6", "UQ1.5", "posit8", "posit5", "binary8p3-draft", "binary4p2-draft"} {
		f, err := quant.ParseFormat(name)
		if err != nil {
			t.Fatal(err)
		}
		o, err := oracleOf(f)
		if err != nil {
			t.Fatal(err)
		}
		for code, c := range codesOf(f) {
			if want := o.Decode(uint64(code)); !sameBits(c.value, want) {
				t.Errorf("%s code %x: %v, want %v", name, code, c.value, want)
			}
		}
	}
}

func TestNumberText(t *testing.T) {
	out := must(t, "number", "E4M3")
	for _, want := range []string{"bias 7", "448, code 7e", "2^-9, code 01", "2^-4", "107.2 dB", "17.81 binades", "NaN, negative zero", "saturate", "ff    1 1111 111  nan"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	_, errs, code := ulpine(t, "number", "E4N3")
	if code != exitBadInput || !strings.Contains(errs, "E4M3") || strings.Count(errs, "\n") != 1 {
		t.Errorf("code %d, %q", code, errs)
	}
}
