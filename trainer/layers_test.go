package trainer

import (
	"context"
	"math"
	"slices"
	"strings"
	"testing"

	"ulpine/quant"
	"ulpine/quant/random"
)

// zoo are networks that together hold every kind of layer, each above parameters.
var zoo = []struct {
	name   string
	input  []int
	layers []string
}{
	{"images", []int{2, 9, 9}, []string{
		"conv2d out=4 size=3 pad=1 groups=2", "leakyrelu", "maxpool size=3 stride=2", "dropout 0.25",
		"conv2d out=4 size=2 dilation=2", "relu", "avgpool size=2", "flatten", "dense 3",
	}},
	{"blocks", []int{2, 8, 8}, []string{
		"conv2d out=3 size=3 pad=1", "batchnorm", "relu", "residual begin", "conv2d out=3 size=3 pad=1", "batchnorm momentum=0.3",
		"residual begin", "relu", "residual end", "residual end", "globalavgpool", "layernorm", "dense 4", "layernorm epsilon=1e-3", "dense 3",
	}},
	{"signals", []int{2, 15}, []string{
		"conv1d out=4 width=3 dilation=2", "gelu", "conv1d out=4 width=3 groups=4", "tanh", "globalavgpool", "sigmoid", "dense 3",
	}},
	{"sequences", []int{2, 6}, []string{
		"attention", "attention heads=2 width=4 mask=causal", "recurrent units=3 output=all", "recurrent units=4 cell=gru output=all", "recurrent units=4 cell=gru", "relu", "dense 3",
	}},
}

// zooJob is a short training of one of them.
func zooJob(t testing.TB, i int, arm func(layers int) Arm) Job {
	z := zoo[i]
	net := network(t, z.input, z.layers...)
	training := sgdTraining(4, 2)
	training.Shuffle = true
	training.EvaluateTest = EveryEpoch
	return Job{
		Network: net, Arm: arm(len(net.Layers)), Training: training, Seed: 3,
		Train: dataset(10, net.Input, 3, 1), Test: dataset(7, net.Input, 3, 3),
	}
}

// TestEveryKindIsInTheZoo: the tests below reach a new kind only through it.
func TestEveryKindIsInTheZoo(t *testing.T) {
	var all strings.Builder
	for _, z := range zoo {
		all.WriteString(" " + strings.Join(z.layers, " ") + " ")
	}
	for _, k := range kinds {
		if !strings.Contains(all.String(), " "+k.name+" ") {
			t.Errorf("no network of the zoo holds a layer %s", k.name)
		}
	}
}

// TestEveryKindAllocatesNothing in a step, after the first.
func TestEveryKindAllocatesNothing(t *testing.T) {
	for i, z := range zoo {
		for name, arm := range map[string]func(int) Arm{
			"baseline": func(n int) Arm { return baseline(t, n) }, "rough": rough(t),
		} {
			job := zooJob(t, i, arm)
			job.Training.Optimizer = Optimizer{Kind: "adamw", WeightDecay: 0.1, ClipNorm: 0.5, Compensated: true}
			for k := range job.Arm.Layers {
				l := &job.Arm.Layers[k]
				l.States = []quant.Point{l.States[0], l.States[0], l.States[0]}
			}
			e := engineFor[float32](t, &job)
			batch := []int32{3, 1, 4, 2}
			e.step(batch, 0.05)
			if n := testing.AllocsPerRun(5, func() { e.step(batch, 0.05) }); n != 0 {
				t.Errorf("%s, %s: %v allocations a step", z.name, name, n)
			}
		}
	}
}

// TestEveryKindKeepsItsBitsInWideMemory trains binary32-sized formats in float64.
func TestEveryKindKeepsItsBitsInWideMemory(t *testing.T) {
	for i := range zoo {
		for _, arm := range []func(int) Arm{rough(t), func(n int) Arm { return baseline(t, n) }} {
			job := zooJob(t, i, arm)
			p, err := job.check()
			if err != nil {
				t.Fatal(err)
			}
			narrow, err := runIn[float32](context.Background(), &job, nil, p)
			if err != nil {
				t.Fatal(err)
			}
			wide, err := runIn[float64](context.Background(), &job, nil, p)
			if err != nil {
				t.Fatal(err)
			}
			sameOutcome(t, wide, narrow)
			moved := false
			for k := range narrow.Final {
				moved = moved || !slices.Equal(narrow.Final[k].Values, narrow.Initial[k].Values)
			}
			if narrow.Diverged != "" || !moved {
				t.Errorf("%s: nothing was trained", zoo[i].name)
			}
		}
	}
}

// TestEvaluationsDependOnNoBatch: the set cut into batches of two or whole gives
// the same loss, stochastic rounding included.
func TestEvaluationsDependOnNoBatch(t *testing.T) {
	for i, z := range zoo {
		job := zooJob(t, i, rough(t))
		e := engineFor[float32](t, &job)
		e.step([]int32{0, 1, 2, 3}, 0.05)
		p, _ := job.check()
		pass := pass{seed: e.pass.seed, step: 1, phase: phaseTest}
		rows := func(first, n int) []float32 {
			pass.first, pass.samples = uint64(first), n
			return append([]float32(nil), e.forward(&pass, p.test.rows(first, n))...)
		}
		whole := rows(0, 7)
		var parts []float32
		for first := 0; first < 7; first += 2 {
			parts = append(parts, rows(first, min(2, 7-first))...)
		}
		for k := range whole {
			if math.Float32bits(whole[k]) != math.Float32bits(parts[k]) {
				t.Fatalf("%s: output %d is %v whole, %v in parts", z.name, k, whole[k], parts[k])
			}
		}
	}
}

// TestDropoutMasks: paired across arms, of the right share, new in every step,
// absent from evaluations.
func TestDropoutMasks(t *testing.T) {
	const width = 4000
	job := Job{
		Network: network(t, []int{1}, "dense 4000", "dropout 0.3", "dense 2"), Training: sgdTraining(2, 1), Seed: 8,
		Train: dataset(2, []int{1}, 2, 1),
	}
	masks := func(arm Arm, step uint32) []float32 {
		job.Arm = arm
		e := engineFor[float32](t, &job)
		e.pass.step, e.pass.samples = step, 2
		e.forward(&e.pass, e.fetch([]int32{0, 1}))
		return append([]float32(nil), e.layers[1].(*dropout[float32]).multiplier[:2*width]...)
	}
	a, b, c := masks(baseline(t, 3), 1), masks(storageArm(t, stochastic(t, "bf16", 8), 3), 1), masks(baseline(t, 3), 2)
	d := random.Draws{Seed: random.Derive(8, random.Dropout), Step: 1, Site: 2<<8 | 3}
	dropped, moved := 0, 0
	for i := range a {
		want := float32(1 / (1 - float64(float32(0.3))))
		if float64(d.Word(uint64(i))) < float64(float32(0.3))*0x1p32 {
			want = 0
			dropped++
		}
		if a[i] != want || b[i] != want {
			t.Fatalf("element %d: %v and %v, want %v", i, a[i], b[i], want)
		}
		if c[i] != want {
			moved++
		}
	}
	// 2400 are expected, standard deviation 41; two masks differ in 42 %.
	if dropped < 2240 || dropped > 2560 || moved < 3100 {
		t.Errorf("%d dropped, %d moved", dropped, moved)
	}
	e := engineFor[float32](t, &job)
	p := pass{seed: 1, step: 1, phase: phaseTest, samples: 2}
	e.forward(&p, []float32{1, 2})
	for i, v := range e.edges[1].values(2) {
		if e.edges[2].values(2)[i] != v {
			t.Fatal("an evaluation drops")
		}
	}
}

// TestGroupsAreConvolutionsOfTheirOwn: a grouped convolution has the bits of one
// convolution a group, on its channels alone, and the first group its words.
func TestGroupsAreConvolutionsOfTheirOwn(t *testing.T) {
	arm := func(n int) Arm { return Everything(point(t, "fp16"), n, 1) }
	whole := Job{
		Network: network(t, []int{4, 6, 7}, "conv2d out=6 size=3 pad=1 stride=2 groups=2"), Training: sgdTraining(3, 1), Seed: 4,
		Train: dataset(3, []int{4, 6, 7}, 3, 1), Arm: arm(1),
	}
	e := engineFor[float32](t, &whole)
	e.pass.samples = 3
	y := e.forward(&e.pass, e.fetch([]int32{0, 1, 2}))
	for g := range 2 {
		part := whole
		part.Network = network(t, []int{2, 6, 7}, "conv2d out=3 size=3 pad=1 stride=2")
		part.Train = dataset(3, []int{2, 6, 7}, 3, 1)
		x := part.Train.Inputs.Float32s()
		for s := range 3 {
			copy(x[s*84:][:84], whole.Train.Inputs.Float32s()[(s*2+g)*84:])
		}
		f := engineFor[float32](t, &part)
		f.pass.samples = 3
		copy(f.params[0].working.data, e.params[0].working.data[g*54:][:54])
		z := f.forward(&f.pass, f.fetch([]int32{0, 1, 2}))
		for s := range 3 {
			for i := range 36 {
				if y[(s*2+g)*36+i] != z[s*36+i] {
					t.Fatalf("group %d, sample %d, output %d: %v, alone %v", g, s, i, y[(s*2+g)*36+i], z[s*36+i])
				}
			}
		}
	}
	p := pass{seed: 5}
	s := streams(p.draws(0, opForwardSum))
	if p.group(0, s) != s || p.group(1, s) == s || p.group(1, s) == p.group(2, s) {
		t.Error("groups share their words, or the first has not its own")
	}
}
