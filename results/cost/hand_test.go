package cost

import (
	"math"
	"testing"
)

// near reports whether two figures agree to rounding errors.
func near(a, b float64) bool { return math.Abs(a-b) <= 1e-12*math.Max(math.Abs(a), math.Abs(b)) }

// TestByHand works a step of 784-100-10 out on paper: batch 32, momentum,
// everything in FP32. Values moved, each tensor once a phase:
//
//	              forward                    input gradient       weight gradient
//	dense 100     78500 + 32*784 + 32*100    none below           32*784 + 32*100 + 78500
//	              = 106788                                        = 106788
//	relu          3200 + 3200                3200 + 3200 + 3200
//	              = 6400                     = 9600
//	dense 10      1010 + 3200 + 320          1000 + 320 + 3200    3200 + 320 + 1010
//	              = 4530                     = 4520               = 4530
//	loss          320                        320
//	update        5 x 79510: gradient in, velocity in and out, weights in and out
//
// Together 118038 + 14440 + 111318 + 397550 = 641346 values, 2565384 bytes.
func TestByHand(t *testing.T) {
	r := estimate(t, twoLayers(), "cpu-core-2020")
	step := &r.Reference.Once.Step
	for p, want := range []uint64{118038, 14440, 111318, 397550} {
		if got := &step.Phases[p]; got.Values != want || got.Bits != 32*want {
			t.Errorf("%s: %d values in %d bits, want %d in %d", got.Phase, got.Values, got.Bits, want, 32*want)
		}
	}
	layers := [][4]uint64{{106788, 0, 106788, 5 * 78500}, {6400, 9600, 0, 0}, {4530, 4520, 4530, 5 * 1010}, {320, 320, 0, 0}}
	for l, phases := range layers {
		for p, want := range phases {
			if got := step.Layers[l].Phases[p].Values; got != want {
				t.Errorf("%s, %s: %d values, want %d", step.Layers[l].Name, step.Phases[p].Phase, got, want)
			}
		}
	}
	wantClasses := ByClass{
		Weights:     32 * (78500 + 1010 + 1000 + 2*79510),
		Activations: 32 * (25088 + 3200 + 6400 + 3200 + 320 + 320 + 3200 + 3200 + 25088),
		Gradients:   32 * (6400 + 3520 + 320 + 320 + 1010 + 3200 + 78500 + 79510),
		State:       32 * 2 * 79510,
	}
	if step.Total.Traffic != wantClasses {
		t.Errorf("by class %+v, want %+v", step.Total.Traffic, wantClasses)
	}
	if got := step.Total.Bits / 8; got != 2565384 {
		t.Errorf("%d bytes a step, want 2565384", got)
	}
	handOperations(t, &step.Total)
	handInference(t, &r.Reference.Once.Inference)
	handMemory(t, &r.Reference.Memory)
}

// handOperations: 79400 forward, 1000 input gradient and 79400 weight gradient
// multiply-adds an example; a bias addition and a bias-gradient addition an
// output; the update multiplies twice and adds twice a parameter.
func handOperations(t *testing.T, f *Figures) {
	t.Helper()
	const products = 32 * (79400 + 1000 + 79400)
	if want := uint64(products + 2*79510); f.Multiplies != want {
		t.Errorf("%d multiplications, want %d", f.Multiplies, want)
	}
	if want := uint64(products + 2*32*110 + 2*79510); f.Additions != want {
		t.Errorf("%d additions, want %d", f.Additions, want)
	}
	e := &f.Energy
	for _, part := range []struct {
		name      string
		got, want float64
	}{
		{"multiplications", e.Multiply, 3.7 * (products + 2*79510)},
		{"additions", e.Add, 0.9 * (products + 2*32*110 + 2*79510)},
		{"operands, 64 bits of two, 10 pJ, shared by 8", e.Operands, products * 10 / 8.0},
		{"the cache at 100 pJ for 64 bits", e.Cache, 641346 * 32 * 100 / 64.0},
		{"memory at 1950 pJ for 64 bits", e.Memory, 641346 * 32 * 1950 / 64.0},
		{"random bits", e.Random, 0},
		{"all", e.Total, e.Multiply + e.Add + e.Operands + e.Cache + e.Memory},
	} {
		if !near(part.got, part.want) {
			t.Errorf("energy of %s: %v pJ, want %v", part.name, part.got, part.want)
		}
	}
	if e.Extrapolated || f.Time.Extrapolated {
		t.Error("FP32 is in both tables, yet marked as extrapolated")
	}
}

// handInference: one example, 79510 + 784 + 100 + 200 + 100 + 10 values. On
// cpu-core-2020 at 48 G multiply-adds and 51.2 GB a second memory binds each
// layer: 4 bytes of a weight take 78 ps, its multiply-add 21 ps.
func handInference(t *testing.T, a *Activity) {
	t.Helper()
	const values = 79510 + 784 + 100 + 200 + 100 + 10
	f := &a.Total
	if f.Values != values || f.Multiplies != 79400 || f.Additions != 79510 {
		t.Errorf("inference: %d values, %d multiplications, %d additions", f.Values, f.Multiplies, f.Additions)
	}
	if !near(f.Time.Seconds, values*4/51.2e9) || f.Time.Binds != Bandwidth || !near(f.Time.Arithmetic, 79510/48e9) {
		t.Errorf("inference takes %v s, bound by %s; arithmetic alone %v s", f.Time.Seconds, f.Time.Binds, f.Time.Arithmetic)
	}
}

// handMemory: weights, velocity and gradients of 79510 parameters; the inputs of
// the three layers and the logits; the gradients beside the ReLU.
func handMemory(t *testing.T, m *Memory) {
	t.Helper()
	want := ByClass{
		Weights: 32 * 79510, State: 32 * 79510,
		Activations: 32 * 32 * (784 + 100 + 100 + 10),
		Gradients:   32 * (79510 + 32*(100+100)),
	}
	if m.Training.ByClass != want || m.Training.Bits != want.Total() {
		t.Errorf("training memory %+v, want %+v", m.Training, want)
	}
	if m.Width != 32 {
		t.Errorf("mean width %v, want 32", m.Width)
	}
	endpoint := ByClass{Weights: 32 * 79510, Activations: 32 * (784 + 100)}
	if m.Endpoint.ByClass != endpoint {
		t.Errorf("endpoint memory %+v, want %+v", m.Endpoint, endpoint)
	}
}

// TestMasterByHand: working weights, activations and gradients in bfloat16,
// velocity and master copy in FP32. An update of a parameter moves 16 + 2 32 +
// 2 32 + 16 bits, as many as the FP32 baseline's five times 32.
func TestMasterByHand(t *testing.T) {
	n := twoLayers()
	r := estimate(t, n, "cpu-core-2020", masterArm(t, &n, "bf16"))
	b := &r.Arms[0]
	update := &b.Once.Step.Phases[3]
	want := ByClass{Gradients: 16 * 79510, State: 64 * 79510, Master: 64 * 79510, Weights: 16 * 79510}
	if update.Traffic != want || update.Bits != r.Reference.Once.Step.Phases[3].Bits {
		t.Errorf("update moves %+v, want %+v", update.Traffic, want)
	}
	for p := range 3 {
		if got, ref := b.Once.Step.Phases[p].Bits, r.Reference.Once.Step.Phases[p].Bits; 2*got != ref {
			t.Errorf("%s: %d bits, want half of %d", b.Once.Step.Phases[p].Phase, got, ref)
		}
	}
	if got := b.Memory.Training.Master; got != 32*79510 {
		t.Errorf("the master copy takes %d bits, want %d", got, 32*79510)
	}
	if e := b.Memory.Endpoint; e.Master != 0 || e.Weights != 16*79510 {
		t.Errorf("an endpoint keeps %+v", e)
	}
}

// TestShortBlocks: a convolution over one channel pays a whole scale for every
// weight under MX blocks, over six channels one for six.
func TestShortBlocks(t *testing.T) {
	n := convolutions()
	r := estimate(t, n, DefaultMachine, uniform(t, &n, "mxfp8"))
	want := map[int]uint64{
		0: 54 * 16,         // one channel
		3: 192*8 + 192/6*8, // six channels
		6: 32*8 + 32/8*8,   // eight inputs
		9: 0,               // no such layer
		2: 0,               // a pool
	}
	got := map[int]uint64{}
	for _, x := range r.Arms[0].Memory.Tensors {
		if x.Class == Weights && x.Values > 8 {
			got[x.Layer] = x.Bits
		}
	}
	for layer, bits := range want {
		if got[layer] != bits {
			t.Errorf("layer %d keeps its weights in %d bits, want %d", layer, got[layer], bits)
		}
	}
}
