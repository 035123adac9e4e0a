package trainer

import (
	"testing"

	"ulpine/quant"
)

// benchmarkStep measures training steps of 64 examples, reported as examples/s.
func benchmarkStep(b *testing.B, input []int, arm func(layers int) Arm, layers ...string) {
	net := network(b, input, layers...)
	training := sgdTraining(64, 1)
	job := Job{Network: net, Arm: arm(len(layers)), Training: training, Seed: 1, Train: dataset(256, input, 10, 1)}
	e := engineFor[float32](b, &job)
	batch := make([]int32, 64)
	identity(batch)
	e.step(batch, 0.01)
	b.ReportAllocs()
	b.ResetTimer()
	for range b.N {
		e.step(batch, 0.01)
	}
	b.ReportMetric(float64(64*b.N)/b.Elapsed().Seconds(), "examples/s")
}

// benchmarkArms runs one network under the arms that matter for speed.
func benchmarkArms(b *testing.B, input []int, layers ...string) {
	all16 := func(p quant.Point) func(int) Arm {
		return func(n int) Arm { return Everything(p, n, 1) }
	}
	b.Run("baseline", func(b *testing.B) { benchmarkStep(b, input, all16(point(b, "fp32")), layers...) })
	b.Run("bf16 storage", func(b *testing.B) {
		benchmarkStep(b, input, func(n int) Arm { return storageArm(b, point(b, "bf16"), n) }, layers...)
	})
	b.Run("fp16 everything", func(b *testing.B) { benchmarkStep(b, input, all16(point(b, "fp16")), layers...) })
	b.Run("fp16 stochastic everything", func(b *testing.B) {
		benchmarkStep(b, input, all16(stochastic(b, "fp16", 16)), layers...)
	})
}

func BenchmarkPerceptronStep(b *testing.B) {
	benchmarkArms(b, []int{784}, "dense 256", "relu", "dense 128", "relu", "dense 10")
}

func BenchmarkConvolutionStep(b *testing.B) {
	benchmarkArms(b, []int{1, 28, 28}, "conv2d out=8 size=5", "relu", "maxpool size=2",
		"conv2d out=16 size=5", "relu", "maxpool size=2", "dense 120", "relu", "dense 10")
}
