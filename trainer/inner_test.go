package trainer

import (
	"math"
	"strings"
	"testing"

	"ulpine/quant"
)

// TestInnerCounts: when everything is NaN each rounding counts one, so that the counters
// of one step are the numbers of values and of products that a Spec states.
func TestInnerCounts(t *testing.T) {
	single := point(t, "fp32")
	for _, text := range []string{
		"attention heads=2 width=6", "attention heads=2 width=6 mask=causal", "attention mask=causal", "recurrent units=3",
		"recurrent units=3 output=all", "recurrent units=3 cell=gru", "recurrent units=3 cell=gru output=all",
	} {
		for _, below := range []bool{false, true} {
			layers, at := []string{text, "dense 3"}, 0
			if below {
				layers, at = append([]string{"conv1d out=3 width=2"}, layers...), 1
			}
			net := network(t, []int{2, 7}, layers...)
			job := Job{Network: net, Arm: baseline(t, len(layers)), Training: sgdTraining(2, 1), Seed: 1, Train: dataset(2, net.Input, 3, 1)}
			for i := range job.Arm.Layers {
				l := &job.Arm.Layers[i]
				l.Operand, l.WeightGradient.First, l.WeightGradient.Gradient, l.InputGradient.Gradient = &single, &single, &single, &single
			}
			e := engineFor[float32](t, &job)
			for _, q := range e.params {
				for i := range q.working.data {
					q.working.data[i] = float32(math.NaN())
				}
			}
			clear(e.tally)
			e.pass.samples = 2
			e.forward(&e.pass, e.fetch([]int32{0, 1}))
			e.backward(&e.pass, []float64{math.NaN(), math.NaN(), math.NaN(), 1, math.NaN(), math.NaN()})
			checkInner(t, text, &net, at, below, e.tally[at+1])
		}
	}
}

// TestColumnsOfHeadsAreNumbered: an example has a column for each position of each head,
// which may be more than its values.
func TestColumnsOfHeadsAreNumbered(t *testing.T) {
	job := Job{Network: network(t, []int{1, 64}, "attention heads=32 width=32", "dense 3"), Arm: baseline(t, 2), Training: sgdTraining(2, 1)}
	p := parts{train: &split{n: 2}, largest: columnLimit / (32 * 64)}
	if err := job.checkExtents(&p); err != nil {
		t.Error(err)
	}
	p.largest++
	if err := job.checkExtents(&p); err == nil || !strings.Contains(err.Error(), "layer 1 (attention heads=32 width=32 mask=none)") || !strings.Contains(err.Error(), "use fewer examples") {
		t.Errorf("columns beyond the numbers: %v", err)
	}
}

func checkInner(t *testing.T, text string, net *Network, at int, below bool, counts [pointCount]quant.Counts) {
	s, n := &net.Layers[at], &net.Layers[at].Inner
	softmax := uint64(0)
	if s.Kind == "attention" {
		pairs := volume([]int{s.In[1], s.In[1]})
		if s.causal {
			pairs = (pairs + s.In[1]) / 2
		}
		softmax = uint64(pairs * s.heads)
	}
	want := map[PointID]uint64{
		ForwardActivation: uint64(volume(s.Out)) + n.Values, ForwardProduct: s.MACs.Forward - softmax, ForwardStatistic: softmax,
		InputGradientResult: n.Gradients, InputGradientProduct: n.BackMACs - softmax, InputGradientGradient: n.Pulled,
		WeightGradientProduct: s.MACs.WeightGradient, WeightGradientGradient: n.Slopes,
		InputGradientStatistic: 2 * softmax, // product and sum
	}
	if below {
		want[InputGradientResult] += n.Inputs + uint64(volume(s.In))
		want[InputGradientProduct] = s.MACs.InputGradient - softmax
		want[InputGradientGradient] += n.PulledInputs
	}
	for id, w := range want {
		if got := counts[id].NaN; got != 2*w {
			t.Errorf("%s, below %v: %d values at %s, want %d", text, below, got, id, 2*w)
		}
	}
	// The first state is zero, the lowest layer's inputs are numbers: not all are NaN.
	if got := counts[ForwardOperand].NaN; got == 0 || got > 2*n.Operands || below && s.Kind == "attention" && got != 2*n.Operands {
		t.Errorf("%s, below %v: %d values at forward.operand, want %d", text, below, got, 2*n.Operands)
	}
}
