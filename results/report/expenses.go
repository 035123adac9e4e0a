package report

import (
	"fmt"
	"strings"

	"ulpine/results"
)

// costSection is what every arm would cost by model; nil when it was not worked out.
func costSection(v *view) any {
	c := v.Costs
	if c == nil {
		return nil
	}
	data := struct {
		Answer      string
		Tables      []*tabular
		Assumptions list
		Cautions    list
	}{Answer: plain(c.Answer)}
	data.Tables = append(data.Tables, v.costTable(), v.trafficTable())
	for _, a := range append([]string{"Machine: " + c.Machine, "Energy: " + c.Energy}, c.Assumptions...) {
		data.Assumptions.Items = append(data.Assumptions.Items, plain(a))
	}
	for _, a := range append(append([]string(nil), c.Cautions...), c.Warnings...) {
		data.Cautions.Items = append(data.Cautions.Items, plain(a))
	}
	return data
}

// billed goes through the arms that have a bill, the baseline first.
func (v *view) billed(each func(a *armView, b *results.Bill)) {
	for _, a := range v.arms {
		if a.Bill != nil {
			each(a, a.Bill)
		}
	}
}

// costTable is memory, traffic, time and energy of every arm.
func (v *view) costTable() *tabular {
	t := &tabular{
		Caption: fmt.Sprintf("A training step of %s and an inference, by model, against FP32", plural(int(v.Costs.Batch), "example")),
		Columns: columns("Arm", "#memory, training", "#memory, endpoint", "#bytes a step", "#of FP32", "#step: times as fast", "step waits for", "#energy of FP32", "#bytes an inference", "#inference: energy of FP32"),
		Notes:   []string{"Two figures are two models of reuse: each tensor moved once a phase, and products in blocks through a cache. A star marks figures for which a table had no row and a stated rule stood in."},
	}
	v.billed(func(a *armView, b *results.Bill) {
		t.Rows = append(t.Rows, []string{
			a.Label(), byteWords(b.TrainingBits), byteWords(b.EndpointBits), byteSpan(b.Step.Bits, b.StepTiled.Bits),
			shareSpan(b.Step.BitShare, b.StepTiled.BitShare) + " %",
			starred(span(significant(b.Step.Speedup, 3), significant(b.StepTiled.Speedup, 3)), b.Step.TimeExtrapolated || b.StepTiled.TimeExtrapolated),
			span(plain(b.Step.Binds), plain(b.StepTiled.Binds)),
			starred(shareSpan(b.Step.EnergyShare, b.StepTiled.EnergyShare)+" %", b.Step.EnergyExtrapolated || b.StepTiled.EnergyExtrapolated),
			byteSpan(b.Inference.Bits, b.InferenceTiled.Bits),
			starred(shareSpan(b.Inference.EnergyShare, b.InferenceTiled.EnergyShare)+" %", b.Inference.EnergyExtrapolated || b.InferenceTiled.EnergyExtrapolated),
		})
	})
	return t
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
