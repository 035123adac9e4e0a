package trainer

import (
	"math"
	"testing"

	"gorgonia.org/tensor"

	"ulpine/quant"
)

// oneWeight is a network of one dense layer on single inputs that starts at
// zero, so that the first output error is half of the scale: easy to reckon.
func oneWeight(t testing.TB, arm Arm, inputs []float32, labels []int32, epochs int) Job {
	net := network(t, []int{1}, "dense 2")
	x := tensor.New(tensor.WithShape(len(inputs), 1), tensor.WithBacking(inputs))
	return Job{
		Network: net, Arm: arm, Training: sgdTraining(1, epochs), Seed: 1,
		Start: []Param{{Shape: []int{2, 1}, Values: []float64{0, 0}}, {Shape: []int{2}, Values: []float64{0, 0}}},
		Train: Set{Inputs: x, Labels: labels}, Test: Set{Inputs: x, Labels: labels},
	}
}

// TestDynamicScaleSkipsWholeSteps: errors of 2^18/2 and 2^17/2 overflow fp16,
// 2^16/2 does not. Until then neither parameters nor states move; three clean
// steps raise S again.
func TestDynamicScaleSkipsWholeSteps(t *testing.T) {
	arm := storageArm(t, point(t, "fp16"), 1)
	arm.LossScale = LossScale{Kind: DynamicScale, Value: 1 << 18, RaiseAfter: 3}
	job := oneWeight(t, arm, []float32{1, 1, 1, 1, 1, 1}, make([]int32, 6), 1)
	e := engineFor[float32](t, &job)
	want := []struct {
		what fate
		s    float64
	}{{stepSkipped, 1 << 17}, {stepSkipped, 1 << 16}, {stepTaken, 1 << 16}, {stepTaken, 1 << 16}, {stepTaken, 1 << 17}}
	for n, w := range want {
		if _, what := e.step([]int32{int32(n)}, 0.05); what != w.what || e.scaler.s != w.s {
			t.Fatalf("step %d: %v, S %v; want %+v", n+1, what, e.scaler.s, w)
		}
		for _, q := range e.params {
			moved := q.master.data[0] != 0 || q.states[0].data[0] != 0
			if moved != (n >= 2) {
				t.Errorf("step %d: %s is %v, its state %v", n+1, q.name, q.master.data, q.states[0].data)
			}
		}
	}
	if got := e.tally[0][LossGradient].Overflow; got != 4 {
		t.Errorf("%d overflows counted, want 4", got)
	}
}

// TestDynamicScaleWatchesSaturation: a format without infinities saturates.
func TestDynamicScaleWatchesSaturation(t *testing.T) {
	arm := baseline(t, 1)
	arm.LossGradient = point(t, "E4M3")
	arm.LossScale = LossScale{Kind: DynamicScale}
	job := oneWeight(t, arm, []float32{1, -1}, []int32{0, 1}, 2)
	e := engineFor[float32](t, &job)
	if _, what := e.step([]int32{0}, 0.05); what != stepSkipped || e.scaler.s != 1<<14 {
		t.Errorf("step %v, S %v: a saturated gradient must be skipped", what, e.scaler.s)
	}
	arm.LossScale = LossScale{Kind: FixedScale, Value: 1 << 15}
	job.Arm = arm
	e = engineFor[float32](t, &job)
	if _, what := e.step([]int32{0}, 0.05); what != stepTaken {
		t.Errorf("step %v: a fixed scale skips nothing", what)
	}
}

// TestDynamicScaleWatchesGradientsThemselves: an operand that overflowed to
// infinity makes gradients infinite without an event at any point of gradients.
func TestDynamicScaleWatchesGradientsThemselves(t *testing.T) {
	arm := baseline(t, 1)
	operand := point(t, "E5M2")
	operand.Overflow = quant.ToInfinity
	arm.Layers[0].WeightGradient.First = &operand
	arm.LossScale = LossScale{Kind: DynamicScale}
	job := oneWeight(t, arm, []float32{1e6}, []int32{0}, 1)
	e := engineFor[float32](t, &job)
	if _, what := e.step([]int32{0}, 0.05); what != stepSkipped || e.params[0].master.data[0] != 0 {
		t.Errorf("step %v, gradient %v", what, e.params[0].gradient.data)
	}
}

func TestSkipsStartTheCountOfCleanStepsOver(t *testing.T) {
	s := newScaler(LossScale{Kind: DynamicScale, Value: 64, RaiseAfter: 3})
	s.taken()
	s.taken()
	s.skip()
	s.taken()
	s.taken()
	if s.s != 32 || s.row != 0 {
		t.Errorf("S is %v after two clean steps", s.s)
	}
	if s.taken(); s.s != 64 {
		t.Errorf("S is %v after three clean steps", s.s)
	}
}

// TestTenSkippedStepsDiverge: S cannot fall fast enough.
func TestTenSkippedStepsDiverge(t *testing.T) {
	arm := storageArm(t, point(t, "fp16"), 1)
	arm.LossScale = LossScale{Kind: DynamicScale, Value: 1 << 100}
	job := oneWeight(t, arm, uniform(20, 1), make([]int32, 20), 3)
	out := mustRun(t, job)
	if out.Diverged != divergedSkips || out.DivergedStep != 10 || len(out.Steps) != 10 || len(out.Epochs) != 1 {
		t.Errorf("%q in step %d after %d steps, %d epochs", out.Diverged, out.DivergedStep, len(out.Steps), len(out.Epochs))
	}
	if e := out.Epochs[0]; e.Skipped != 10 || e.LossScale != math.Ldexp(1, 90) || math.IsNaN(e.TestAccuracy) {
		t.Errorf("epoch %+v", e)
	}
	if out.Stalled {
		t.Error("a run that diverged is not called stalled")
	}
}

// TestScaleStaysWithinBinary32 at both ends.
func TestScaleStaysWithinBinary32(t *testing.T) {
	s := newScaler(LossScale{Kind: DynamicScale, Value: 1 << 60 * 1 << 60, RaiseAfter: 1, RaiseBy: 64})
	for range 20 {
		s.taken()
	}
	if s.s > math.MaxFloat32 || s.s < 1<<120 {
		t.Errorf("S rose to %v", s.s)
	}
	for range 2000 {
		s.skip()
	}
	if s.s != math.SmallestNonzeroFloat32 {
		t.Errorf("S fell to %v", s.s)
	}
}

// TestNotANumberDiverges: fp16 overflows in the forward pass at once.
func TestNotANumberDiverges(t *testing.T) {
	arm := storageArm(t, point(t, "fp16"), 1)
	arm.Input = point(t, "fp32")
	job := oneWeight(t, arm, []float32{1, 1e6, 1}, []int32{0, 1, 0}, 4)
	job.Training.LearningRate.Start = 1
	out := mustRun(t, job)
	if out.Diverged != divergedLoss || out.DivergedStep != 2 || len(out.Steps) != 2 {
		t.Fatalf("%q in step %d after %d steps", out.Diverged, out.DivergedStep, len(out.Steps))
	}
	if v := out.Steps[1]; v-v == 0 {
		t.Errorf("loss of the last step is %v", v)
	}
	if len(out.Epochs) != 1 || math.IsNaN(out.Epochs[0].TestAccuracy) || out.Test == nil {
		t.Errorf("the run is to be scored as it stands: %+v", out.Epochs)
	}
	for _, v := range out.Final[0].Values {
		if v-v != 0 {
			t.Error("the step that diverged in its loss must not move parameters")
		}
	}
}

// TestParameterNotFiniteDiverges: a gradient of 0.5e6 makes a step that the
// step's format cannot hold.
func TestParameterNotFiniteDiverges(t *testing.T) {
	arm := baseline(t, 1)
	arm.Layers[0].Step = point(t, "E5M2")
	arm.Layers[0].Step.Overflow = quant.ToInfinity
	job := oneWeight(t, arm, []float32{1e6}, []int32{1}, 4)
	job.Training.LearningRate.Start = 1
	out := mustRun(t, job)
	if out.Diverged != divergedMaster || out.DivergedStep != 1 {
		t.Fatalf("%q in step %d, weights %v", out.Diverged, out.DivergedStep, out.Final[0].Values)
	}
	if out.Steps[0] != math.Ln2 || out.Epochs[0].TestLoss-out.Epochs[0].TestLoss == 0 || out.Test.Examples != 1 {
		t.Errorf("loss %v, scores %+v", out.Steps, out.Test)
	}
}

// TestHighLossForTwoEpochsDiverges: a rate far too large on a task that cannot be
// learnt.
func TestHighLossForTwoEpochsDiverges(t *testing.T) {
	job := oneWeight(t, baseline(t, 1), []float32{1, 1, 1, 1}, []int32{0, 1, 0, 1}, 9)
	job.Training.LearningRate.Start = 1000
	out := mustRun(t, job)
	if out.Diverged != divergedHigh || len(out.Epochs) != 2 || out.DivergedStep != 8 {
		t.Errorf("%q in step %d after %d epochs", out.Diverged, out.DivergedStep, len(out.Epochs))
	}
}

func TestStalledIsNoBetterThanAConstant(t *testing.T) {
	inputs, labels := []float32{0, 0, 0, 0}, []int32{0, 1, 0, 1}
	job := oneWeight(t, baseline(t, 1), inputs, labels, 5)
	job.Training.Batch = 4
	if out := mustRun(t, job); !out.Stalled || out.Diverged != "" {
		t.Errorf("inputs that say nothing: stalled %v, diverged %q, loss %v", out.Stalled, out.Diverged, out.Epochs[4].TrainLoss)
	}
	job = oneWeight(t, baseline(t, 1), []float32{1, -1, 1, -1}, labels, 5)
	if out := mustRun(t, job); out.Stalled {
		t.Errorf("a task that is learnt is called stalled: %v", out.Epochs[4].TrainLoss)
	}
}

func TestConstantLossIsTheEntropyOfTheLabels(t *testing.T) {
	s := &split{labels: []int32{0, 0, 0, 1}, n: 4}
	want := -(0.75*math.Log(0.75) + 0.25*math.Log(0.25))
	if got := (crossEntropy{}).constant(s, 3); math.Abs(got-want) > 1e-15 {
		t.Errorf("%v, want %v", got, want)
	}
}
