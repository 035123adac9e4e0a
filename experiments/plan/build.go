package plan

import (
	"errors"
	"fmt"
	"io/fs"
	"slices"
	"strings"

	"ulpine/trainer"
)

// planKeys are the keys of a plan.
var planKeys = []string{
	"title", "question", "include", "task", "network", "training", "pretrain", "start", "replicates",
	"claim", "baseline", "arm", "grid", "contrast", "controls", "format", "tuning",
}

// Load reads, checks and resolves the plan in the file name. A path such as first-look.toml or
// experiments/plans/first-look.toml that is not on disk is read from the copy
// inside the program, which Notices then says. The error is a *PlanError or
// Errors: what is wrong with the plan, one line each.
func Load(name string) (*Plan, error) { return LoadWith(name, nil) }

// LoadWith is Load where runs may be read from stores, for plans that start from one.
func LoadWith(name string, stored StoredRuns) (*Plan, error) {
	var notices []string
	p, err := loadFrom(disk{&notices}, name, stored)
	if err != nil {
		return nil, err
	}
	p.Notices = append(notices, p.Notices...)
	return p, nil
}

// LoadFrom is Load with the texts of the plan and what it includes from source.
// Data files are read from disk all the same, relative to the file that names
// them.
func LoadFrom(source Source, name string) (*Plan, error) { return loadFrom(source, name, nil) }

func loadFrom(source Source, name string, stored StoredRuns) (*Plan, error) {
	l := loader{source: source}
	root, err := l.load(name, nil, nil)
	if err != nil {
		return nil, err
	}
	if len(root.table) == 0 {
		return nil, emptyPlan(name)
	}
	r := &reader{stored: stored}
	p := r.build(root)
	if len(r.errs) > 0 {
		r.errs.hint(l.text.String())
		return nil, r.errs.withoutEchoes().inOrder()
	}
	p.File, p.Text = name, l.text.String()
	p.Warnings = p.warn()
	return p, nil
}

// hint points from a file that is not there to the plan's leading comment, if that
// holds a command: a line indented like one.
func (e Errors) hint(text string) {
	command := false
	for line := range strings.Lines(text) {
		if !strings.HasPrefix(line, "#") {
			break
		}
		command = command || strings.HasPrefix(line, "#   ")
	}
	if !command {
		return
	}
	for _, one := range e {
		if errors.Is(one.Err, fs.ErrNotExist) {
			one.Remedy = strings.TrimPrefix(one.Remedy+"; the first lines of the plan say how to get it", "; ")
		}
	}
}

// emptyPlan is the one error of a file without a key: each table that it lacks
// would be told at length otherwise.
func emptyPlan(name string) *PlanError {
	return &PlanError{
		File: name, Line: 1, Reason: "the plan is empty",
		Remedy: "write at least [task], [network], [training], [replicates], [claim] and one [[arm]], as " + shippedAt + "/first-look.toml does",
	}
}

// build reads every table of a plan. Tables that lean on one that failed are
// read with a stand-in, so that their own errors are told too.
func (r *reader) build(root *node) *Plan {
	r.known(root, planKeys...)
	p := &Plan{
		Title:    r.text(root, "title", ""),
		Question: r.text(root, "question", ""),
	}
	p.Task = r.readTask(root)
	p.Network = r.readNetwork(root, &p.Task)
	r.input = p.Network.Input
	p.Training = r.readMainTraining(root, &p.Task)
	p.Diagnostics = r.readDiagnostics(root)
	p.Predictions = r.readPredictions(root)
	p.Replicates = r.readReplicates(root)
	p.Claim = r.readClaim(root, &p.Task)
	arms := armReader{r, r.readFormats(root), &p.Network, p.Training, p.Task.Train}
	var grids []*grid
	p.Arms, grids = arms.readArms(root)
	p.Controls = arms.readControls(root, p.Baseline())
	p.Contrasts = r.readContrasts(root, p.Arms, p.Claim.Margin)
	for _, g := range grids {
		p.Grids = append(p.Grids, g.Grid)
		p.addContrasts(r.contrasts(g, p.Claim.Margin))
	}
	p.Pretrain = r.readPretrain(root, p)
	p.Start = r.readStart(root, &p.Network)
	r.checkMetric(root, p.Claim, p.Training, p.Task)
	p.Tuning = r.readTuning(root, p)
	return p
}

// addContrasts adds those that the plan does not spell out.
func (p *Plan) addContrasts(all []Contrast) {
	for _, c := range all {
		same := func(d Contrast) bool { return d.Arm == c.Arm && d.Against == c.Against }
		if !slices.ContainsFunc(p.Contrasts, same) {
			p.Contrasts = append(p.Contrasts, c)
		}
	}
}

// readNetwork reads [network].
func (r *reader) readNetwork(root *node, task *Task) trainer.Network {
	n := r.required(root, "network", `[network] with layers = ["dense 16", "relu", "dense 5"]`)
	if n == nil {
		return trainer.Network{}
	}
	r.known(n, "layers")
	at := n.table["layers"]
	texts, nodes := r.texts(n, "layers")
	switch {
	case at == nil:
		r.fail(n.lacks("layers", `write layers = ["dense 16", "relu", "dense 5"]`, "layers are missing"))
		return trainer.Network{}
	case nodes == nil, len(task.Shape) == 0:
		return trainer.Network{}
	case len(texts) == 0:
		r.fail(at.errorf(fmt.Sprintf("write at least [%q]", fmt.Sprintf("dense %d", task.outputs())), "the network has no layers"))
		return trainer.Network{}
	}
	network, err := trainer.ParseLayers(texts, task.Shape)
	if err != nil {
		r.fail(fault(faultyLayer(err, at), err))
		return trainer.Network{}
	}
	r.checkOutputs(&network, task, nodes)
	return network
}

// faultyLayer is the node of the layer that an error of the trainer names.
func faultyLayer(err error, layers *node) *node {
	var i, of int
	if n, _ := fmt.Sscanf(err.Error(), "layer %d of %d", &i, &of); n == 2 && i >= 1 && i <= len(layers.list) {
		return layers.list[i-1]
	}
	return layers
}

// checkOutputs holds the last layer to the classes or targets of the task.
func (r *reader) checkOutputs(network *trainer.Network, task *Task, nodes []*node) {
	last := network.Layers[len(network.Layers)-1]
	remedy := fmt.Sprintf("end with %q", fmt.Sprintf("dense %d", task.outputs()))
	kind := "classes"
	if len(task.TargetNames) > 0 {
		kind = "targets"
	}
	switch at := nodes[len(nodes)-1]; {
	case network.Parameters() == 0:
		r.fail(at.errorf(remedy, "the network has no layer with weights: nothing to train"))
	case network.Outputs() != task.outputs() && len(last.Out) == 1 && last.Kind == "dense":
		r.fail(at.errorf("write"+strings.TrimPrefix(remedy, "end with"), "the last layer, %q, has %d outputs, but the task has %d %s",
			last.Name, network.Outputs(), task.outputs(), kind))
	case network.Outputs() != task.outputs():
		r.fail(at.errorf(remedy, "the last layer, %q, has an output of %s = %d values, but the task has %d %s",
			last.Name, product(last.Out), network.Outputs(), task.outputs(), kind))
	}
}

// product writes a shape as the product that its volume is: 6 x 60.
func product(shape []int) string {
	words := make([]string, len(shape))
	for i, d := range shape {
		words[i] = fmt.Sprint(d)
	}
	return strings.Join(words, " x ")
}

// defaultTraining is what [training] may leave out.
func defaultTraining() trainer.Training {
	return trainer.Training{
		Loss: "cross-entropy", Optimizer: trainer.Optimizer{Kind: "sgd"},
		LearningRate: trainer.Schedule{Multiply: 1}, Shuffle: true,
		EvaluateTest: trainer.EveryEpoch, EvaluateValidation: trainer.EveryEpoch,
	}
}

// readMainTraining reads [training].
func (r *reader) readMainTraining(root *node, task *Task) trainer.Training {
	n := r.required(root, "training", "[training] with learning_rate = 0.02, batch = 32 and epochs = 15")
	if n == nil {
		return defaultTraining()
	}
	t := r.readTraining(n, defaultTraining(), false, append(slices.Clone(trainingKeys), "diagnostics", "predictions"))
	r.checkBatch(n, &t, task.Train)
	r.checkTargets(n, &t, task)
	r.checkAugment(n, &t, task)
	return t
}

// readPretrain reads [pretrain], or returns nil.
func (r *reader) readPretrain(root *node, p *Plan) *Pretrain {
	n := r.table(root, "pretrain", `[pretrain] with task.variant = "plain" and training.epochs = 5`)
	if n == nil {
		return nil
	}
	r.known(n, "task", "training")
	pre := &Pretrain{Task: r.varyTask(root, n, &p.Task), Training: p.Training}
	if sub := r.table(n, "training", "training.epochs = 5"); sub != nil {
		pre.Training = r.readTraining(sub, p.Training, true, trainingKeys)
		r.checkBatch(sub, &pre.Training, pre.Task.Train)
		r.checkTargets(sub, &pre.Training, &pre.Task)
		r.checkAugment(sub, &pre.Training, &pre.Task)
	}
	r.checkSameShape(n, &p.Task, &pre.Task)
	states, _ := pre.Training.Optimizer.States()
	pre.Arithmetic = p.Baseline().assignment.arm(&p.Network, states)
	pre.Arithmetic.LossScale = p.Baseline().Arithmetic.LossScale
	pre.Canonical = pre.canonical(&p.Network)
	return pre
}
