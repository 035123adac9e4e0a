package trainer

import (
	"context"
	"fmt"
	"math"

	"ulpine/quant"
	"ulpine/quant/random"
)

// evaluationBatch is the least number of examples an evaluation computes at
// once. It changes no bit: nothing in a forward pass depends on the batch.
const evaluationBatch = 64

// engine holds a network in training: layers, parameters, all memory. A step
// allocates nothing.
type engine[T quant.Element] struct {
	net  *Network
	arm  *Arm
	wide bool

	edges    []*edge[T] // edges[i] lies below layer i
	layers   []layer[T]
	params   []*param[T]
	settlers []settler
	observer *observer // nil: nobody looks
	twin     *twin     // nil: gradients are not compared

	stripes []stripe // of an example whose channels are rounded differently

	judge  *judge[T]
	mover  *mover[T]
	scaler *scaler
	scores *Scores // answers of the training steps of this epoch

	batch  int // of training
	epoch  int // the first is 1
	train  *split
	change *augmenter // nil: examples stay as they are
	seed   uint64
	pass   pass
	moment moment // of the step to come, but for its number
	tally  tally
	gather []float32 // inputs of a shuffled batch
	truth  truth     // and its targets
}

// newEngine builds layers and memory. The arm has been checked.
func newEngine[T quant.Element](job *Job, train *split, parts parts) (*engine[T], error) {
	e := &engine[T]{
		net: &job.Network, arm: &job.Arm, wide: parts.wide, train: train, seed: job.Seed,
		batch:  min(job.Training.Batch, train.size()),
		tally:  make(tally, len(job.Network.Layers)+1),
		scaler: newScaler(job.Arm.LossScale),
		scores: newScores(parts.classes, parts.loss.regression()),
	}
	e.stripes = stripesOf(e.net, e.arm)
	capacity := max(e.batch, min(evaluationBatch, parts.largest))
	if err := e.buildLayers(capacity, job.Team); err != nil {
		return nil, err
	}
	e.judge = newJudge[T](parts.loss, e.batch, parts.classes)
	e.mover = newMover(parts.rule, job.Training.Optimizer, e.params)
	e.gather = make([]float32, e.batch*train.per)
	e.truth = newTruth(e.batch, train)
	e.change = newAugmenter(job.Training.Augment, job.Network.Input, job.Seed)
	e.pass = pass{seed: random.Derive(job.Seed, random.RoundingBits), phase: phaseTraining, tally: e.tally, dropout: random.Derive(job.Seed, random.Dropout)}
	return e, nil
}

// buildLayers makes an edge above every layer, of the same memory where the
// layer is a mere view, and collects the parameters.
func (e *engine[T]) buildLayers(capacity int, team *Team) error {
	e.edges = []*edge[T]{newEdge[T](capacity, e.net.Input)}
	for i := range e.net.Layers {
		spec := &e.net.Layers[i]
		k := findKind(spec.Kind)
		below := e.edges[i]
		above := below
		if k.view {
			above = below.reshaped(capacity, spec.Out)
		} else {
			above = newEdge[T](capacity, spec.Out)
		}
		b := &bench[T]{place: place{layer: i, set: &e.arm.Layers[i]}, spec: spec, below: below, above: above, batch: capacity, earlier: e.layers, team: team}
		l, err := builderOf[T](k)(b)
		if err != nil {
			return fmt.Errorf("%s: %w", e.net.where(i), err)
		}
		if s, ok := l.(settler); ok {
			e.settlers = append(e.settlers, s)
		}
		e.edges, e.layers, e.params = append(e.edges, above), append(e.layers, l), append(e.params, l.params()...)
	}
	return nil
}

// start sets the parameters: R[update.master] of the values given, or of drawn
// ones, then the working copies; both under step 0.
func (e *engine[T]) start(given []Param) error {
	if err := e.checkStart(given); err != nil {
		return err
	}
	for i, q := range e.params {
		values := make([]float64, len(q.master.data))
		if given != nil {
			copy(values, given[i].Values)
		} else {
			q.drawInitial(values, e.seed, e.net.gain(q.layer))
		}
		q.start(&e.pass, values)
		q.refresh(&e.pass)
	}
	return nil
}

// checkStart compares starting parameters with the network's.
func (e *engine[T]) checkStart(given []Param) error {
	if given == nil {
		return nil
	}
	if len(given) != len(e.params) {
		return fmt.Errorf("start: %d parameters for a network that has %d; start from a run of the same network", len(given), len(e.params))
	}
	for i, q := range e.params {
		if shapeText(given[i].Shape) != shapeText(q.shape) || len(given[i].Values) != len(q.master.data) {
			return fmt.Errorf("start: parameter %s has shape %s, the network's %s has %s; start from a run of the same network", given[i].Name, shapeText(given[i].Shape), paramName(q.layer, q.name), shapeText(q.shape))
		}
	}
	return nil
}

// record copies the parameters.
func (e *engine[T]) record() []Param {
	out := make([]Param, len(e.params))
	for i, q := range e.params {
		out[i] = q.record(e.wide)
	}
	return out
}

// forward walks up the network from inputs [samples, ...] and returns the
// outputs.
func (e *engine[T]) forward(p *pass, inputs []float32) []T {
	e.takeInputs(p, inputs)
	for _, l := range e.layers {
		l.forward(p)
	}
	return e.outputs(p.samples)
}

func (e *engine[T]) outputs(n int) []T { return e.edges[len(e.edges)-1].values(n) }

// fate is what became of a step.
type fate uint8

const (
	stepTaken fate = iota
	stepSkipped
	lossNotFinite
	masterNotFinite
)

// step trains on the examples numbered in batch and returns their mean loss.
func (e *engine[T]) step(batch []int32, rate float64) (loss float64, what fate) {
	p := &e.pass
	p.step++
	p.samples = len(batch)
	p.watch = e.observer.due(e.now(p.step))
	y := e.forward(p, e.fetch(batch))
	score(e.scores, y, e.truths(len(batch)))

	sum, slopes := e.judge.errors(y, e.truths(len(batch)), e.scaler.s)
	loss = sum / float64(len(batch))
	if loss-loss != 0 {
		return loss, lossNotFinite
	}
	before := e.tally.gradientEvents()
	e.backward(p, slopes)
	if e.observer.comparesGradients(e.now(p.step)) {
		cosines(e.twin, e, batch, e.observer.found)
	}
	if e.scaler.set.Kind == DynamicScale && (e.tally.gradientEvents() != before || e.gradientNotFinite()) {
		s := e.scaler.s
		e.scaler.skip()
		e.rescaleResidues(p, s)
		return loss, stepSkipped
	}
	e.mover.move(p, rate, e.scaler.s)
	for _, l := range e.settlers {
		l.settle(p)
	}
	e.adoptResidues()
	s := e.scaler.s
	e.scaler.taken()
	e.rescaleResidues(p, s)
	if e.masterNotFinite() {
		return loss, masterNotFinite
	}
	return loss, stepTaken
}

// now is the place of a step in the training.
func (e *engine[T]) now(step uint32) moment {
	m := e.moment
	m.step = step
	return m
}

// fetch gathers inputs and targets of a batch, the inputs as they are in this epoch.
func (e *engine[T]) fetch(batch []int32) []float32 {
	per := e.train.per
	for i, n := range batch {
		dst, given := e.gather[i*per:][:per], e.train.inputs[int(n)*per:][:per]
		if e.change == nil {
			copy(dst, given)
		} else {
			e.change.fill(dst, given, e.epoch, n)
		}
		if e.truth.values != nil {
			width := e.train.outputs
			copy(e.truth.values[i*width:][:width], e.train.targets[int(n)*width:])
		} else {
			e.truth.labels[i] = e.train.labels[n]
		}
	}
	return e.gather[:len(batch)*per]
}

// truths are the targets of the n examples fetched last.
func (e *engine[T]) truths(n int) truth {
	if e.truth.values != nil {
		return truth{values: e.truth.values[:n*e.train.outputs]}
	}
	return truth{labels: e.truth.labels[:n]}
}

// newTruth is memory for the targets of a batch of a set.
func newTruth(batch int, s *split) truth {
	if s.targets != nil {
		return truth{values: make([]float32, batch*s.outputs)}
	}
	return truth{labels: make([]int32, batch)}
}

// backward rounds the output error and walks down the network as far as there
// are parameters.
func (e *engine[T]) backward(p *pass, slopes []float64) {
	top := e.edges[len(e.edges)-1]
	round(place{layer: -1}, p, LossGradient, opLossGradient, top.gradients(p.samples), slopes, &e.arm.LossGradient, 0)
	for i := len(e.layers) - 1; i >= 0; i-- {
		below := e.net.propagates(i)
		if !below && len(e.net.Layers[i].Params) == 0 {
			return
		}
		e.layers[i].backward(p, below)
	}
}

func (e *engine[T]) gradientNotFinite() bool {
	for _, q := range e.params {
		if notFinite(q.gradient.data) {
			return true
		}
	}
	return false
}

func (e *engine[T]) masterNotFinite() bool {
	for _, q := range e.params {
		if notFinite(q.master.data) {
			return true
		}
	}
	return false
}

// evaluate computes mean loss, NaN for an empty set, and answers of a set with
// the parameters as they stand. Random bits are addressed by epoch and by the
// example's number in the set, so they depend on no batch; nothing is counted.
func (e *engine[T]) evaluate(ctx context.Context, set *split, phase uint32, epoch int, scores *Scores) (float64, error) {
	scores.reset()
	if set.size() == 0 {
		return math.NaN(), nil
	}
	p := pass{seed: e.pass.seed, step: uint32(epoch), phase: phase}
	var sum float64
	for first := 0; first < set.size(); first += e.capacity() {
		if err := ctx.Err(); err != nil {
			return 0, fmt.Errorf("stopped evaluating %s data after epoch %d: %w", set.name, epoch, err)
		}
		p.samples = min(e.capacity(), set.size()-first)
		p.first = uint64(first)
		y := e.forward(&p, set.rows(first, p.samples))
		targets := set.truths(first, p.samples)
		sum = e.judge.losses(sum, y, targets)
		score(scores, y, targets)
	}
	return sum / float64(set.size()), nil
}

// capacity is the number of examples the edges hold.
func (e *engine[T]) capacity() int { return len(e.edges[0].value.data) / e.edges[0].per }
