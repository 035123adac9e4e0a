package store

import (
	"fmt"
	"math"
	"path/filepath"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"go.uber.org/goleak"

	"ulpine/results"
)

func TestMain(m *testing.M) {
	runHelper() // does not return in a process that a test started
	goleak.VerifyTestMain(m)
}

// keyOf is an invented key.
func keyOf(n int) (key results.Hash) {
	copy(key[:], fmt.Sprintf("key %028d", n))
	return key
}

// run is an invented run, different for every n; big gives it tensors and
// curves of several pieces.
func run(n int, big bool) *results.Run {
	size := 3
	if big {
		size = 40_000
	}
	r := &results.Run{
		Arm: fmt.Sprintf("arm-%d", n%3), Replicate: 100 + uint64(n/3), Key: keyOf(n), State: results.Stored,
		Epochs: []results.Epoch{
			{TrainLoss: 1, TrainMetric: 0.5, ValidationLoss: math.NaN(), TestMetric: 0.5, LossScale: 1024},
			{TrainLoss: 0.5, TrainMetric: 0.75, TestMetric: 0.9 + float64(n)/1000, Ties: 3, Skipped: 1},
		},
		Counters:    []results.PointCounts{{Layer: -1, Name: "loss", Point: "loss.gradient", Counts: results.Counts{Underflow: uint64(n)}}},
		Confusion:   []uint64{5, 1, 2, 7},
		Classes:     2,
		CodeVersion: "v0", Host: "here", Wall: 12345678,
	}
	for i := range size {
		r.Steps = append(r.Steps, float64(n)+1/float64(i+1))
	}
	r.Steps[1] = math.NaN()
	narrow := results.Tensor{Name: "0.weight", Shape: []int{size}}
	wide := results.Tensor{Name: "0.bias", Shape: []int{size, 1}, Wide: true}
	for i := range size {
		narrow.Values = append(narrow.Values, float64(float32(i)/3))
		wide.Values = append(wide.Values, float64(i)/7)
	}
	empty := results.Tensor{Name: "none", Shape: []int{0, 4}}
	r.Initial = []results.Tensor{narrow, wide, empty}
	r.Final = []results.Tensor{wide, narrow}
	return r
}

// open opens a new store in a directory of its own and closes it after the test.
func open(t *testing.T) *Store {
	t.Helper()
	return openAt(t, filepath.Join(t.TempDir(), DefaultPath), Options{})
}

func openAt(t *testing.T, path string, o Options) *Store {
	t.Helper()
	s, err := Open(path, o)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	return s
}

func put(t *testing.T, s *Store, runs ...*results.Run) {
	t.Helper()
	for _, r := range runs {
		if err := s.Put(r); err != nil {
			t.Fatal(err)
		}
	}
}

// sameRun compares a run read back with the one put.
func sameRun(t *testing.T, got, put *results.Run) {
	t.Helper()
	want := *put
	want.Digest = got.Digest
	options := cmp.Options{cmpopts.EquateNaNs(), cmpopts.EquateEmpty()}
	if d := cmp.Diff(&want, got, options); d != "" {
		t.Errorf("run read back differs (-put +got):\n%s", d)
	}
	if put.State == results.Stored && got.Digest != results.DigestOf(put) {
		t.Errorf("digest %v, want %v", got.Digest, results.DigestOf(put))
	}
}
