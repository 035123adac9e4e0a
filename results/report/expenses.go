package report

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/results"
)

// costSection is what every arm would cost by model; nil when it was not worked out.
func costSection(v *view) any {
	c := v.Costs
	if c == nil {
		return nil
	}
	return struct {
		Answer                string
		Tables                []*tabular
		Assumptions, Cautions list
	}{plain(c.Answer), v.costTables(), list{Items: v.assumptions()}, list{Items: v.costCautions()}}
}

// costTables are the tables of the section.
func (v *view) costTables() []*tabular {
	return []*tabular{v.costTable(), v.inferenceTable(), v.trafficTable()}
}

// assumptions are the tables and rules that the figures rest on.
func (v *view) assumptions() []string {
	out := []string{"Machine: " + plain(v.Costs.Machine), "Energy: " + plain(v.Costs.Energy)}
	for _, a := range v.Costs.Assumptions {
		out = append(out, plain(a))
	}
	for _, r := range v.Costs.Rules {
		out = append(out, "Starred figures: "+plain(r))
	}
	return out
}

// costCautions are what a reader must not be misled about, and doubts.
func (v *view) costCautions() []string {
	var out []string
	for _, a := range slices.Concat(v.Costs.Cautions, v.Costs.Warnings) {
		out = append(out, plain(a))
	}
	return out
}

// billed goes through the arms that have a bill, the baseline first.
func (v *view) billed(each func(a *armView, b *results.Bill)) {
	for _, a := range v.arms {
		if a.Bill != nil {
			each(a, a.Bill)
		}
	}
}

// costTable is a training step of every arm.
func (v *view) costTable() *tabular {
	t := &tabular{
		Caption: fmt.Sprintf("A training step of %s, by model, against FP32", plural(int(v.Costs.Batch), "example")),
		Columns: columns("Arm", "#memory", "#bytes moved", "#% of FP32's", "#times as fast", "waits for", "#energy, % of FP32's"),
		Notes:   []string{"Two figures are two models of reuse: each tensor moved once a phase, and products in blocks through a cache. A star marks figures for which a table had no row and a stated rule stood in."},
	}
	v.billed(func(a *armView, b *results.Bill) {
		t.Rows = append(t.Rows, append([]string{a.Label(), byteWords(b.TrainingBits)}, chargeCells(&b.Step, &b.StepTiled)...))
	})
	return t
}

// inferenceTable is an inference of every arm.
func (v *view) inferenceTable() *tabular {
	t := &tabular{
		Caption: "An inference, by model, against FP32",
		Columns: columns("Arm", "#memory at the endpoint", "#bytes moved", "#% of FP32's", "#times as fast", "waits for", "#energy, % of FP32's"),
	}
	v.billed(func(a *armView, b *results.Bill) {
		t.Rows = append(t.Rows, append([]string{a.Label(), byteWords(b.EndpointBits)}, chargeCells(&b.Inference, &b.InferenceTiled)...))
	})
	return t
}

// chargeCells spells traffic, time and energy under both models of reuse.
func chargeCells(once, tiled *results.Charge) []string {
	return []string{
		byteSpan(once.Bits, tiled.Bits), shareSpan(once.BitShare, tiled.BitShare),
		starred(span(significant(once.Speedup, 3), significant(tiled.Speedup, 3)), once.TimeExtrapolated || tiled.TimeExtrapolated),
		span(plain(once.Binds), plain(tiled.Binds)),
		starred(shareSpan(once.EnergyShare, tiled.EnergyShare), once.EnergyExtrapolated || tiled.EnergyExtrapolated),
	}
}

// trafficTable is the bytes of a step by what they hold.
func (v *view) trafficTable() *tabular {
	t := &tabular{
		Caption: "Bytes moved in a training step, each tensor once a phase, by what they hold",
		Columns: columns("Arm", "#weights", "#activations", "#gradients", "#optimizer state", "#master copy", "#together", "#random bits drawn"),
	}
	v.billed(func(a *armView, b *results.Bill) {
		s := &b.Step
		row := []string{a.Label()}
		for _, n := range []uint64{s.Weights, s.Activations, s.Gradients, s.State, s.Master, s.Bits} {
			row = append(row, byteWords(n))
		}
		t.Rows = append(t.Rows, append(row, count(s.Random)))
	})
	return t
}

// byteWords spells a number of bits in bytes: "1.5 KiB".
func byteWords(bits uint64) string {
	n := float64(bits) / 8
	for _, u := range []string{"B", "KiB", "MiB", "GiB", "TiB"} {
		if n < 1000 || u == "TiB" {
			return significant(n, 3) + " " + u
		}
		n /= 1024
	}
	return missing
}

// byteSpan spells two numbers of bits, once where they are the same in print.
func byteSpan(a, b uint64) string { return span(byteWords(a), byteWords(b)) }

// span spells what two models say; their common unit stands once.
func span(a, b string) string {
	if a == b {
		return a
	}
	if x, unit, ok := strings.Cut(a, " "); ok {
		if _, other, _ := strings.Cut(b, " "); other == unit && len(unit) <= 3 {
			a = x
		}
	}
	return a + " to " + b
}

// starred marks a figure that was extrapolated.
func starred(s string, extrapolated bool) string {
	if extrapolated {
		return s + " *"
	}
	return s
}
