package trainer

import (
	"context"
	"math"
	"slices"
	"strings"
	"testing"

	"ulpine/quant/random"
)

// counted is an example whose values tell their places.
func counted(n int) []float32 {
	x := make([]float32, n)
	for i := range x {
		x[i] = float32(i)
	}
	return x
}

// TestAugmentShifts writes the documented formula a second time, place by place.
func TestAugmentShifts(t *testing.T) {
	for _, shape := range [][]int{{2, 9}, {3, 4, 5}, {1, 7, 4}} {
		g := newAugmenter(Augment{Shift: 3}, shape, 17)
		x := counted(volume(shape))
		seen := map[[2]int]bool{}
		for number := range int32(200) {
			y := make([]float32, len(x))
			g.fill(y, x, 5, number)
			d := random.Draws{Seed: random.Derive(17, random.Augmentation), Step: 5, Site: uint32(number)}
			rows, columns := int(math.Floor(d.Uniform(0)*7))-3, int(math.Floor(d.Uniform(1)*7))-3
			height, width := 1, shape[len(shape)-1]
			if len(shape) == 3 {
				height = shape[1]
			} else {
				rows = 0
			}
			seen[[2]int{rows, columns}] = true
			for i, got := range y {
				c, r, k := i/(height*width), i/width%height, i%width
				r, k = min(max(r-rows, 0), height-1), min(max(k-columns, 0), width-1)
				if want := x[(c*height+r)*width+k]; got != want {
					t.Fatalf("%v, shifted by %d, %d: value %d is %v, want %v", shape, rows, columns, i, got, want)
				}
			}
		}
		want := 7
		if len(shape) == 3 {
			want = 49
		}
		if len(seen) < want-2 {
			t.Errorf("%v: %d different shifts in 200 examples", shape, len(seen))
		}
		if !slices.Equal(x, counted(len(x))) {
			t.Error("the example itself was altered")
		}
	}
}

// TestAugmentPins holds the bits of a shifted, noisy example; recorded from this
// code, whose other tests say that it is right.
func TestAugmentPins(t *testing.T) {
	g := newAugmenter(Augment{Shift: 2, Noise: 0.1}, []int{1, 6}, 100)
	y := make([]float32, 6)
	g.fill(y, counted(6), 3, 41)
	want := augmentPins
	for i, v := range y {
		if math.Float32bits(v) != want[i] {
			t.Errorf("value %d: %v, %#08x, recorded %#08x", i, v, math.Float32bits(v), want[i])
		}
	}
}

// TestAugmentNoise: the deviation is what was asked for, with single binary64 sums.
func TestAugmentNoise(t *testing.T) {
	const n = 20000
	g := newAugmenter(Augment{Noise: 0.25}, []int{n}, 3)
	y, x := make([]float32, n), make([]float32, n)
	for i := range x {
		x[i] = 2
	}
	g.fill(y, x, 1, 0)
	d := random.Draws{Seed: random.Derive(3, random.Augmentation), Step: 1, Phase: 1}
	var mean, square float64
	for i, v := range y {
		noise := float64(0.25 * d.Normal(uint64(i)))
		if v != float32(2+noise) {
			t.Fatalf("value %d is %v", i, v)
		}
		mean += noise / n
		square += float64(noise*noise) / n
	}
	// Standard errors: 0.25/sqrt(n) = 0.0018 of the mean, 0.25/sqrt(2n) = 0.0013 of the deviation.
	if math.Abs(mean) > 0.008 || math.Abs(math.Sqrt(square)-0.25) > 0.006 {
		t.Errorf("mean %v, deviation %v", mean, math.Sqrt(square))
	}
}

// augmentedJob is a training of a convolution on signals with both alterations.
func augmentedJob(t *testing.T, arm func(int) Arm) Job {
	job := convJob(t, arm)
	job.Training.Augment = Augment{Shift: 1, Noise: 0.125}
	return job
}

// TestAugmentIsPaired: an example is the same in every arm, batch and place of a
// batch, another one in another epoch and under another seed.
func TestAugmentIsPaired(t *testing.T) {
	job := augmentedJob(t, func(n int) Arm { return baseline(t, n) })
	row := func(job Job, batch, epoch int, order []int32, at int) []float32 {
		job.Training.Batch = batch
		e := engineFor[float32](t, &job)
		e.epoch = epoch
		per := volume(job.Network.Input)
		return slices.Clone(e.fetch(order)[at*per:][:per])
	}
	want := row(job, 4, 2, []int32{3, 1, 4, 2}, 2)
	other := job
	other.Arm = storageArm(t, point(t, "bf16"), len(job.Network.Layers))
	for _, got := range [][]float32{row(job, 1, 2, []int32{4}, 0), row(job, 2, 2, []int32{4, 4}, 1), row(other, 3, 2, []int32{0, 4}, 1)} {
		if !slices.Equal(got, want) {
			t.Errorf("example 4 in epoch 2: %v, and %v", want, got)
		}
	}
	reseeded := job
	reseeded.Seed++
	for _, got := range [][]float32{row(job, 4, 3, []int32{4}, 0), row(reseeded, 4, 2, []int32{4}, 0), row(job, 4, 2, []int32{5}, 0)} {
		if slices.Equal(got, want) {
			t.Error("another epoch, seed or example has the same values")
		}
	}
}

// TestAugmentTrains: training data alone are altered, diagnostics see the same, and
// a step allocates nothing.
func TestAugmentTrains(t *testing.T) {
	job := augmentedJob(t, func(n int) Arm { return baseline(t, n) })
	before := slices.Clone(job.Train.Inputs.Float32s())
	out := mustRun(t, job)
	if !slices.Equal(before, job.Train.Inputs.Float32s()) {
		t.Error("the data set was altered")
	}
	plain := job
	plain.Training.Augment = Augment{}
	if p := mustRun(t, plain); slices.Equal(p.Steps, out.Steps) {
		t.Error("altered examples train to the same losses")
	}
	looked := job
	looked.Diagnostics = DefaultDiagnostics
	looked.Diagnostics.Gradient = 1
	found := mustRun(t, looked)
	sameOutcome(t, found, out)
	for _, g := range found.Findings.Gradients {
		if g.Cosine < 0.999 { // of binary32 against binary64 on the very same examples; NaN: no gradient
			t.Errorf("%+v", g)
		}
	}
	e := engineFor[float32](t, &job)
	e.epoch = 1
	batch := []int32{3, 1, 4, 2}
	e.step(batch, 0.05)
	if n := testing.AllocsPerRun(5, func() { e.step(batch, 0.05) }); n != 0 {
		t.Errorf("%v allocations a step", n)
	}
}

// TestParamShapes: what a network says of its parameters is what outcomes record.
func TestParamShapes(t *testing.T) {
	job := zooJob(t, 0, func(n int) Arm { return baseline(t, n) })
	out := mustRun(t, job)
	for i, p := range job.Network.ParamShapes() {
		if q := out.Final[i]; p.Name != q.Name || shapeText(p.Shape) != shapeText(q.Shape) || len(out.Final) != len(job.Network.ParamShapes()) {
			t.Errorf("%s %v is recorded as %s %v", p.Name, p.Shape, q.Name, q.Shape)
		}
	}
}

func TestAugmentErrors(t *testing.T) {
	for _, c := range []struct {
		a     Augment
		shape []int
		want  string
	}{
		{Augment{Shift: -1}, []int{1, 8}, "a shift of -1"},
		{Augment{Shift: 1}, []int{8}, "shape 8 cannot be shifted"},
		{Augment{Shift: 4}, []int{1, 9, 4}, "would leave nothing of an example of shape 1x9x4"},
		{Augment{Noise: math.Inf(1)}, []int{8}, "noise of +Inf"},
		{Augment{Noise: 1e-60}, []int{8}, "noise of 1e-60"},
		{Augment{Noise: -1}, []int{8}, "noise of -1"},
	} {
		if err := c.a.Check(c.shape); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v on %v: %v, want %s", c.a, c.shape, err, c.want)
		}
	}
	job := augmentedJob(t, func(n int) Arm { return baseline(t, n) })
	job.Training.Augment.Shift = 1000
	if _, err := Run(context.Background(), job, nil); err == nil {
		t.Error("a shift beyond the example was accepted")
	}
}

var augmentPins = [6]uint32{0x40033780, 0x40434443, 0x40804cc9, 0x40a0dbdf, 0x409c9a2a, 0x409e3788}
