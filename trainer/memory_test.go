package trainer

import (
	"context"
	"math"
	"runtime"
	"testing"
)

// heap watches what a training keeps: the live bytes after a step in its middle.
type heap struct {
	at   int
	live uint64
}

func (h *heap) Progress(done, _ int) {
	if done == h.at {
		h.live = liveBytes()
	}
}

func liveBytes() uint64 {
	var m runtime.MemStats
	runtime.GC()
	runtime.GC() // what pools hold goes with the second
	runtime.ReadMemStats(&m)
	return m.HeapAlloc
}

// TestMemoryOf compares the estimate with what trainings hold: within a quarter for
// networks of dense layers, convolutions and pools, within a factor of two for all
// kinds.
func TestMemoryOf(t *testing.T) {
	type network struct {
		name   string
		input  []int
		layers []string
		band   float64
	}
	nets := []network{
		{"pump", []int{1, 256}, []string{
			"conv1d out=6 width=9 stride=2", "relu", "conv1d out=8 width=7 stride=2", "relu", "dense 16", "relu", "dense 5",
		}, 1.25},
	}
	for _, n := range benchNets {
		nets = append(nets, network{n.name, n.input, n.layers, 1.25})
	}
	for _, z := range zoo {
		nets = append(nets, network{z.name, z.input, z.layers, 2})
	}
	arms := map[string]func(int) Arm{
		"baseline": func(n int) Arm { return baseline(t, n) },
		"fp16":     func(n int) Arm { return Everything(point(t, "fp16"), n, 1) },
		"random":   func(n int) Arm { return Everything(stochastic(t, "bf16", 16), n, 1) },
		"double":   func(n int) Arm { return Everything(point(t, "fp64"), n, 1) },
	}
	if testing.Short() {
		nets = nets[:1]
	}
	for _, n := range nets {
		for name, arm := range arms {
			for _, looked := range []Diagnostics{{}, DefaultDiagnostics} {
				if n.band == 2 && (looked.Every > 0 || name == "random") {
					continue
				}
				job := Job{
					Network: parsed(t, n.input, n.layers), Arm: arm(len(n.layers)), Training: sgdTraining(64, 2), Seed: 1,
					Train: dataset(128, n.input, 3, 1), Test: dataset(64, n.input, 3, 2), Diagnostics: looked,
				}
				before := liveBytes()
				h := &heap{at: 3}
				if _, err := Run(context.Background(), job, h); err != nil {
					t.Fatal(err)
				}
				want := MemoryOf(job.Network, &job.Arm, job.Training, looked, Sizes{Train: 128, Test: 64})
				// The data were there before; final parameters come at the end.
				got := float64(h.live) - float64(before)
				own := float64(want.Own()) - float64(8*job.Network.parameterValues())
				t.Logf("%s, %s, looked at every %d: %.0f kB, estimated %.0f (%+v)", n.name, name, looked.Every, got/1e3, own/1e3, want)
				if math.Abs(math.Log(got/own)) > math.Log(n.band) {
					t.Errorf("%s, %s, looked at every %d: %.0f kB, estimated %.0f", n.name, name, looked.Every, got/1e3, own/1e3)
				}
				runtime.KeepAlive(job)
			}
		}
	}
}

func parsed(t *testing.T, input []int, layers []string) Network { return network(t, input, layers...) }
