package trainer

import (
	"context"
	"math"
	"strings"
	"testing"

	"ulpine/quant"
	"ulpine/quant/random"
)

// TestAStageThatChangesNothing changes no bit, in any network, under stochastic
// rounding, with running statistics, states, residues and a moving loss scale.
func TestAStageThatChangesNothing(t *testing.T) {
	for i := range zoo {
		job := zooJob(t, i, rough(t))
		job.Training.Optimizer = Optimizer{Kind: "adamw", WeightDecay: 0.1, Compensated: true}
		job.Training.Epochs = 3
		job.Arm.LossScale = LossScale{Kind: DynamicScale, Value: 8, RaiseAfter: 2}
		for k := range job.Arm.Layers {
			l := &job.Arm.Layers[k]
			l.States = []quant.Point{l.States[0], l.States[0], l.States[0]}
			l.WeightGradient.Residue = &l.States[0]
		}
		plain := mustRun(t, job)
		job.Arm.Stages = []Stage{{Step: 2, Arm: job.Arm}, {Epoch: 3, Arm: job.Arm}}
		job.Diagnostics = everyStep
		sameOutcome(t, mustRun(t, job), plain)
	}
}

// TestStageRoundsWhatIsStored holds every stored tensor at a stage's start to
// roundings in exact rationals, random words written out.
func TestStageRoundsWhatIsStored(t *testing.T) {
	fed := point(t, "fp32")
	arm := baseline(t, 1)
	arm.Layers[0].WeightGradient.Result, arm.Layers[0].WeightGradient.Residue = point(t, "bf16"), &fed
	job := Job{Network: network(t, []int{5}, "dense 4"), Arm: arm, Training: sgdTraining(4, 2), Train: dataset(16, []int{5}, 4, 1), Seed: 9}
	old := engineFor[float32](t, &job)
	for n := range 4 {
		old.step([]int32{int32(4 * n), int32(4*n + 1), int32(4*n + 2), int32(4*n + 3)}, 0.05)
	}
	l := arm.Layers[0]
	kept := stochastic(t, "E5M3", 7)
	l.Master, l.Weight, l.States, l.WeightGradient.Residue = stochastic(t, "E8M5", 12), stochastic(t, "E8M2", 4), []quant.Point{point(t, "E8M4")}, &kept
	arm.Layers = []Arithmetic{l}
	arm.LossScale = LossScale{Kind: FixedScale, Value: 4}
	job.Arm = arm
	next := engineFor[float32](t, &job)
	next.takeOver(old, 5)

	master, weight, state, residue := splitJudge(t, 8, 5, 12), splitJudge(t, 8, 2, 4), splitJudge(t, 8, 4, 0), splitJudge(t, 5, 3, 7)
	moved := 0
	for i, q := range next.params {
		at := func(operation int) quant.Draws {
			return quant.Draws{Seed: random.Derive(9, random.RoundingBits), Step: 5, Site: uint32(256 + 64*(i+1) + operation), Phase: 3}
		}
		was := old.params[i]
		for k := range q.master.data {
			w := master.round(rat(float64(was.master.data[k])), at(8), k)
			e := residue.round(rat(float64(was.residue.data[k])), at(48), k)
			want := []float64{
				w, weight.round(rat(w), at(0), k), state.round(rat(float64(was.states[0].data[k])), at(16), k),
				residue.round(ratProduct(e, 4), at(49), k),
			}
			got := []float64{float64(q.master.data[k]), float64(q.working.data[k]), float64(q.states[0].data[k]), float64(q.residue.data[k])}
			sameBits(t, q.name, got, want)
			if got[0] != float64(was.master.data[k]) && got[3] != 0 {
				moved++
			}
		}
	}
	if moved < 10 {
		t.Errorf("%d elements moved: the test sees too little", moved)
	}
}

// TestLowThenHigh: up to the stage the losses are those of the first arithmetic, from
// it on those of the second from the weights as they stand.
func TestLowThenHigh(t *testing.T) {
	job := convJob(t, func(n int) Arm { return storageArm(t, point(t, "E4M3"), n) })
	job.Training.Optimizer, job.Training.Epochs, job.Training.Shuffle = Optimizer{Kind: "sgd"}, 2, false
	low := job.Arm
	for i := range low.Layers {
		low.Layers[i].States = nil
	}
	high := Everything(point(t, "fp32"), len(low.Layers), 0)
	first := mustRun(t, job)
	job.Arm = high
	job.Start = first.Final
	second := mustRun(t, job)

	job.Start, job.Arm, job.Training.Epochs = nil, low, 4
	job.Arm.Stages = []Stage{{Epoch: 3, Arm: high}}
	both := mustRun(t, job)
	sameBits(t, "losses", both.Steps, append(append([]float64(nil), first.Steps...), second.Steps...))
	for i, p := range second.Final {
		sameBits(t, p.Name, both.Final[i].Values, p.Values)
	}
	if n := len(first.Epochs); math.Float64bits(both.Epochs[n-1].TestLoss) != math.Float64bits(first.Epochs[n-1].TestLoss) {
		t.Errorf("before the stage an evaluation gives %v, not %v", both.Epochs[n-1].TestLoss, first.Epochs[n-1].TestLoss)
	}
	// A start in mid-epoch.
	job.Arm.Stages[0] = Stage{Step: len(first.Steps) + 1, Arm: high}
	sameOutcome(t, mustRun(t, job), both)
}

// TestLossScaleOfAStage starts anew if the stage changes it.
func TestLossScaleOfAStage(t *testing.T) {
	job := Job{Network: network(t, []int{5}, "dense 4"), Arm: baseline(t, 1), Training: sgdTraining(4, 3), Train: dataset(16, []int{5}, 4, 1), Seed: 9}
	job.Arm.LossScale = LossScale{Kind: DynamicScale, Value: 2, RaiseAfter: 3}
	same, other := job.Arm, job.Arm
	other.LossScale.Value = 512
	job.Arm.Stages = []Stage{{Epoch: 2, Arm: same}, {Epoch: 3, Arm: other}}
	var scales []float64
	for _, e := range mustRun(t, job).Epochs {
		scales = append(scales, e.LossScale)
	}
	sameBits(t, "loss scale", scales, []float64{4, 8, 1024})
}

// TestStagesOutOfOrder are refused before a step is taken.
func TestStagesOutOfOrder(t *testing.T) {
	job := Job{Network: network(t, []int{5}, "dense 4"), Arm: baseline(t, 1), Training: sgdTraining(4, 3), Train: dataset(16, []int{5}, 4, 1), Seed: 9}
	plain := job.Arm
	broken := baseline(t, 1)
	broken.Layers[0].Master = quant.Point{}
	for want, stages := range map[string][]Stage{
		"order stages by their start":    {{Epoch: 3, Arm: plain}, {Step: 9, Arm: plain}},
		"the first after step 1":         {{Step: 1, Arm: plain}},
		"but the training has 12":        {{Epoch: 4, Arm: plain}},
		"stage 1: layer 1 (dense 4), up": {{Epoch: 2, Arm: broken}},
	} {
		job.Arm.Stages = stages
		if _, err := Run(context.Background(), job, nil); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
}
