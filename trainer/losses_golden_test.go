package trainer

import (
	"encoding/json"
	"flag"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"ulpine/quant"
)

var update = flag.Bool("update", false, "write testdata/losses.txt anew")

const goldenLosses = "testdata/losses.txt"

// goldenSeed names the replicate and the invented data of the recorded training.
const goldenSeed = 20

// goldenJob is a training through convolution, normalisation, pool and dense layer
// with momentum; its batches are the data in turn.
func goldenJob(t testing.TB, arm func(layers int) Arm) Job {
	net := network(t, []int{2, 10, 10}, "conv2d out=4 size=3 stride=2 pad=1", "batchnorm", "tanh", "avgpool size=2 stride=1", "dense 4")
	return Job{
		Network: net, Arm: arm(len(net.Layers)), Training: sgdTraining(8, 6), Seed: goldenSeed,
		Train: dataset(32, net.Input, 4, goldenSeed),
	}
}

// mixed16 stores bfloat16 but for master and output error, under a loss scale, and sums
// stochastic binary16 products in chunks.
func mixed16(t testing.TB) func(int) Arm {
	return func(layers int) Arm {
		arm := storageArm(t, point(t, "bf16"), layers)
		half, single := stochastic(t, "fp16", 12), point(t, "fp32")
		arm.LossScale = LossScale{Kind: FixedScale, Value: 64}
		for i := range arm.Layers {
			l := &arm.Layers[i]
			l.Master, l.Step = single, single
			l.Forward = quant.Accumulate{Product: &half, Sum: single, Outer: &single, Order: quant.Order{Kind: quant.Chunk, K: 4}}
		}
		return arm
	}
}

// TestLossesStayWhatTheyWere holds the losses of both arms, step by step, to the ones
// recorded in hexadecimal, the same on every machine. -update writes them anew, which a
// raised arithmetic version alone justifies.
func TestLossesStayWhatTheyWere(t *testing.T) {
	single := mustRun(t, goldenJob(t, func(n int) Arm { return baseline(t, n) }))
	mixed := mustRun(t, goldenJob(t, mixed16(t)))
	if single.Steps[len(single.Steps)-1] > single.Steps[0]/2 || single.Steps[5] == mixed.Steps[5] {
		t.Fatalf("the training says nothing: losses %v, mixed %v", single.Steps, mixed.Steps)
	}
	var b strings.Builder
	fmt.Fprintf(&b, "# loss of each step, seed %d: fp32, mixed 16 bits\n", goldenSeed)
	for i := range single.Steps {
		fmt.Fprintf(&b, "%d %x %x\n", i+1, single.Steps[i], mixed.Steps[i])
	}
	if *update {
		if err := os.WriteFile(goldenLosses, []byte(b.String()), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(goldenLosses)
	if err != nil {
		t.Fatal(err)
	}
	if got := b.String(); got != string(want) {
		t.Errorf("seed %d:\n%s\nrecorded:\n%s", goldenSeed, got, want)
	}
}

// TestLossesFollowTorch holds the recorded binary32 losses to those of an independent
// training in binary64 from the same start.
func TestLossesFollowTorch(t *testing.T) {
	if testing.Short() && os.Getenv("ULPINE_NEED_TORCH") != "1" {
		t.Skip("skipped: starting torch takes seconds; run without -short")
	}
	text, err := os.ReadFile(goldenLosses)
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.Split(strings.TrimSpace(string(text)), "\n")[1:]
	job := goldenJob(t, func(n int) Arm { return baseline(t, n) })
	want := torchLosses(t, &job, len(lines))
	for i, line := range lines {
		var step int
		var single, mixed float64
		if _, err := fmt.Sscan(line, &step, &single, &mixed); err != nil {
			t.Fatalf("%s, %q: %v", goldenLosses, line, err)
		}
		if d := math.Abs(single-want[i]) / want[i]; !(d < 1e-5) {
			t.Errorf("step %d: loss %v, the reference has %v, relative difference %.2g", step, single, want[i], d)
		}
		// A loose bound, of the mixed arm's bits.
		if d := math.Abs(mixed-want[i]) / want[0]; !(d < 0.05) {
			t.Errorf("step %d: mixed loss %v, the reference has %v", step, mixed, want[i])
		}
	}
}

// torchLosses has the reference follow a training of batches in turn.
func torchLosses(t *testing.T, job *Job, steps int) (losses []float64) {
	t.Helper()
	e := engineFor[float32](t, job)
	var texts []string
	for _, l := range job.Network.Layers {
		texts = append(texts, l.Text)
	}
	var start [][]float32
	for _, q := range e.params {
		if !q.fixed {
			start = append(start, q.master.data)
		}
	}
	batch, n := job.Training.Batch, len(job.Train.Labels)
	var batches [][]int
	for first := 0; len(batches) < steps; first = (first + batch) % n {
		batches = append(batches, span(first, min(batch, n-first), 1))
	}
	data, err := json.Marshal(map[string]any{
		"input": job.Network.Input, "layers": texts, "start": start, "x": job.Train.Inputs.Float32s(), "labels": job.Train.Labels,
		"batches": batches, "rate": single(job.Training.LearningRate.Start), "momentum": single(job.Training.Optimizer.Momentum),
	})
	if err != nil {
		t.Fatal(err)
	}
	in, out := filepath.Join(t.TempDir(), "training.json"), filepath.Join(t.TempDir(), "losses.json")
	if err = os.WriteFile(in, data, 0o600); err != nil {
		t.Fatal(err)
	}
	runReference(t, "follow", in, out)
	if data, err = os.ReadFile(out); err == nil {
		err = json.Unmarshal(data, &losses)
	}
	if err != nil || len(losses) != steps {
		t.Fatalf("%d losses of %d steps, %v", len(losses), steps, err)
	}
	return losses
}

// runReference runs the script under the python that has torch; without one the test
// is skipped, or fails if ULPINE_NEED_TORCH=1.
func runReference(t *testing.T, arguments ...string) {
	t.Helper()
	err := makeReference(t, arguments...)
	switch {
	case err == nil:
	case os.Getenv("ULPINE_NEED_TORCH") == "1":
		t.Fatal(err)
	default:
		t.Skipf("skipped, no reference to compare with: %v; install Debian's python3-torch", err)
	}
}
