package trainer

import (
	"math"
	"slices"
	"testing"

	"ulpine/quant"
)

func TestAnswersAndTies(t *testing.T) {
	n := math.NaN()
	cases := []struct {
		y    []float64
		best int
		tie  bool
	}{
		{[]float64{1, 2, 3}, 2, false},
		{[]float64{3, 3, 1}, 0, true},
		{[]float64{3, 3, 4}, 2, false},
		{[]float64{1, 3, 3}, 1, true},
		{[]float64{0, math.Copysign(0, -1)}, 0, true},
		{[]float64{n, 1}, -1, false},
		{[]float64{1, n}, -1, false},
		{[]float64{math.Inf(-1), math.Inf(-1)}, 0, true},
		{[]float64{5}, 0, false},
	}
	for _, c := range cases {
		if best, tie := answer(c.y); best != c.best || tie != c.tie {
			t.Errorf("%v: class %d, tie %v", c.y, best, tie)
		}
	}
	s := newScores(2, false)
	score(s, []float64{1, 1, 2, 3, n, 0, 5, 4}, truth{labels: []int32{0, 1, 1, 1}})
	if s.Examples != 4 || s.Right != 2 || s.Ties != 1 || s.Unanswered[1] != 1 || !slices.Equal(s.Confusion, []uint64{1, 0, 1, 1}) || s.Accuracy() != 0.5 {
		t.Errorf("%+v", s)
	}
}

func TestLearningRateFalls(t *testing.T) {
	s := Schedule{Start: 0.02, Multiply: 0.2, AtEpochs: []int{9, 13}}
	a, m := float32(0.02), float32(0.2)
	for epoch, want := range map[int]float32{1: a, 8: a, 9: a * m, 12: a * m, 13: a * m * m, 99: a * m * m} {
		if got := s.rate(epoch); got != float64(want) {
			t.Errorf("epoch %d: %v, want %v", epoch, got, want)
		}
	}
}

func TestShuffleIsAPermutationOfItsEpoch(t *testing.T) {
	const n = 1000
	a, b := make([]int32, n), make([]int32, n)
	shuffle(a, 5, 1)
	shuffle(b, 5, 2)
	if slices.Equal(a, b) {
		t.Error("two epochs have one order")
	}
	shuffle(b, 5, 1)
	if !slices.Equal(a, b) {
		t.Error("an epoch's order depends on what came before")
	}
	shuffle(b, 6, 1)
	if slices.Equal(a, b) {
		t.Error("two seeds have one order")
	}
	slices.Sort(b)
	for i, v := range b {
		if int(v) != i {
			t.Fatal("not a permutation")
		}
	}
	heads, pair := 0, make([]int32, 2)
	for epoch := range 200 { // 100 are expected, and 60 lie nearly six deviations away
		shuffle(pair, 3, epoch)
		heads += int(pair[0])
	}
	if heads < 60 || heads > 140 {
		t.Errorf("two examples are exchanged %d times of 200", heads)
	}
	// A fixed point has probability 1/n: 20 epochs see about 20, and 60 would be
	// nine standard deviations away.
	fixed := 0
	for epoch := range 20 {
		shuffle(a, 1, epoch)
		for i, v := range a {
			if int(v) == i {
				fixed++
			}
		}
	}
	if fixed > 60 {
		t.Errorf("%d fixed points in 20 orders", fixed)
	}
}

func TestInitialWeightsHaveTheirVariance(t *testing.T) {
	net := network(t, []int{100}, "dense 200", "relu", "dense 100")
	for i, want := range map[int]float64{0: 2.0 / 100, 2: 1.0 / 200} {
		b := &bench[float64]{place: place{layer: i, set: &Arithmetic{}}, spec: &net.Layers[i]}
		values := make([]float64, 20000)
		newParam(b, 0).drawInitial(values, 4, net.gain(i))
		var sum, squares float64
		for _, v := range values {
			sum += v
			squares += v * v
		}
		n := float64(len(values))
		// Standard errors: 1/sqrt(n) of the deviation, sqrt(2/n) of the variance.
		if mean := sum / n; math.Abs(mean) > 4*math.Sqrt(want/n) {
			t.Errorf("layer %d: mean %v", i, mean)
		}
		if ratio := squares / n / want; math.Abs(ratio-1) > 4*math.Sqrt(2/n) {
			t.Errorf("layer %d: variance %v of what it should be", i, ratio)
		}
		values = values[:3]
		newParam(b, 1).drawInitial(values, 4, net.gain(i))
		if values[0] != 0 || values[2] != 0 {
			t.Error("a bias does not start at zero")
		}
	}
	pooled := network(t, []int{1, 9}, "conv1d out=2 width=2", "maxpool size=2", "relu", "dense 3")
	if pooled.gain(0) != 2 || pooled.gain(3) != 1 {
		t.Error("a pool between weights and ReLU hides the ReLU")
	}
}

// TestOutputErrorIsDividedThenScaled: quotient and product are rounded in turn.
func TestOutputErrorIsDividedThenScaled(t *testing.T) {
	y, labels := []float64{0.3, -0.2, 0.1, 0.7, 0.4, -0.6}, []int32{0, 1, 0}
	for _, s := range []float64{10, 1000, 3} {
		j := newJudge[float64](crossEntropy{}, 3, 2)
		sum, got := j.errors(y, truth{labels: labels}, s)
		var loss float64
		var want []float64
		for n, label := range labels {
			l, slope := softmax(y[2*n:][:2], label)
			loss += l
			for _, v := range slope {
				v /= 3
				want = append(want, float64(v*s))
			}
		}
		sameBits(t, "loss", []float64{sum, j.losses(0, y, truth{labels: labels})}, []float64{loss, loss})
		sameBits(t, "error", got, want)
	}
}

// TestPlainDescentStep: without momentum the step is R[step](rate g'), and the
// scale is taken out again.
func TestPlainDescentStep(t *testing.T) {
	arm := Everything(point(t, "fp32"), 1, 0)
	arm.LossScale = LossScale{Kind: FixedScale, Value: 8}
	job := oneWeight(t, arm, []float32{3}, []int32{0}, 1)
	job.Training.Optimizer.Momentum = 0
	job.Training.LearningRate.Start = 0.1
	out := mustRun(t, job)
	step := float64(float32(float64(float32(0.1)) * 1.5)) // the gradient is 3 (1/2 - 1)
	sameBits(t, "weight", out.Final[0].Values, []float64{step, -step})
	if n, err := job.Training.Optimizer.States(); n != 0 || err != nil {
		t.Errorf("%d states, %v", n, err)
	}
}

// TestSmallNetLearns: a sanity check of the whole: the labels follow from the
// inputs, and bfloat16 storage with binary32 sums learns them too.
func TestSmallNetLearns(t *testing.T) {
	if testing.Short() {
		t.Skip("trains for a while")
	}
	for name, arm := range map[string]Arm{
		"baseline": baseline(t, 3), "bf16 stochastic": storageArm(t, stochastic(t, "bf16", 16), 3),
	} {
		net := network(t, []int{4}, "dense 16", "relu", "dense 3")
		training := sgdTraining(8, 15)
		training.Shuffle = true
		out := mustRun(t, Job{
			Network: net, Arm: arm, Training: training, Seed: 2,
			Train: dataset(120, net.Input, 3, 1), Test: dataset(200, net.Input, 3, 2),
		})
		last := out.Epochs[len(out.Epochs)-1]
		if last.TestAccuracy < 0.8 || last.TrainLoss > 0.6 || out.Stalled {
			t.Errorf("%s: accuracy %.3f, loss %.3f", name, last.TestAccuracy, last.TrainLoss)
		}
		var rounded quant.Counts
		for _, c := range out.Counters {
			rounded.Add(c.Counts)
		}
		if rounded.NaN != 0 || rounded.Overflow != 0 {
			t.Errorf("%s: %+v", name, rounded)
		}
	}
}
