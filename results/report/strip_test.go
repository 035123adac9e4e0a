package report

import (
	"strings"
	"testing"

	"ulpine/results"
)

func TestStrips(t *testing.T) {
	set := func(point, format string, e, f, bits int, rounding, order string) results.Setting {
		return results.Setting{Point: point, Format: format, Exponent: e, Fraction: f, Bits: bits, Rounding: rounding, Order: order}
	}
	got := strips([]results.Setting{
		set("input", "bf16", 8, 7, 16, "nearest-even", ""),
		set("forward.weight", "bf16", 8, 7, 16, "nearest-even", ""),
		set("forward.product", "fp32", 8, 23, 32, "nearest-even", ""),
		set("forward.sum", "fp32", 8, 23, 32, "nearest-even", "sequential"),
		set("input gradient.outer", "fp32", 8, 23, 32, "nearest-even", ""),
		set("update.master", "bf16", 8, 7, 16, "stochastic r=16 truncated", ""),
	})
	want := []strip{
		{"stored", "bf16", 1, 8, 0, 7, 0, ""},
		{"products, sums", "fp32", 1, 8, 0, 23, 0, ""},
		{"update", "bf16", 1, 8, 0, 7, 16, "stochastic r=16 truncated"},
	}
	if len(got) != len(want) {
		t.Fatalf("%+v", got)
	}
	for i := range want {
		if got[i] != want[i] {
			t.Errorf("strip %d is %+v, want %+v", i, got[i], want[i])
		}
	}
	if got = strips([]results.Setting{set("forward.weight", "a", 4, 3, 8, "", ""), set("input_gradient.weight", "a", 4, 3, 8, "reused", "")}); len(got) != 1 || got[0].How != "" {
		t.Errorf("a reused value has a strip of its own: %+v", got)
	}
	one := strips([]results.Setting{set("input", "fp32", 8, 23, 32, "nearest-even", ""), set("update.step", "fp32", 8, 23, 32, "nearest-even", "")})
	if len(one) != 1 || one[0].Where != "everything" {
		t.Errorf("%+v", one)
	}
	if q := newStrip(set("input", "Q3.12", 0, 12, 16, "exact", "")); q.Sign != 1 || q.Integer != 3 || q.Fraction != 12 || q.bits() != 16 || q.Split() != "1+3+12" {
		t.Errorf("fixed point: %+v", q)
	}
	if s := newStrip(results.Setting{Format: "?"}); s.bits() != 0 || s.glyph() == nil {
		t.Errorf("a format of unknown width: %+v", s)
	}
	mixed := strips([]results.Setting{
		set("forward.weight", "a", 4, 3, 8, "", ""), set("forward.weight", "a", 4, 3, 8, "", ""), set("forward.weight", "b", 5, 2, 8, "", ""),
		set("forward.weight", "c", 5, 10, 16, "", ""), set("forward.weight", "d", 8, 7, 16, "", ""),
	})
	if len(mixed) != 2 || mixed[0].Format != "a" || mixed[1].How != "and 2 more" {
		t.Errorf("more formats than strips: %+v", mixed)
	}
}

func TestGroups(t *testing.T) {
	for point, want := range map[string]string{
		"input": "stored", "forward.weight": "stored", "loss.gradient": "stored", "weight_gradient.result": "stored",
		"forward.product": "products", "input gradient.product": "products", "weight-gradient.sum": "sums", "forward.outer": "sums",
		"update.state": "update", "update.master": "update", "update.state.velocity": "update",
	} {
		if got := groupOf(point); got != want {
			t.Errorf("%s is in %s, want %s", point, got, want)
		}
	}
}

// Points that only some layers have stand where a step comes to them.
func TestStationsInOrder(t *testing.T) {
	study := &results.Study{Arms: []results.Arm{{}}}
	for _, p := range []string{
		"update.master", "weight_gradient.residue", "weight_gradient.result", "input_gradient.statistic",
		"input_gradient.sum", "forward.activation", "forward.moment", "forward.statistic", "forward.sum", "forward.operand",
	} {
		study.Arms[0].Settings = append(study.Arms[0].Settings, results.Setting{Point: p})
	}
	var got []string
	for _, s := range mapStations(newView(study)) {
		got = append(got, s.point)
	}
	want := "operand sum statistic moment activation result residue sum statistic master"
	if s := strings.Join(got, " "); s != want {
		t.Errorf("%s, want %s", s, want)
	}
}

// TestStops reads the step map of the invented study.
func TestStops(t *testing.T) {
	v := newView(invented())
	at := mapStations(v)
	if at[0] != (station{"input", "input"}) || at[1] != (station{"forward", "weight"}) || at[len(at)-1] != (station{"update", "master"}) {
		t.Errorf("stations %v", at)
	}
	find := func(arm int, phase, point string) stop {
		for i, s := range v.stops(v.arms[arm], at) {
			if at[i] == (station{phase, point}) {
				return s
			}
		}
		t.Fatalf("no station %s %s", phase, point)
		return stop{}
	}
	for _, s := range v.stops(v.baseline, at) {
		if s.changed {
			t.Error("the baseline differs from itself")
		}
	}
	if s := find(1, "update", "master"); !s.changed || !s.stochastic || s.guilty || s.least != 16 {
		t.Errorf("stochastic update: %+v", s)
	}
	if s := find(1, "forward", "sum"); s.changed || s.least != 32 {
		t.Errorf("FP32 sums: %+v", s)
	}
	if s := find(2, "update", "master"); !s.guilty || s.stochastic {
		t.Errorf("the guilty point: %+v", s)
	}
	if s := find(3, "forward", "sum"); !s.changed || s.least != 32 {
		t.Errorf("the order of a sum is a change: %+v", s)
	}
	v.arms[2].Settings = []results.Setting{{Layer: 0, Point: "input_gradient.weight", Format: "bfloat16", Bits: 16, Rounding: "reused"}}
	v.baseline.Settings = []results.Setting{{Layer: 0, Point: "input_gradient.weight", Format: "binary32", Bits: 32, Rounding: "reused"}}
	if s := find(2, "input gradient", "weight"); s.changed || !s.idle {
		t.Errorf("a point that reuses another's values: %+v", s)
	}
	v.baseline = newView(invented()).baseline
	if s := find(4, "forward", "weight"); s.least != 16 || s.most != 32 {
		t.Errorf("layers that differ: %+v", s)
	}
}
