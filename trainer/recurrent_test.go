package trainer

import (
	"testing"

	"ulpine/quant"
)

// sharedArms give operands formats that share scales, alone and together.
func sharedArms(t *testing.T) map[string]func(l *Arithmetic) {
	blocks, ints, channel := point(t, "MXFP4"), point(t, "INT8"), point(t, "INT8(per=channel)")
	small := point(t, "E5M4")
	return map[string]func(l *Arithmetic){
		"weights":            func(l *Arithmetic) { l.Weight = blocks },
		"weights by channel": func(l *Arithmetic) { l.Weight = channel },
		"operands in blocks": func(l *Arithmetic) { l.Operand = &blocks },
		"operands, integers": func(l *Arithmetic) { l.Operand = &ints },
		"scalar operands": func(l *Arithmetic) {
			l.Operand, l.InputGradient.Gradient, l.InputGradient.First = &small, &small, &small
		},
		"all": func(l *Arithmetic) {
			l.Weight, l.Operand = channel, &ints
			l.InputGradient.First, l.InputGradient.Gradient = &channel, &blocks
			l.WeightGradient.First, l.WeightGradient.Gradient = &ints, &channel
		},
	}
}

// TestTimesAreDenseLayers: at every time a cell's sum is that of a dense layer on
// [x_t, h_(t-1)], and the gradient of x_t is that layer's, whatever the operands.
func TestTimesAreDenseLayers(t *testing.T) {
	const samples, channels, units, length = 3, 3, 2, 3
	for name, set := range sharedArms(t) {
		t.Run(name, func(t *testing.T) {
			arm := func(layers int) Arm {
				a := baseline(t, layers)
				set(&a.Layers[0])
				return a
			}
			whole := Job{Network: network(t, []int{channels, length}, "recurrent units=2 output=all"), Arm: arm(1), Training: sgdTraining(samples, 1), Seed: 5}
			whole.Train = dataset(samples, whole.Network.Input, 3, 1)
			e := engineFor[float32](t, &whole)
			e.pass.step, e.pass.samples = 1, samples
			e.forward(&e.pass, e.fetch([]int32{0, 1, 2}))
			copy(e.edges[1].gradients(samples), uniform(samples*units*length, 8))
			e.layers[0].backward(&e.pass, true)
			x, h := e.edges[0].values(samples), e.edges[1].values(samples)
			dx, da := e.edges[0].gradients(samples), e.layers[0].(*recurrent[float32]).cell.gates()[0].sums.gradients(samples)

			one := Job{Network: network(t, []int{channels + units}, "dense 2", "tanh"), Arm: arm(2), Training: sgdTraining(samples, 1), Seed: 5}
			one.Train = dataset(samples, one.Network.Input, 2, 1)
			f := engineFor[float32](t, &one)
			for i, q := range f.params {
				copy(q.master.data, e.params[i].master.data)
				q.refresh(&f.pass)
			}
			f.pass.step, f.pass.samples = 1, samples
			for at := range length {
				row := make([]float32, samples*(channels+units))
				for s := range samples {
					for c := range channels {
						row[s*(channels+units)+c] = x[(s*channels+c)*length+at]
					}
					for u := range units {
						if at > 0 {
							row[s*(channels+units)+channels+u] = h[(s*units+u)*length+at-1]
						}
						f.edges[1].gradients(samples)[s*units+u] = da[(s*units+u)*length+at]
					}
				}
				y := f.forward(&f.pass, row)
				f.layers[0].backward(&f.pass, true)
				below := f.edges[0].gradients(samples)
				for s := range samples {
					for u := range units {
						if got := h[(s*units+u)*length+at]; got != y[s*units+u] {
							t.Fatalf("time %d, state %d of %d: %v, a dense layer gives %v", at, u, s, got, y[s*units+u])
						}
					}
					for c := range channels {
						if got := dx[(s*channels+c)*length+at]; got != below[s*(channels+units)+c] {
							t.Fatalf("time %d, gradient %d of %d: %v, a dense layer's is %v", at, c, s, got, below[s*(channels+units)+c])
						}
					}
				}
			}
		})
	}
}

// TestSequencesTrainInEveryFamily: layers of several products take operands of all
// families and go on training.
func TestSequencesTrainInEveryFamily(t *testing.T) {
	arms := sharedArms(t)
	for _, name := range []string{"posit16", "LNS5.6", "Q4.12"} {
		p := point(t, name)
		arms[name] = func(l *Arithmetic) { l.Activation, l.Operand = p, &p }
	}
	delete(arms, "all") // no channels with scales of their own among activations
	for name, set := range arms {
		for _, layer := range []string{"attention heads=2 mask=causal", "recurrent units=3", "recurrent units=3 cell=gru"} {
			net := network(t, []int{2, 6}, "conv1d out=4 width=2", layer, "dense 3")
			arm := baseline(t, 3)
			set(&arm.Layers[1])
			out := mustRun(t, Job{Network: net, Arm: arm, Training: sgdTraining(5, 12), Seed: 2, Train: dataset(30, net.Input, 3, 1)})
			first, last := out.Epochs[0].TrainLoss, out.Epochs[len(out.Epochs)-1].TrainLoss
			if out.Diverged != "" || !(last < first) {
				t.Errorf("%s under %s: loss %v, then %v %s", layer, name, first, last, out.Diverged)
			}
		}
	}
}

// TestSequencesWithChannelScales: matrices may have a scale for each channel.
func TestSequencesWithChannelScales(t *testing.T) {
	channel := point(t, "INT8(per=channel)")
	for _, layer := range []string{"attention heads=2", "recurrent units=3 cell=gru output=all"} {
		net := network(t, []int{2, 6}, "conv1d out=4 width=2", layer, "dense 3")
		arm := baseline(t, 3)
		l := &arm.Layers[1]
		l.Weight, l.InputGradient.First, l.WeightGradient.Gradient = channel, &channel, &channel
		job := Job{Network: net, Arm: arm, Training: sgdTraining(5, 4), Seed: 2, Train: dataset(30, net.Input, 3, 1), Diagnostics: everyStep}
		seen := mustRun(t, job)
		job.Diagnostics = Diagnostics{}
		sameOutcome(t, seen, mustRun(t, job))
		if seen.Diverged != "" {
			t.Errorf("%s: %s", layer, seen.Diverged)
		}
	}
}

// TestRecurrentStarts: gates share no initial weights, and a time none of its words.
func TestRecurrentStarts(t *testing.T) {
	job := Job{Network: network(t, []int{2, 4}, "recurrent units=3 cell=gru", "dense 2"), Arm: baseline(t, 2), Training: sgdTraining(2, 1), Seed: 9}
	job.Train = dataset(2, job.Network.Input, 2, 1)
	e := engineFor[float32](t, &job)
	seen := map[float32]string{}
	for _, q := range e.params {
		for _, v := range q.master.data {
			if other := seen[v]; v != 0 && other != "" {
				t.Fatalf("%s and %s both start with %v", q.name, other, v)
			}
			seen[v] = q.name
		}
	}
	words := map[quant.Draws]bool{}
	for part := range 12 {
		words[place{part: part}.draws(&e.pass, opActivation)] = true
	}
	if len(words) != 12 {
		t.Errorf("12 parts have %d streams", len(words))
	}
}
