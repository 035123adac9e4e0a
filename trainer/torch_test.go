package trainer

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"testing"

	"gorgonia.org/tensor"

	"ulpine/quant"
)

// torchCase is one network as .ci/torch/reference.py computed it in FP64.
type torchCase struct {
	Name           string
	Input          []int
	Layers         []string
	Batch, Outputs int
	Loss           string
	LabelSmoothing float64 `json:"label_smoothing"`
	HuberWidth     float64 `json:"huber_width"`
	Optimizer      Optimizer
	X, Targets     []float32
	Labels         []int32
	Start, End     []struct {
		Shape  []int
		Values []float64
	}
	Y, Evaluated []float64
	LossValue    float64 `json:"loss_value"`
	Gradients    [][]float64
}

// torchReference reads the file that ULPINE_TORCH_REFERENCE names, or makes one
// with the python3 that has torch. Where there is none the test is skipped, or
// fails if ULPINE_NEED_TORCH=1.
func torchReference(t *testing.T) []torchCase {
	t.Helper()
	path := os.Getenv("ULPINE_TORCH_REFERENCE")
	needed := os.Getenv("ULPINE_NEED_TORCH") == "1"
	if path == "" {
		if testing.Short() && !needed {
			t.Skip("skipped: starting torch takes seconds; run without -short")
		}
		path = filepath.Join(t.TempDir(), "reference.json")
		if err := makeReference(t, path); err != nil {
			if needed {
				t.Fatal(err)
			}
			t.Skipf("skipped, no reference to compare with: %v; install Debian's python3-torch, or set ULPINE_TORCH_REFERENCE to a file that .ci/torch/reference.py wrote", err)
		}
	}
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var all struct{ Cases []torchCase }
	if err := json.Unmarshal(data, &all); err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	if len(all.Cases) < 20 {
		t.Fatalf("%s holds %d cases; make it again", path, len(all.Cases))
	}
	return all.Cases
}

// makeReference runs the script under the system's python3, or the first on the
// path, whichever has torch; a script that fails for another reason is a fault.
func makeReference(t *testing.T, arguments ...string) (err error) {
	for _, python := range []string{"/usr/bin/python3", "python3"} {
		out, fault := exec.Command(python, append([]string{"../.ci/torch/reference.py"}, arguments...)...).CombinedOutput()
		var exit *exec.ExitError
		switch {
		case fault == nil:
			return nil
		case errors.As(fault, &exit) && exit.ExitCode() != 3:
			t.Fatalf("reference.py under %s: %v: %s", python, fault, out)
		}
		err = fmt.Errorf("%s has no torch: %w", python, fault)
	}
	return err
}

// TestTorchAgrees compares outputs, losses and gradients of every kind of layer and
// loss, and three updates of every optimizer, with a reference of another make.
func TestTorchAgrees(t *testing.T) {
	for _, c := range torchReference(t) {
		t.Run(c.Name, func(t *testing.T) {
			compareTorch[float64](t, &c, point(t, "fp64"), 1e-12)
			compareTorch[float32](t, &c, point(t, "fp32"), 1e-5)
		})
	}
}

func (c *torchCase) job(t *testing.T, p quant.Point) Job {
	net := network(t, c.Input, c.Layers...)
	states, err := c.Optimizer.States()
	if err != nil {
		t.Fatal(err)
	}
	set := Set{Inputs: tensor.New(tensor.WithShape(append([]int{c.Batch}, c.Input...)...), tensor.WithBacking(c.X)), Labels: c.Labels}
	if c.Loss != "cross-entropy" {
		set.Targets = tensor.New(tensor.WithShape(c.Batch, c.Outputs), tensor.WithBacking(c.Targets))
	}
	job := Job{
		Network: net, Arm: Everything(p, len(net.Layers), states), Train: set, Test: set,
		Training: Training{
			Loss: c.Loss, LabelSmoothing: c.LabelSmoothing, HuberWidth: c.HuberWidth, Optimizer: c.Optimizer,
			LearningRate: Schedule{Start: 0.0625}, Batch: c.Batch, Epochs: 3,
		},
	}
	for _, s := range c.Start {
		job.Start = append(job.Start, Param{Shape: s.Shape, Values: s.Values})
	}
	return job
}

func compareTorch[T quant.Element](t *testing.T, c *torchCase, p quant.Point, bound float64) {
	job := c.job(t, p)
	e := engineFor[T](t, &job)
	all := make([]int32, c.Batch)
	identity(all)
	e.pass.samples = c.Batch
	y := e.forward(&e.pass, e.fetch(all))
	close := func(what string, got []T, want []float64) {
		t.Helper()
		if d := distance(got, want); !(d < bound) {
			t.Errorf("%s: relative difference %.3g, bound %g", what, d, bound)
		}
	}
	close("outputs", y, c.Y)
	sum, slopes := e.judge.errors(y, e.truths(c.Batch), 1)
	close("loss", []T{T(sum / float64(c.Batch))}, []float64{c.LossValue})
	e.backward(&e.pass, slopes)
	trained := 0
	for _, q := range e.params {
		if !q.fixed {
			close("gradient of "+paramName(q.layer, q.name), q.gradient.data, c.Gradients[trained])
			trained++
		}
	}
	if trained != len(c.Gradients) {
		t.Errorf("%d parameters, the reference has %d", trained, len(c.Gradients))
	}
	if bound > 1e-10 {
		return // Adam's quotients of tiny gradients leave binary32's bound
	}
	out := mustRun(t, job)
	for i, q := range out.Final {
		if d := distance(q.Values, c.End[i].Values); !(d < bound) {
			t.Errorf("%s after three steps: relative difference %.3g", q.Name, d)
		}
	}
	job.Start = out.Final
	last := engineFor[T](t, &job)
	evaluation := pass{seed: 1, step: 1, phase: phaseTest, samples: c.Batch}
	close("evaluation", last.forward(&evaluation, c.X), c.Evaluated)
}

// distance is the largest difference over the largest magnitude of the reference.
func distance[T quant.Element](got []T, want []float64) float64 {
	if len(got) != len(want) {
		return math.Inf(1)
	}
	var far, high float64
	for i, w := range want {
		if d := math.Abs(float64(got[i]) - w); d > far || d != d {
			far = d
		}
		high = max(high, math.Abs(w))
	}
	if high == 0 {
		return far
	}
	return far / high
}
