package trainer

import (
	"math"
	"testing"

	"ulpine/quant"
)

// everyStep looks at all there is, in every step.
var everyStep = Diagnostics{Every: 1, Gradient: 1, Values: 1 << 20, Sums: 8}

// TestLookingChangesNoBit, in any network, arm and optimizer.
func TestLookingChangesNoBit(t *testing.T) {
	for i := range zoo {
		for _, arm := range []func(int) Arm{rough(t), func(n int) Arm { return baseline(t, n) }} {
			job := zooJob(t, i, arm)
			job.Training.Optimizer = Optimizer{Kind: "adamw", WeightDecay: 0.1, ClipNorm: 0.5, Compensated: true}
			for k := range job.Arm.Layers {
				l := &job.Arm.Layers[k]
				l.States = []quant.Point{l.States[0], l.States[0], l.States[0]}
				if i%2 == 1 {
					l.WeightGradient.Residue = &l.States[0]
				}
			}
			plain := mustRun(t, job)
			for _, d := range []Diagnostics{everyStep, DefaultDiagnostics, {Every: 2}, {Gradient: 3}} {
				job.Diagnostics = d
				seen := mustRun(t, job)
				sameOutcome(t, seen, plain)
				if seen.Findings == nil || plain.Findings != nil {
					t.Fatal("findings come unasked, or not at all")
				}
			}
		}
	}
}

// TestFindingsAgreeWithTheCounters: with every value looked at in every step, the
// sampled counts of stored points are the counters.
func TestFindingsAgreeWithTheCounters(t *testing.T) {
	arm := func(n int) Arm {
		a := storageArm(t, point(t, "E4M3"), n)
		a.LossScale = LossScale{Kind: FixedScale, Value: 4096}
		return a
	}
	job := convJob(t, arm)
	// A tensor of n values is looked at whole up to 32; see observer.choose.
	job.Network = network(t, []int{1, 9, 9}, "globalavgpool", "dense 4", "relu", "dense 3")
	job.Arm, job.Diagnostics = arm(4), everyStep
	out := mustRun(t, job)
	compared, events := 0, uint64(0)
	for _, c := range out.Counters {
		var got quant.Counts
		var values uint64
		for _, f := range out.Findings.Points {
			if f.Layer == c.Layer && f.Point == c.Point {
				got.Add(quant.Counts{Overflow: f.Overflow, Underflow: f.Underflow, Saturated: f.Saturated, NaN: f.NaN})
				values += f.Values
			}
		}
		inside := false
		for id := range PointID(pointCount) {
			inside = inside || id.String() == c.Point && id.InsideSums()
		}
		if values == 0 || inside || c.Point == "input" {
			continue
		}
		compared++
		want := c.Counts
		events += want.Underflow + want.Saturated
		if c.Point == "update.master" || c.Point == "forward.weight" {
			continue // their start, step 0, is counted but not looked at
		}
		if got != want {
			t.Errorf("%s %s: seen %+v, counted %+v", c.Name, c.Point, got, want)
		}
	}
	if compared < 8 || events < 10 {
		t.Errorf("%d points compared, %d events: the test sees too little", compared, events)
	}
}

// TestUpdateRetention: steps far below half a unit of bfloat16 vanish when rounded
// to nearest, arrive on average when rounded stochastically, and in binary32.
func TestUpdateRetention(t *testing.T) {
	retention := func(master quant.Point) (kept, bias float64) {
		arm := baseline(t, 1)
		arm.Layers[0].Master = master
		job := Job{
			Network: network(t, []int{20}, "dense 10"), Arm: arm, Training: sgdTraining(8, 10), Seed: 3,
			Train: dataset(64, []int{20}, 10, 1), Diagnostics: Diagnostics{Every: 1, Values: 1000},
		}
		job.Training.LearningRate.Start = 1e-4
		var cross, squares float64
		for _, f := range mustRun(t, job).Findings.Updates {
			if f.Param == "weight" {
				cross, squares = cross+f.Cross, squares+f.Squares
				bias = max(bias, math.Abs(f.Bias()))
			}
		}
		return cross / squares, bias
	}
	if kept, _ := retention(point(t, "bf16")); kept > 0.2 {
		t.Errorf("nearest keeps %v", kept)
	}
	if kept, _ := retention(stochastic(t, "bf16", 16)); math.Abs(kept-1) > 0.3 {
		t.Errorf("stochastic keeps %v", kept)
	}
	if kept, bias := retention(point(t, "fp32")); math.Abs(kept-1) > 1e-2 || bias > 1e-2 {
		t.Errorf("binary32 keeps %v, bias %v", kept, bias)
	}
}

// TestSumRetention: a bfloat16 sum of 4096 ones stalls at 256.
func TestSumRetention(t *testing.T) {
	arm := baseline(t, 1)
	p := point(t, "bf16")
	arm.Layers[0].Forward.Sum = p
	net := network(t, []int{4096}, "dense 2")
	set := dataset(2, []int{4096}, 2, 1)
	for i := range set.Inputs.Float32s() {
		set.Inputs.Float32s()[i] = 1
	}
	start := []Param{{Shape: []int{2, 4096}, Values: make([]float64, 8192)}, {Shape: []int{2}, Values: make([]float64, 2)}}
	for i := range start[0].Values {
		start[0].Values[i] = 1
	}
	job := Job{Network: net, Arm: arm, Training: sgdTraining(2, 1), Train: set, Start: start, Diagnostics: everyStep}
	for _, f := range mustRun(t, job).Findings.Sums {
		switch {
		case f.Point == "forward.sum" && (f.Retention() != 256.0/4096 || f.Count != 4 || f.Terms != 4*4096):
			t.Errorf("forward: %+v, retention %v", f, f.Retention())
		case f.Point == "weight_gradient.sum" && math.Abs(f.Retention()-1) > 1e-6:
			t.Errorf("weight gradient: %+v", f)
		}
	}
}

// TestCosinesTellArithmeticApart: binary32 gradients point where binary64's do,
// rough ones do not quite; binary64's are the twin's own.
func TestCosinesTellArithmeticApart(t *testing.T) {
	worst := func(arm func(int) Arm) (low float64, n int) {
		low = 1
		for _, i := range []int{0, 2} { // no bias below a batch normalisation, whose gradient is nought
			job := zooJob(t, i, arm)
			job.Diagnostics = Diagnostics{Gradient: 1}
			for _, g := range mustRun(t, job).Findings.Gradients {
				if g.Cosine == g.Cosine {
					low = min(low, g.Cosine)
					n++
				}
			}
		}
		return low, n
	}
	if low, n := worst(func(n int) Arm { return Everything(point(t, "fp64"), n, 1) }); low < 1-1e-14 || n < 20 {
		t.Errorf("binary64: %v of %d", low, n)
	}
	single, _ := worst(func(n int) Arm { return baseline(t, n) })
	coarse, _ := worst(func(n int) Arm { return storageArm(t, point(t, "E5M3"), n) })
	if !(single > 1-1e-3 && coarse < single) {
		t.Errorf("binary32 %v, E5M3 %v", single, coarse)
	}
}

// TestHistograms: every finite value that is not zero stands in one bar.
func TestHistograms(t *testing.T) {
	w := newObserver(Diagnostics{Values: 10}, &Network{Layers: make([]Spec, 1)})
	p := point(t, "E4M3")
	src := []float64{0, 1, 1.5, -2, 1e-9, 1000, math.Inf(1), math.NaN(), 0.3}
	dst := make([]float32, len(src))
	look(w, src)
	quant.RoundSlice(dst, src, &p, quant.Draws{}, 0, nil)
	compare(w, 0, ForwardActivation, dst, &p)
	w.end(3)
	f := w.found.Points[0]
	bars := uint64(0)
	for _, b := range f.Exponents {
		bars += b.Count
		if b.Exponent == 0 && b.Count != 2 {
			t.Errorf("%d values in [1, 2)", b.Count)
		}
	}
	if f.Epoch != 3 || f.Values != 9 || f.Zeros != 1 || bars != 6 || f.Underflow != 1 || f.Saturated != 2 || f.NaN != 1 || f.Overflow != 0 {
		t.Errorf("%+v", f)
	}
	if snr := f.SignalToNoise(); !(snr > 0 && snr < 20) {
		t.Errorf("%v dB", snr)
	}
}

// TestNoEpochGoesUnseen, however short it is: the default looks at tensors, sums and
// updates in every one, and compares gradients as soon as the pause is over and in the
// last step; without a pause in every epoch.
func TestNoEpochGoesUnseen(t *testing.T) {
	job := zooJob(t, 0, func(n int) Arm { return baseline(t, n) })
	job.Training.Epochs = 60
	job.Diagnostics = DefaultDiagnostics
	look := func() (points, sums, updates map[int]bool, compared []int) {
		f := mustRun(t, job).Findings
		points, sums, updates = map[int]bool{}, map[int]bool{}, map[int]bool{}
		for _, x := range f.Points {
			points[x.Epoch] = true
		}
		for _, x := range f.Sums {
			sums[x.Epoch] = true
		}
		for _, x := range f.Updates {
			updates[x.Epoch] = true
		}
		for _, x := range f.Gradients {
			if n := len(compared); n == 0 || compared[n-1] != x.Step {
				compared = append(compared, x.Step)
			}
		}
		return points, sums, updates, compared
	}
	steps := len(mustRun(t, job).Steps)
	each := steps / 60
	points, sums, updates, compared := look()
	if len(points) != 60 || len(sums) != 60 || len(updates) != 60 {
		t.Errorf("seen: points in %d epochs, sums in %d, updates in %d, of 60", len(points), len(sums), len(updates))
	}
	if n := len(compared); n < 2 || compared[n-1] != steps || compared[0] != (DefaultDiagnostics.Pause/each+1)*each {
		t.Errorf("gradients compared in steps %v of %d, %d an epoch", compared, steps, each)
	}
	job.Diagnostics.Pause = 0
	if _, _, _, compared = look(); len(compared) != 60 || compared[0] != each {
		t.Errorf("without a pause gradients were compared in steps %v", compared)
	}
	// An epoch that has been looked at in passing is not looked at again at its end.
	job.Diagnostics = Diagnostics{Gradient: each - 1}
	if _, _, _, compared = look(); compared[0] != each-1 || compared[1] != 2*(each-1) {
		t.Errorf("gradients compared in steps %v", compared)
	}
}
