package cost

import "testing"

// TestMean: three quarters of the steps in bfloat16, the rest in binary32.
func TestMean(t *testing.T) {
	n := twoLayers()
	r := estimate(t, n, DefaultMachine, uniform(t, &n, "bf16"), uniform(t, &n, "fp32"))
	b := r.Mean([]float64{30, 10})
	low, high, mean := &r.Arms[0], &r.Arms[1], &b.Once.Step
	if want := (3*low.Once.Step.Total.Bits + high.Once.Step.Total.Bits) / 4; mean.Total.Bits != want || low.Once.Step.Total.Bits == high.Once.Step.Total.Bits {
		t.Errorf("%d bits, want %d", mean.Total.Bits, want)
	}
	if want := (3*low.Tiled.Step.Total.Energy.Total + high.Tiled.Step.Total.Energy.Total) / 4; !near(b.Tiled.Step.Total.Energy.Total, want) {
		t.Errorf("%v pJ, want %v", b.Tiled.Step.Total.Energy.Total, want)
	}
	if want := (3*low.Once.Step.Total.Time.Seconds + high.Once.Step.Total.Time.Seconds) / 4; !near(mean.Total.Time.Seconds, want) {
		t.Errorf("%v s, want %v", mean.Total.Time.Seconds, want)
	}
	if want := (3*low.Memory.Width + high.Memory.Width) / 4; b.Memory.Width != want || b.Memory.Training != high.Memory.Training {
		t.Errorf("width %v, want %v; memory %+v", b.Memory.Width, want, b.Memory.Training)
	}
	if b.Once.Inference.Total != high.Once.Inference.Total {
		t.Error("an inference is not the last stage's")
	}
	var phases, layers uint64
	for i := range mean.Phases {
		phases += mean.Phases[i].Bits
	}
	for i := range mean.Layers {
		layers += mean.Layers[i].Total.Bits
	}
	if phases != mean.Total.Bits || layers != mean.Total.Bits || mean.Total.Multiplies != low.Once.Step.Total.Multiplies {
		t.Errorf("phases sum to %d bits, layers to %d of %d; %d multiplications", phases, layers, mean.Total.Bits, mean.Total.Multiplies)
	}
	if mean.Total.Against.Bits <= 0.5 || mean.Total.Against.Bits >= 1 {
		t.Errorf("%v of FP32's bits", mean.Total.Against.Bits)
	}
	if r.Arms[0].Once.Step.Total.Bits != low.Once.Step.Total.Bits {
		t.Error("the stages' own bills have changed")
	}
}
