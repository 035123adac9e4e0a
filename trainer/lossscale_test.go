package trainer

import "testing"

// TestDynamicScaleRecovers: output errors of a batch of 1024 are below half the least value
// of an eight-bit format, so that nothing is learnt; a scale that starts far too high
// is cut until no step overflows, rises again, and the training then learns as fast as
// binary32.
func TestDynamicScaleRecovers(t *testing.T) {
	run := func(gradient string, scale LossScale) Outcome {
		arm := baseline(t, 3)
		arm.LossGradient, arm.LossScale = point(t, gradient), scale
		for i := range arm.Layers {
			arm.Layers[i].InputGradient.Result = point(t, gradient)
		}
		return mustRun(t, Job{
			Network: network(t, []int{8}, "dense 16", "relu", "dense 4"), Arm: arm, Training: sgdTraining(1024, 60),
			Train: dataset(2048, []int{8}, 4, 1), Seed: 3,
		})
	}
	last := func(o Outcome) Epoch { return o.Epochs[len(o.Epochs)-1] }
	const format = "E4M3(top=ieee)" // least value 2^-9, infinities
	exact, lost := last(run("fp32", LossScale{})), last(run(format, LossScale{}))
	out := run(format, LossScale{Kind: DynamicScale, Value: 0x1p22, RaiseAfter: 10})
	found := last(out)
	if !(exact.TrainLoss < 0.5*lost.TrainLoss) {
		t.Fatalf("binary32 comes to a loss of %v, E4M3 without a scale to %v: the test sees too little", exact.TrainLoss, lost.TrainLoss)
	}
	if !(found.TrainLoss < exact.TrainLoss+0.1*(lost.TrainLoss-exact.TrainLoss)) || out.Diverged != "" {
		t.Errorf("with a dynamic scale the loss is %v, with binary32 %v; %s", found.TrainLoss, exact.TrainLoss, out.Diverged)
	}
	low, skipped := out.Epochs[0].LossScale, uint64(0)
	raised := false
	for _, e := range out.Epochs {
		raised = raised || e.LossScale > low
		low, skipped = min(low, e.LossScale), skipped+e.Skipped
	}
	if skipped < 3 || !raised || !(low < 0x1p20) {
		t.Errorf("%d steps skipped, S fell to %v, raised %v", skipped, low, raised)
	}
	if out.Epochs[0].Skipped != 2 || out.Epochs[0].LossScale != 0x1p20 {
		t.Errorf("after two skips S = %v, %d skipped", out.Epochs[0].LossScale, out.Epochs[0].Skipped)
	}
}
