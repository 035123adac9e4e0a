package quant

import (
	"math"
	"slices"
	"strings"
	"testing"
)

func mustFormat(t testing.TB, name string) Float {
	t.Helper()
	f, err := ParseFormat(name)
	if err != nil {
		t.Fatal(err)
	}
	return f.(Float)
}

// TestLimits: the figures of the named formats, from their definitions: IEEE
// 754-2019 table 3.5 (from memory), OCP OFP8 1.0 tables 1 and 2, OCP MX 1.0 section
// 5.3, each recomputed by an exact rational decode.
func TestLimits(t *testing.T) {
	for _, c := range []struct {
		name                   string
		bits                   int
		max, normal, subnormal float64
		infinity, nan          bool
		policy                 Overflow
	}{
		{"binary16", 16, 65504, 0x1p-14, 0x1p-24, true, true, ToInfinity},
		{"bfloat16", 16, 0x1.fep127, 0x1p-126, 0x1p-133, true, true, ToInfinity},
		{"binary32", 32, math.MaxFloat32, 0x1p-126, 0x1p-149, true, true, ToInfinity},
		{"binary64", 64, math.MaxFloat64, 0x1p-1022, 0x1p-1074, true, true, ToInfinity},
		{"E8M10", 19, 0x1.ffcp127, 0x1p-126, 0x1p-136, true, true, ToInfinity},
		{"E5M2", 8, 57344, 0x1p-14, 0x1p-16, true, true, Saturate},
		{"E4M3", 8, 448, 0x1p-6, 0x1p-9, false, true, Saturate},
		{"E4M3(top=ieee)", 8, 240, 0x1p-6, 0x1p-9, true, true, ToInfinity},
		{"E3M2", 6, 28, 0.25, 0.0625, false, false, Saturate},
		{"E2M3", 6, 7.5, 1, 0.125, false, false, Saturate},
		{"E2M1", 4, 6, 1, 0.5, false, false, Saturate},
		{"E6M9", 16, 0x1.ff8p31, 0x1p-30, 0x1p-39, true, true, ToInfinity},
		{"E8M0(top=ieee)", 9, 0x1p127, 0x1p-126, 0x1p-126, true, false, ToInfinity},
		{"E0M3(bias=1,top=finite)", 4, 0.875, 0, 0.125, false, false, Saturate},
		{"E5M10(subnormals=flush)", 16, 65504, 0x1p-14, 0x1p-14, true, true, ToInfinity},
	} {
		l := mustFormat(t, c.name).Limits()
		if l.Bits != c.bits || l.Max != c.max || l.Lowest != -c.max || l.MinNormal != c.normal || l.MinSubnormal != c.subnormal {
			t.Errorf("%s: %+v", c.name, l)
		}
		if l.HasInfinity != c.infinity || l.HasNaN != c.nan || l.DefaultOverflow != c.policy {
			t.Errorf("%s: specials %+v", c.name, l)
		}
	}
}

// TestFits32: the bounds of binary32 in precision and range.
func TestFits32(t *testing.T) {
	for name, want := range map[string]bool{
		"fp16": true, "bf16": true, "fp32": true, "fp64": false, "E4M3": true, "E8M22": true, "E8M24": false,
		"E9M10": false, "E8M23(bias=128)": false, "E8M22(bias=128)": true, "E8M7(top=finite)": false, "E8M7(bias=126)": false,
	} {
		if got := Fits32(mustFormat(t, name)); got != want {
			t.Errorf("Fits32(%s) = %v", name, got)
		}
	}
}

// TestCodes goes through every code of the formats of up to 16 bits: decoding gives
// a value that encodes to the same code and rounds to itself, in ascending order.
func TestCodes(t *testing.T) {
	names := []string{"fp16", "bf16", "E6M9", "E4M11", "E5M10(subnormals=flush)", "E4M3", "E5M2", "E3M2", "E2M3", "E2M1", "E8M0(top=ieee)", "E1M6", "E0M7(bias=0,top=finite)", "E4M3(bias=-20,top=finite)"}
	for _, name := range names {
		f := mustFormat(t, name)
		l := f.Limits()
		p := Point{Format: f}
		last := math.Inf(-1)
		half := uint64(1) << (l.Bits - 1)
		for code := range 2 * half {
			v := f.Decode(code)
			if n := code &^ half; f.flush && n>>f.fraction == 0 && n != 0 {
				if v != 0 || math.Signbit(v) != (code >= half) {
					t.Fatalf("%s: flushed code %x reads as %v", name, code, v)
				}
				continue
			}
			if v != v {
				if back, ok := f.Encode(v); !ok || f.Decode(back) == f.Decode(back) {
					t.Fatalf("%s: NaN encodes to %x %v", name, back, ok)
				}
				continue
			}
			back, ok := f.Encode(v)
			if !ok || back != code {
				t.Fatalf("%s: code %x is %v, which encodes to %x %v", name, code, v, back, ok)
			}
			if r, e := p.Round(Exactly(v), 0); !math.IsInf(v, 0) && (!same(r, v) || e != NoEvent) {
				t.Fatalf("%s: value %v of code %x rounds to %v with event %d", name, v, code, r, e)
			}
			if code == half {
				last = math.Inf(1)
			}
			if code < half && v <= last && code > 0 || code > half && v >= last {
				t.Fatalf("%s: code %x is %v after %v", name, code, v, last)
			}
			last = v
		}
	}
}

// TestEncodeRefuses: what is not a value of the format has no code.
func TestEncodeRefuses(t *testing.T) {
	for _, c := range []struct {
		name string
		x    float64
	}{
		{"fp16", 0.1},
		{"fp16", 65520},
		{"fp16", 1e300},
		{"fp16", 0x1p-25},
		{"E4M3", 480},
		{"E4M3", math.Inf(1)},
		{"E2M1", math.NaN()},
		{"E2M1", math.Inf(-1)},
		{"E8M0(top=ieee)", math.NaN()},
		{"E5M10(subnormals=flush)", 0x1p-20},
		{"fp64", math.NaN()},
	} {
		code, ok := mustFormat(t, c.name).Encode(c.x)
		if c.name == "fp64" { // but binary64 has the canonical NaN
			if !ok || code != 0x7ff8000000000000 {
				t.Errorf("NaN of binary64: %x %v", code, ok)
			}
		} else if ok {
			t.Errorf("%s: %v has code %x", c.name, c.x, code)
		}
	}
}

// TestDecodeOfDraft8Bit: another layout than the named ones, that of the IEEE P3109
// draft (signed, bias 2^(K-P-1)), stated by formula: the largest value of K = 8 and
// P = 4 is 224 and of P = 3 49152, which here are codes 7E of E4M3 with bias 8 and
// E5M2 with bias 16 (the draft has infinity at 7F).
func TestDecodeOfDraft8Bit(t *testing.T) {
	if v := mustFormat(t, "E4M3(bias=8,top=finite)").Decode(0x7e); v != 224 {
		t.Errorf("P = 4: %v", v)
	}
	if v := mustFormat(t, "E5M2(bias=16,top=finite)").Decode(0x7e); v != 49152 {
		t.Errorf("P = 3: %v", v)
	}
}

// TestNames: words to canonical names and back.
func TestNames(t *testing.T) {
	for word, want := range map[string]string{
		"fp16": "binary16", "FP16": "binary16", "Binary16": "binary16", "E5M10": "binary16", "bf16": "bfloat16",
		"e8m7": "bfloat16", "fp32": "binary32", "fp64": "binary64", "e11m52": "binary64", "e4m3": "E4M3", "E5M2": "E5M2",
		"e6m9": "E6M9", " E6M9 ": "E6M9", "E4M3(top=ieee)": "E4M3(top=ieee)", "E4M3( TOP = ieee )": "E4M3(top=ieee)",
		"E4M3(top=nan)": "E4M3", "E4M3(bias=7)": "E4M3", "E4M3(bias=8)": "E4M3(bias=8)",
		"E4M3(overflow=nan)": "E4M3(overflow=nan)", "E5M2(overflow=infinity)": "E5M2(overflow=infinity)",
		"E4M3(overflow=nan,top=finite)":        "E4M3(top=finite,overflow=nan)",
		"fp16(subnormals=flush)":               "binary16(subnormals=flush)",
		"fp16(subnormals=keep)":                "binary16",
		"E6M9(bias=20,top=finite)":             "E6M9(bias=20,top=finite)",
		"e0m4(bias=2,top=nan)":                 "E0M4(bias=2,top=nan)",
		"E4M3(top=ieee,overflow=saturate)":     "E4M3(top=ieee,overflow=saturate)",
		"binary16(top=finite)":                 "binary16(top=finite)",
		"E5M2(top=nan,subnormals=flush)":       "E5M2(top=nan,subnormals=flush)",
		"E8M23(subnormals=flush,overflow=nan)": "binary32(subnormals=flush,overflow=nan)",
	} {
		f, err := ParseFormat(word)
		if err != nil {
			t.Errorf("%q: %v", word, err)
			continue
		}
		if f.String() != want {
			t.Errorf("%q is called %q, want %q", word, f, want)
		}
		if again, err := ParseFormat(f.String()); err != nil || again != f {
			t.Errorf("%q reads back as %v, %v", f, again, err)
		}
	}
}

// TestNameErrors: unknown and impossible formats are refused with the reason.
func TestNameErrors(t *testing.T) {
	for word, want := range map[string]string{
		"":                        "unknown format",
		"bf15":                    "bf16",
		"binari32":                "binary32",
		"E4M4M":                   "E4M3",
		"E12M3":                   "12 exponent bits",
		"E5M53":                   "53 fraction bits",
		"E0M4":                    "bias",
		"E0M4(bias=1)":            "top",
		"E0M0(bias=1,top=finite)": "at least one bit",
		"E1M0":                    "no finite value",
		"E4M3(bias=x)":            "not an integer",
		"E4M3(bias=3000)":         "beyond binary64",
		"E11M52(top=finite)":      "beyond binary64",
		"E4M3(top=round)":         "ieee, nan, finite",
		"E4M3(subnormals=no)":     "keep or flush",
		"E4M3(overflow=infinity)": "no infinity",
		"E4M3(overflow=wrap)":     "only integers",
		"E4M3(overflow=up)":       "unknown overflow policy",
		"E4M3(width=8)":           "unknown option",
		"E4M3(bias=1,bias=2)":     "twice",
		"E4M3(top=ieee":           "closing parenthesis",
		"E4M3()":                  "unknown option",
		"E0M3(bias=0,top=finite,subnormals=flush)": "flushed",
		"E-4M3": "unknown format",
		"E+4M3": "unknown format",
		"EM":    "unknown format",
	} {
		f, err := ParseFormat(word)
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v, %v; want an error with %q", word, f, err, want)
		}
	}
}

func TestNearestNames(t *testing.T) {
	got := nearest("binry16", []string{"E4M3", "fp16", "binary32", "binary16"}, 2)
	if !slices.Equal(got, []string{"binary16", "binary32"}) {
		t.Errorf("nearest: %v", got)
	}
	for _, c := range []struct {
		a, b string
		want int
	}{{"", "", 0}, {"abc", "", 3}, {"kitten", "sitting", 3}, {"fp16", "bf16", 2}} {
		if got := editDistance(c.a, c.b); got != c.want {
			t.Errorf("distance of %q and %q is %d, want %d", c.a, c.b, got, c.want)
		}
	}
}

// conversions are values and their codes in nearest-even: published tables of the
// formats, recomputed with exact rationals and F16C hardware where it has the
// format. saturated is the code under saturation where it differs.
var conversions = []struct {
	format    string
	x         float64
	code      uint64
	saturated uint64
}{
	{"fp16", 0.1, 0x2e66, 0},
	{"fp16", 1.0 / 3, 0x3555, 0},
	{"fp16", 2049, 0x6800, 0},
	{"fp16", 2051, 0x6802, 0},
	{"fp16", 65519, 0x7bff, 0},
	{"fp16", 65520, 0x7c00, 0x7bff},
	{"fp16", 0x1p-25, 0, 0},
	{"fp16", 2.9802325e-8, 1, 0},
	{"fp16", 1.5 * 0x1p-24, 2, 0},
	{"fp16", 1 + 0x1p-11 + 0x1p-40, 0x3c01, 0}, // through binary32 it would be 3c00
	{"bf16", 0.1, 0x3dcd, 0},
	{"bf16", 1.0 / 3, 0x3eab, 0},
	{"bf16", math.Pi, 0x4049, 0},
	{"bf16", 257, 0x4380, 0},
	{"bf16", 259, 0x4382, 0},
	{"bf16", 1 + 0x1p-8, 0x3f80, 0},
	{"bf16", 1 + 3*0x1p-8, 0x3f82, 0},
	{"bf16", 3.4e38, 0x7f80, 0x7f7f},
	{"E8M10", 0.1, 0x1ee66, 0},
	{"E8M10", 1.0 / 3, 0x1f555, 0},
	{"E8M10", 2049, 0x22800, 0},
	{"E5M2(overflow=infinity)", 0.1, 0x2e, 0},
	{"E5M2", 1.125, 0x3c, 0},
	{"E5M2", 1.375, 0x3e, 0},
	{"E5M2", 61439, 0x7b, 0},
	{"E5M2(overflow=infinity)", 61440, 0x7c, 0x7b},
	{"E5M2", 0x1p-17, 0, 0},
	{"E5M2", 7.63e-6, 1, 0},
	{"E5M2", 1.5 * 0x1p-16, 2, 0},
	{"E4M3", 0.1, 0x1d, 0},
	{"E4M3", 1.0625, 0x38, 0},
	{"E4M3", 1.1875, 0x3a, 0},
	{"E4M3", 17, 0x58, 0},
	{"E4M3", 19, 0x5a, 0},
	{"E4M3", 464, 0x7e, 0},
	{"E4M3(overflow=nan)", 464, 0x7e, 0},
	{"E4M3(overflow=nan)", 465, 0x7f, 0x7e},
	{"E4M3", 0x1p-10, 0, 0},
	{"E4M3", 0.00098, 1, 0},
	{"E3M2", 0.1, 2, 0},
	{"E3M2", 1.125, 0x0c, 0},
	{"E3M2", 1.375, 0x0e, 0},
	{"E3M2", 31, 0x1f, 0},
	{"E3M2", 0x1p-5, 0, 0},
	{"E3M2", 0.0313, 1, 0},
	{"E2M3", 0.1, 1, 0},
	{"E2M3", 1.0625, 8, 0},
	{"E2M3", 8, 0x1f, 0},
	{"E2M3", 0.0625, 0, 0},
	{"E2M3", 0.0626, 1, 0},
	{"E2M1", 0.25, 0, 0},
	{"E2M1", 0.26, 1, 0},
	{"E2M1", 0.75, 2, 0},
	{"E2M1", 1.25, 2, 0},
	{"E2M1", 1.75, 4, 0},
	{"E2M1", 2.5, 4, 0},
	{"E2M1", 3.5, 6, 0},
	{"E2M1", 5, 6, 0},
	{"E2M1", 5.1, 7, 0},
	{"E2M1", 100, 7, 0},
}

func TestConversions(t *testing.T) {
	for _, c := range conversions {
		f := mustFormat(t, c.format)
		sign := uint64(1) << (f.Limits().Bits - 1)
		for _, policy := range []Overflow{FormatDefault, Saturate} {
			p := Point{Format: f, Overflow: policy}
			want := c.code
			if policy == Saturate && c.saturated != 0 {
				want = c.saturated
			}
			for _, neg := range []bool{false, true} {
				v, _ := p.Round(Exactly(withSign(c.x, neg)), 0)
				code, ok := f.Encode(v)
				w := want
				if neg && v == v {
					w |= sign
				}
				if !ok || code != w {
					t.Errorf("%v: %v (negative %v) has code %x %v, want %x", p, c.x, neg, code, ok, w)
				}
			}
		}
	}
}
