package experiments

import (
	"context"
	"fmt"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"go.uber.org/goleak"

	"ulpine/datasets"
	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
	"ulpine/trainer"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// tiny is a plan that trains in a moment; %s takes further tables.
const tiny = `
title    = "a tiny plan"
question = "Does it run?"

[task]
data = "pump-vibration"
train = 48
validation = 16
test = 32
data_seed = 1

[network]
layers = ["conv1d out=2 width=9 stride=8", "relu", "dense 5"]

[training]
optimizer = { kind = "sgd", momentum = 0.9 }
learning_rate = 0.05
batch = 16
epochs = 2

[replicates]
count = 3
first_seed = 100

[claim]
metric = "test accuracy"
margin = 0.2
confidence = 0.95

[baseline]
everything = "fp32"

[[arm]]
name = "bf16 nearest"
storage = "bf16"

[[arm]]
name = "bf16 stochastic"
storage = { format = "bf16", rounding = "stochastic" }

[[arm]]
name = "fp32 again"
everything = "fp32"

[[contrast]]
arm = "bf16 stochastic"
against = "bf16 nearest"
margin = 0.1
%s
`

const pretraining = `
[pretrain]
task = { data_seed = 2 }
training.epochs = 1
`

// texts is a source of plans from memory.
type texts map[string]string

func (m texts) ReadPlan(name string) ([]byte, error) { return []byte(m[name]), nil }

// tinyPlan is tiny with pairs of old and new text replaced.
func tinyPlan(t *testing.T, extra string, changes ...string) *plan.Plan {
	t.Helper()
	text := strings.NewReplacer(changes...).Replace(fmt.Sprintf(tiny, extra))
	p, err := plan.LoadFrom(texts{"tiny.toml": text}, "tiny.toml")
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func openStore(t *testing.T) *store.Store {
	t.Helper()
	return openStoreAt(t, filepath.Join(t.TempDir(), store.DefaultPath))
}

func openStoreAt(t *testing.T, path string) *store.Store {
	t.Helper()
	s, err := store.Open(path, store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	return s
}

// fakeSource yields one example a set, at once, and counts.
type fakeSource struct {
	mu    sync.Mutex
	loads map[uint64]int
	mark  float32 // what the generator yields
	err   error
	panic bool
}

func (f *fakeSource) Facts() (datasets.Facts, error) { return datasets.Facts{}, nil }
func (f *fakeSource) Canonical() string              { return "fake" }

func (f *fakeSource) Load(seed uint64) (*datasets.Data, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.panic {
		panic("the reader is broken")
	}
	if f.loads == nil {
		f.loads = map[uint64]int{}
	}
	f.loads[seed]++
	d := &datasets.Data{}
	d.Hash = results.Hash{byte(seed), byte(f.mark)}
	return d, f.err
}

// fakePlan is tinyPlan on a fake source, for runners with a fake trainer.
func fakePlan(t *testing.T, replicates int, pretrained bool) (*plan.Plan, *fakeSource) {
	t.Helper()
	extra := ""
	if pretrained {
		extra = pretraining
	}
	p := tinyPlan(t, extra, "count = 3", fmt.Sprintf("count = %d", replicates))
	f := &fakeSource{}
	p.Task.Source = f
	return p, f
}

// outcome is what a fake training comes to: something of its own for each arm
// and seed.
func outcome(job trainer.Job) trainer.Outcome {
	first := job.Arm.Layers[0].Master
	x := float64(job.Seed%97) + float64(len(first.Format.String())) + float64(first.Rounding.Mode)/4
	if job.Start != nil {
		x += 1000 * job.Start[0].Values[0]
	}
	return trainer.Outcome{
		Steps:  []float64{x, x / 2},
		Epochs: []trainer.Epoch{{TestAccuracy: 0.5 + x/1e6}},
		Final:  []trainer.Param{{Name: "w", Shape: []int{1}, Wide: true, Values: []float64{x}}},
	}
}

// fakeTrain trains at once.
func fakeTrain(_ context.Context, job trainer.Job, w trainer.Watcher) (trainer.Outcome, error) {
	w.Progress(1, 2)
	w.Progress(2, 2)
	return outcome(job), nil
}

// isPretraining tells the job of a pretraining by its single epoch.
func isPretraining(job trainer.Job) bool { return job.Training.Epochs == 1 }

// fake runs a plan with a fake trainer.
func fake(ctx context.Context, p *plan.Plan, s *store.Store, o Options,
	train func(context.Context, trainer.Job, trainer.Watcher) (trainer.Outcome, error),
) (Summary, error) {
	x := newRunner(newLayout(p), s, o)
	x.train = train
	return x.run(ctx)
}

// log is a progress that remembers.
type log struct {
	mu       sync.Mutex
	started  []Place
	steps    []Step
	finished []Finish
	notes    []string
	on       func(Finish)
}

func (l *log) Started(p Place) { l.started = append(l.started, p) }
func (l *log) Step(s Step)     { l.steps = append(l.steps, s) }
func (l *log) Note(n string)   { l.notes = append(l.notes, n) }

func (l *log) Finished(f Finish) {
	l.finished = append(l.finished, f)
	if l.on != nil {
		l.on(f)
	}
}

// states are the states of all runs in a store, by name.
func states(t *testing.T, s *store.Store) map[string]results.State {
	t.Helper()
	list, err := s.List(store.Filter{})
	if err != nil {
		t.Fatal(err)
	}
	all := map[string]results.State{}
	for _, e := range list {
		all[e.Name()] = e.State
	}
	return all
}
