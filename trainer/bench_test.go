package trainer

import (
	"runtime"
	"sync"
	"testing"
	"time"
)

// benchNets are the networks that steps are measured on, in batches of 64.
var benchNets = []struct {
	name   string
	input  []int
	layers []string
}{
	{"lenet", []int{1, 28, 28}, []string{
		"conv2d out=8 size=5", "relu", "maxpool size=2",
		"conv2d out=16 size=5", "relu", "maxpool size=2", "dense 120", "relu", "dense 10",
	}},
	{"mlp", []int{784}, []string{"dense 256", "relu", "dense 128", "relu", "dense 10"}},
}

// benchArms are the arithmetics that matter for speed, given the number of layers.
var benchArms = []struct {
	name string
	arm  func(b *testing.B, layers int) Arm
}{
	{"baseline", everythingArm("fp32")},
	{"bf16-storage", func(b *testing.B, n int) Arm { return storageArm(b, point(b, "bf16"), n) }},
	{"fp16-everything", everythingArm("fp16")},
	{"bf16-everything", everythingArm("bf16")},
	{"fp16-stochastic-everything", func(b *testing.B, n int) Arm {
		return Everything(stochastic(b, "fp16", 16), n, 1)
	}},
	{"fp16-everything-exact-products", func(b *testing.B, n int) Arm {
		return exactProducts(Everything(point(b, "fp16"), n, 1))
	}},
	{"MXFP8-operands", func(b *testing.B, n int) Arm { return operandArm(b, "MXFP8(E4M3)", n) }},
	{"INT8-operands", func(b *testing.B, n int) Arm { return operandArm(b, "INT8", n) }},
}

// everythingArm rounds at every point to a format.
func everythingArm(format string) func(*testing.B, int) Arm {
	return func(b *testing.B, n int) Arm { return Everything(point(b, format), n, 1) }
}

// exactProducts leaves products unrounded: every addition is one fused step.
func exactProducts(arm Arm) Arm {
	for i := range arm.Layers {
		l := &arm.Layers[i]
		l.Forward.Product, l.InputGradient.Sums.Product, l.WeightGradient.Sums.Product = nil, nil, nil
	}
	return arm
}

// operandArm rounds all operands of products to a format with shared scales; the
// rest is binary32.
func operandArm(t testing.TB, format string, layers int) Arm {
	arm := baseline(t, layers)
	p := point(t, format)
	for i := range arm.Layers {
		l := &arm.Layers[i]
		l.Weight, l.Operand = p, &p
		l.InputGradient.First, l.InputGradient.Gradient = &p, &p
		l.WeightGradient.First, l.WeightGradient.Gradient = &p, &p
	}
	return arm
}

// BenchmarkStep measures whole training steps of 64 examples, forward, backward and
// update, in examples/s, alone and with a helper. A step that allocates fails.
func BenchmarkStep(b *testing.B) {
	for _, net := range benchNets {
		for _, a := range benchArms {
			step := func(b *testing.B, team *Team) {
				job := benchJob(b, net.input, net.layers, a.arm(b, len(net.layers)))
				job.Team = team
				measureSteps(b, benchStep(b, &job))
			}
			b.Run(net.name+"/"+a.name+"/workers=1", func(b *testing.B) { step(b, nil) })
			b.Run(net.name+"/"+a.name+"/workers=2", func(b *testing.B) {
				if runtime.GOMAXPROCS(0) < 2 {
					b.Skip("one processor")
				}
				team, stop := NewTeam(1), make(chan struct{})
				var done sync.WaitGroup
				done.Go(func() { team.Help(stop) })
				step(b, team)
				close(stop)
				done.Wait()
			})
		}
	}
}

func measureSteps(b *testing.B, step func()) {
	for range 4 {
		step()
	}
	// A mean, rounded down: the first step that falls back to wider lanes, wherever it
	// comes, finds their memory missing.
	if n := testing.AllocsPerRun(8, step); n != 0 {
		b.Errorf("%v allocations a step", n)
	}
	wall, cpu := time.Hour, time.Hour
	for b.Loop() {
		start, spent := time.Now(), cpuTime()
		step()
		wall, cpu = min(wall, time.Since(start)), min(cpu, cpuTime()-spent)
	}
	b.ReportMetric(float64(64*b.N)/b.Elapsed().Seconds(), "examples/s")
	b.ReportMetric(64/wall.Seconds(), "examples/s-best")
	b.ReportMetric(64/cpu.Seconds(), "examples/s-cpu") // of all processors together; holds on a busy machine
}

// benchJob is a training on 256 examples in batches of 64.
func benchJob(b *testing.B, input []int, layers []string, arm Arm) Job {
	return Job{
		Network: network(b, input, layers...), Arm: arm, Training: sgdTraining(64, 1), Seed: 1,
		Train: dataset(256, input, 10, 1),
	}
}

// benchStep is one training step after another, over four batches by turns.
func benchStep(b *testing.B, job *Job) func() {
	e := engineFor[float32](b, job)
	p, err := job.check()
	if err == nil {
		err = e.observe(job, p)
	}
	if err != nil {
		b.Fatal(err)
	}
	order := make([]int32, 256)
	identity(order)
	at, n := 0, uint32(0)
	return func() {
		e.moment.before, e.moment.epochEnds = n%benchEpoch, n%benchEpoch == benchEpoch-1
		n++
		e.step(order[at:][:64], 0.01)
		at = (at + 64) % len(order)
	}
}

// benchEpoch is the number of steps of an epoch, at whose end diagnostics look.
const benchEpoch = 20

// BenchmarkDiagnostics trains without and with the default diagnostics, a step by
// turns, in rounds of 200 steps, the period of the rarest look. cost-% is what looking
// adds in the cheapest round of several; more than 10 fails.
func BenchmarkDiagnostics(b *testing.B) {
	const period = 200
	for _, net := range benchNets {
		b.Run(net.name, func(b *testing.B) {
			plain := benchJob(b, net.input, net.layers, storageArm(b, point(b, "bf16"), len(net.layers)))
			looked := plain
			looked.Diagnostics = DefaultDiagnostics
			steps := [2]func(){benchStep(b, &plain), benchStep(b, &looked)}
			var spent [2]time.Duration
			cost := 1e9
			for b.Loop() {
				spent = [2]time.Duration{}
				for range period {
					for i, step := range steps {
						start := cpuTime()
						step()
						spent[i] += cpuTime() - start
					}
				}
				cost = min(cost, 100*(float64(spent[1])/float64(spent[0])-1))
			}
			b.ReportMetric(cost, "cost-%")
			if b.N > 2 && cost > 10 {
				b.Errorf("diagnostics cost %.1f %% of a training", cost)
			}
		})
	}
}
