package cost

import (
	"testing"
)

// TestListedOperations holds the default table against Horowitz, ISSCC 2014,
// 45 nm, 0.9 V: int32 and fp32 as quoted in PMC8934428 table 3, int8 and fp16
// second hand, the 16-bit integer addition from memory.
func TestListedOperations(t *testing.T) {
	e := DefaultEnergy()
	for name, want := range map[string][2]float64{
		"int8": {0.2, 0.03}, "int32": {3.1, 0.1}, "fp16": {1.1, 0.4}, "fp32": {3.7, 0.9},
	} {
		f := formatOf(t, name)
		if m := e.multiply(f, f); m != (charge{pj: want[0]}) {
			t.Errorf("%s multiplication: %+v, want %v", name, m, want[0])
		}
		if a := e.add(f); a != (charge{pj: want[1]}) {
			t.Errorf("%s addition: %+v, want %v", name, a, want[1])
		}
	}
	if a := e.add(formatOf(t, "int16")); a != (charge{pj: 0.05}) {
		t.Errorf("int16 addition: %+v, want 0.05", a)
	}
}

// TestExtrapolation works the rules out by hand: significands of 8 bits in
// bfloat16, 4 in E4M3, 11 in binary16, 24 in binary32, 53 in binary64.
func TestExtrapolation(t *testing.T) {
	e := DefaultEnergy()
	logarithm := Format{Name: "log8", Family: Logarithmic, Bits: 8, Exponent: 4, Fraction: 3}
	bf16, e4m3, fp16, fp64 := formatOf(t, "bf16"), formatOf(t, "e4m3"), formatOf(t, "fp16"), formatOf(t, "fp64")
	for _, c := range []struct {
		what string
		got  charge
		want float64
		rule string
	}{
		{"bf16 multiplication", e.multiply(bf16, bf16), 1.1 * 64 / 121, ruleMultiply},
		{"E4M3 multiplication", e.multiply(e4m3, e4m3), 1.1 * 16 / 121, ruleMultiply},
		{"MXFP8 multiplication", e.multiply(formatOf(t, "mxfp8"), formatOf(t, "mxfp8")), 1.1 * 16 / 121, ruleMultiply},
		{"fp64 multiplication", e.multiply(fp64, fp64), 3.7 * 53 * 53 / 576, ruleMultiply},
		{"fp16 x fp32", e.multiply(fp16, FP32), 1.1 + (3.7-1.1)*(264-121)/(576-121), ruleMultiply},
		{"fp32 x fp16", e.multiply(FP32, fp16), 1.1 + (3.7-1.1)*(264-121)/(576-121), ruleMultiply},
		{"1-8-10 multiplication", e.multiply(formatOf(t, "E8M10"), formatOf(t, "E8M10")), 1.1, ruleMultiply},
		{"int16 multiplication", e.multiply(formatOf(t, "int16"), formatOf(t, "int16")), 0.2 + (3.1-0.2)*(256-64)/(1024-64), ruleMultiply},
		{"int4 multiplication", e.multiply(formatOf(t, "int4"), formatOf(t, "int4")), 0.2 * 16 / 64, ruleMultiply},
		{"int8 x fp16", e.multiply(formatOf(t, "int8"), fp16), 1.1 * 88 / 121, ruleMultiply},
		{"logarithmic multiplication", e.multiply(logarithm, logarithm), 0.03, ruleLog},
		{"bf16 addition", e.add(bf16), 0.4 * 8 / 11, ruleAdd},
		{"18-bit significand addition", e.add(Plain("E8M16", 8, 16)), 0.4 + (0.9-0.4)*(17-11)/(24-11), ruleAdd},
		{"int24 addition", e.add(formatOf(t, "int24")), 0.05 + (0.1-0.05)*8/16, ruleAdd},
		{"exact accumulator", e.addition(wideFormat(fp16, fp16, 1000)), 0.1 * 91 / 32, ruleExact},
	} {
		if !near(c.got.pj, c.want) || c.got.extrapolated != c.rule {
			t.Errorf("%s: %v pJ by %q, want %v by %q", c.what, c.got.pj, c.got.extrapolated, c.want, c.rule)
		}
	}
}

// TestMonotone: between, below and above listed rows a wider significand never
// costs less.
func TestMonotone(t *testing.T) {
	e := DefaultEnergy()
	multiply, add := 0.0, 0.0
	for fraction := range 60 {
		// Seven exponent bits: no row of the table, so the rules alone.
		f := Plain("x", 7, fraction)
		m, a := e.multiply(f, f), e.add(f)
		if m.pj < multiply || a.pj < add || m.extrapolated == "" || a.extrapolated == "" {
			t.Errorf("%d fraction bits: %+v and %+v after %v and %v", fraction, m, a, multiply, add)
		}
		multiply, add = m.pj, a.pj
	}
}

// TestOneFamily: a table of integers alone still prices floats, by their
// significands, and says so.
func TestOneFamily(t *testing.T) {
	e := DefaultEnergy()
	e.Operations = e.Operations[:1] // int8
	if err := e.Validate(); err != nil {
		t.Fatal(err)
	}
	if m := e.multiply(FP32, FP32); !near(m.pj, 0.2*576/64) || m.extrapolated == "" {
		t.Errorf("fp32 multiplication from int8: %+v", m)
	}
}

// TestScaleCharge: a product of two blocks adds its two scales once.
func TestScaleCharge(t *testing.T) {
	n := twoLayers()
	mx := formatOf(t, "mxfp8")
	plain := Uniform(&n, &Momentum, "plain", Plain("E4M3", 4, 3))
	blocks := Uniform(&n, &Momentum, "blocks", mx)
	r := estimate(t, n, DefaultMachine, plain, blocks)
	got := r.Arms[1].Once.Inference.Total.Energy.Add - r.Arms[0].Once.Inference.Total.Energy.Add
	// 79400 products in blocks of 32: 78400/32 + ceil(1000/32) additions of 8 bits.
	if want := (2450 + 32) * 0.03; got < want*(1-1e-9) || got > want*(1+1e-9) {
		t.Errorf("block scales add %v pJ, want %v", got, want)
	}
}
