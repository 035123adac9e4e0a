package cost

import (
	"math/big"
	"strings"
	"testing"
)

// TestBlockWidth checks bits a value with block scales. The OCP Microscaling
// specification 1.0 has 32 elements under an 8-bit scale: a quarter of a bit a
// value (from memory).
func TestBlockWidth(t *testing.T) {
	for name, want := range map[string]*big.Rat{
		"mxfp8":      big.NewRat(33, 4),
		"mxfp8-e4m3": big.NewRat(33, 4),
		"MXFP8_E5M2": big.NewRat(33, 4),
		"mxfp6-e3m2": big.NewRat(25, 4),
		"mxfp6-e2m3": big.NewRat(25, 4),
		"mxfp4":      big.NewRat(17, 4),
		"mxint8":     big.NewRat(33, 4),
		"bf16":       big.NewRat(16, 1),
		"E6M9":       big.NewRat(16, 1),
		"e5m2":       big.NewRat(8, 1),
		"binary64":   big.NewRat(64, 1),
		"int12":      big.NewRat(12, 1),
	} {
		f := formatOf(t, name)
		if f.Width().Cmp(want) != 0 {
			t.Errorf("%s takes %v bits a value, want %v", name, f.Width(), want)
		}
		if exact, _ := want.Float64(); f.BitsPerValue() != exact {
			t.Errorf("%s: BitsPerValue %v, want %v", name, f.BitsPerValue(), exact)
		}
	}
	third := Fixed("", 4).WithBlocks("int4 in threes", 3, 8)
	if third.Width().Cmp(big.NewRat(20, 3)) != 0 {
		t.Errorf("4 bits and 8 for every three take %v, want 20/3", third.Width())
	}
}

// TestSize counts the scales that a tensor really needs.
func TestSize(t *testing.T) {
	mx := formatOf(t, "mxfp8")
	tensorScale := Fixed("int8 scaled", 8)
	tensorScale.TensorBits = 32
	for _, c := range []struct {
		what         string
		f            Format
		values, axis uint64
		want         uint64
	}{
		{"plain", FP32, 7, 0, 224},
		{"nothing", mx, 0, 32, 0},
		{"nothing under a tensor scale", tensorScale, 0, 0, 0},
		{"full blocks", mx, 64, 32, 64*8 + 2*8},
		{"a short last block in each of two rows", mx, 66, 33, 66*8 + 2*2*8},
		{"rows of one: a scale each", mx, 5, 1, 5*8 + 5*8},
		{"six channels", mx, 12, 6, 12*8 + 2*8},
		{"an axis that does not fit: through the whole tensor", mx, 65, 32, 65*8 + 3*8},
		{"784 inputs of 100 units: 25 blocks a row", mx, 78400, 784, 78400*8 + 100*25*8},
		{"a scale a tensor", tensorScale, 100, 0, 832},
	} {
		if got := c.f.Size(c.values, c.axis); got != c.want {
			t.Errorf("%s: %d bits, want %d", c.what, got, c.want)
		}
	}
}

func TestFormatNamed(t *testing.T) {
	for name, want := range map[string]Format{
		"FP16":   {Name: "fp16", Family: Float, Bits: 16, Exponent: 5, Fraction: 10},
		" e8m7 ": {Name: "E8M7", Family: Float, Bits: 16, Exponent: 8, Fraction: 7},
		"uint4":  {Name: "uint4", Family: Integer, Bits: 4},
	} {
		if got, ok := FormatNamed(name); !ok || got != want {
			t.Errorf("%q is %+v, want %+v", name, got, want)
		}
	}
	for _, name := range []string{"", "fp", "fp12", "E5", "int0", "M3E4", "E123M4", "mxfp5"} {
		if f, ok := FormatNamed(name); ok {
			t.Errorf("%q is taken for %+v", name, f)
		}
	}
	if !formatOf(t, "E5M10").same(formatOf(t, "fp16")) || formatOf(t, "bf16").same(formatOf(t, "fp16")) {
		t.Error("formats are alike by name, not by build")
	}
}

func TestHeldBy(t *testing.T) {
	logarithm := Format{Name: "log8", Family: Logarithmic, Bits: 8, Exponent: 4, Fraction: 3}
	for _, c := range []struct {
		f, g string
		want bool
	}{
		{"fp16", "fp32", true},
		{"fp32", "fp16", false},
		{"bf16", "fp16", false}, // range
		{"fp16", "bf16", false}, // fraction
		{"e4m3", "fp16", true},
		{"E6M9", "E8M10", true},
		{"mxfp8", "bf16", true},
		{"mxfp8", "fp16", false}, // the scale's range
		{"mxfp8", "mxfp8", true},
		{"mxfp4", "mxfp8", false}, // blocks are computed by their own kind only
		{"int8", "int16", true},
		{"int16", "int8", false},
		{"int8", "fp16", true},  // 7 bits and a sign
		{"int12", "fp16", true}, // 11 bits and a sign
		{"int13", "fp16", false},
		{"int25", "fp32", true},
		{"fp16", "int32", false},
	} {
		if got := formatOf(t, c.f).heldBy(formatOf(t, c.g)); got != c.want {
			t.Errorf("%s held by %s: %v", c.f, c.g, got)
		}
	}
	if logarithm.heldBy(FP32) || !logarithm.heldBy(logarithm) {
		t.Error("a logarithmic format is held by itself only")
	}
}

func TestFormatCheck(t *testing.T) {
	for _, c := range []struct {
		f     Format
		field string
	}{
		{Format{Family: Float, Bits: 8}, "f.name"},
		{Format{Name: "x", Family: "floaty", Bits: 8}, "f.family"},
		{Format{Name: "x", Family: Float}, "f.bits"},
		{Format{Name: "x", Family: Float, Bits: 8, Fraction: -1}, "f.fraction"},
		{Format{Name: "x", Family: Float, Bits: 8, Exponent: 1 << 20}, "f.exponent"},
		{Format{Name: "x", Family: Float, Bits: 8, ScaleBits: 8}, "f.block"},
		{Format{Name: "x", Family: Float, Bits: 8, Block: -32}, "f.block"},
		{Format{Name: "x", Family: Float, Bits: 8, TensorBits: -1}, "f.tensor_bits"},
	} {
		var e fieldErrors
		c.f.check("f", &e)
		if len(e) != 1 || e[0].Field != c.field || e[0].Reason == "" || e[0].Remedy == "" {
			t.Errorf("%+v: %v, want one error in %s", c.f, e, c.field)
		}
		if len(e) == 1 && strings.ContainsRune(e[0].Error(), '\n') {
			t.Errorf("%q is more than one line", e[0])
		}
	}
}
