package trainer

import (
	"math"
	"strings"
	"testing"

	"ulpine/quant"
)

// normJob trains a network with a batch normalisation behind its first layer.
func normJob(t testing.TB, arm func(int) Arm) Job {
	net := network(t, []int{4}, "dense 3", "batchnorm momentum=0.25", "dense 3")
	return Job{
		Network: net, Arm: arm(3), Training: sgdTraining(4, 1), Seed: 6,
		Train: dataset(8, net.Input, 3, 1), Test: dataset(5, net.Input, 3, 2),
	}
}

// TestRunningStatisticsFollowTheBatches: one step by plain binary64 formulas, in
// binary64 everywhere; an evaluation uses them.
func TestRunningStatisticsFollowTheBatches(t *testing.T) {
	job := normJob(t, func(n int) Arm { return Everything(point(t, "fp64"), n, 1) })
	e := engineFor[float64](t, &job)
	running := e.params[4]
	if running.name != "running" || running.master.data[0] != 0 || running.master.data[3] != 1 || e.params[2].master.data[1] != 1 {
		t.Fatalf("statistics start at %v, weights at %v", running.master.data, e.params[2].master.data)
	}
	e.step([]int32{0, 1, 2, 3}, 0)
	x := e.edges[1].values(4)
	for c := range 3 {
		var mean, squares float64
		for s := range 4 {
			mean += x[3*s+c] / 4
		}
		for s := range 4 {
			squares += (x[3*s+c] - mean) * (x[3*s+c] - mean)
		}
		near(t, "mean", running.master.data[c], 0.25*mean)
		near(t, "variance", running.master.data[3+c], 0.75+0.25*squares/3)
	}
	p := pass{seed: 1, step: 1, phase: phaseTest, samples: 1}
	e.forward(&p, []float32{1, 2, 3, 4})
	x, y := e.edges[1].values(1), e.edges[2].values(1)
	for c := range 3 {
		near(t, "output", y[c], (x[c]-running.master.data[c])/math.Sqrt(running.master.data[3+c]+float64(float32(1e-5))))
	}
}

func near(t *testing.T, what string, got, want float64) {
	t.Helper()
	if math.Abs(got-want) > 1e-13*(1+math.Abs(want)) {
		t.Errorf("%s %v, want %v", what, got, want)
	}
}

// TestSkippedStepsMoveNoStatistics, nor does anything train them.
func TestSkippedStepsMoveNoStatistics(t *testing.T) {
	job := normJob(t, func(n int) Arm {
		arm := storageArm(t, point(t, "fp16"), n)
		arm.LossScale = LossScale{Kind: DynamicScale, Value: 0x1p100}
		return arm
	})
	e := engineFor[float32](t, &job)
	if _, what := e.step([]int32{0, 1, 2, 3}, 0.1); what != stepSkipped {
		t.Fatalf("the step is not skipped but %v", what)
	}
	if got := e.params[4].master.data; got[0] != 0 || got[5] != 1 {
		t.Errorf("running statistics %v", got)
	}
	if len(e.params[4].states) != 0 {
		t.Error("running statistics have optimizer states")
	}
}

// TestStatisticsHaveFormatsOfTheirOwn: each of the three points changes a run, and
// unset ones are those they stand for.
func TestStatisticsHaveFormatsOfTheirOwn(t *testing.T) {
	bf16, single := point(t, "bf16"), point(t, "fp32")
	run := func(set func(a *Arithmetic)) Outcome {
		return mustRun(t, normJob(t, func(n int) Arm {
			arm := baseline(t, n)
			set(&arm.Layers[1])
			return arm
		}))
	}
	rough := quant.Accumulate{Product: &bf16, Sum: bf16}
	plain := run(func(*Arithmetic) {})
	same := run(func(a *Arithmetic) {
		a.Statistic, a.Moment = &quant.Accumulate{Product: &single, Sum: single}, &single
		a.InputGradient.Statistic = a.Statistic
	})
	sameOutcome(t, same, plain)
	for name, set := range map[string]func(a *Arithmetic){
		"forward.statistic":        func(a *Arithmetic) { a.Statistic = &rough },
		"forward.moment":           func(a *Arithmetic) { a.Moment = &bf16 },
		"input_gradient.statistic": func(a *Arithmetic) { a.InputGradient.Statistic = &rough },
	} {
		if got := run(set); got.Steps[1] == plain.Steps[1] {
			t.Errorf("%s in bfloat16 changes nothing", name)
		}
	}
}

// TestBatchOfOneIsRefused where the normalisation has one position.
func TestBatchOfOneIsRefused(t *testing.T) {
	job := normJob(t, func(n int) Arm { return baseline(t, n) })
	job.Training.Batch = 7
	if _, err := job.check(); err == nil || !strings.Contains(err.Error(), "layer 2 (batchnorm") || !strings.Contains(err.Error(), "batch of one example") {
		t.Errorf("a last batch of one: %v", err)
	}
	job.Training.Batch = 4
	if _, err := job.check(); err != nil {
		t.Error(err)
	}
}

// TestResidualAddsItsInput: values and gradients of a block of one ReLU.
func TestResidualAddsItsInput(t *testing.T) {
	net := network(t, []int{3}, "dense 3", "residual begin", "relu", "residual end")
	job := Job{Network: net, Arm: baseline(t, 4), Training: sgdTraining(2, 1), Seed: 1, Train: dataset(2, []int{3}, 3, 1)}
	e := engineFor[float32](t, &job)
	e.pass.samples = 2
	e.forward(&e.pass, e.fetch([]int32{0, 1}))
	e.backward(&e.pass, []float64{1, 2, 3, 4, 5, 6})
	for i, x := range e.edges[1].values(2) {
		dy := float32(i + 1)
		y, dx := x, dy
		if x > 0 {
			y, dx = x+x, dy+dy
		}
		if e.outputs(2)[i] != y || e.edges[1].gradients(2)[i] != dx {
			t.Errorf("x %v: y %v, dx %v", x, e.outputs(2)[i], e.edges[1].gradients(2)[i])
		}
	}
}
