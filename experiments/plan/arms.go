package plan

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/quant"
	"ulpine/trainer"
)

// armReader is what the arms of one plan are read with.
type armReader struct {
	*reader
	formats  formats
	network  *trainer.Network
	training trainer.Training
	examples int // of the training set, which no batch may exceed
}

// readArms returns the baseline and, behind it, the plan's arms: those it spells
// out, then those of its grids.
func (r *armReader) readArms(root *node) ([]Arm, []*grid) {
	base := binary32Everywhere(len(r.network.Layers))
	var scale trainer.LossScale
	if n := r.table(root, "baseline", `[baseline] with everything = "fp32"`); n != nil {
		r.readSettings(n, selection{}, &base, r.formats, []string{"layer", "loss_scale"})
		r.readLayers(n, &base)
		if at := n.table["loss_scale"]; at != nil {
			scale = r.readLossScale(at)
		}
	}
	baseline := Arm{Name: BaselineSlug, Slug: BaselineSlug, Baseline: true, Training: r.training}
	arms := []Arm{r.finish(baseline, &base, scale)}
	if root.table["arm"] == nil && root.table["grid"] == nil {
		e := root.lacks("arm", `write [[arm]] with name = "bf16" and storage = "bf16"`, "the plan has no arms")
		e.Key = e.absent
		r.fail(e)
	}
	seen := map[string]*node{}
	spelled := r.tables(root, "arm")
	if len(spelled) > maxArms {
		r.fail(root.table["arm"].errorf("make several plans of it", "%d arms, more than the %d a plan may have", len(spelled), maxArms))
		spelled = spelled[:maxArms]
	}
	for _, n := range spelled {
		arms = append(arms, r.readArm(n, &base, scale, seen))
	}
	grids := r.readGrids(root, len(spelled))
	for _, g := range grids {
		arms = append(arms, r.readGridArms(g, &base, scale, seen)...)
	}
	return arms, grids
}

// readArm reads one arm; base and scale are the baseline's, seen the names taken.
func (r *armReader) readArm(n *node, base *assignment, scale trainer.LossScale, seen map[string]*node) Arm {
	arm := Arm{Training: r.training}
	arm.Name, arm.Slug = r.armName(n, seen)
	own := base.inherit()
	r.readSettings(n, selection{}, &own, r.formats, armKeys)
	r.readLayers(n, &own)
	r.readOverrides(n, &arm)
	if at := n.table["loss_scale"]; at != nil {
		scale = r.readLossScale(at)
	}
	stages := r.readStages(n, &arm, &own, scale)
	return r.finish(arm, &own, scale, stages...)
}

// armName reads the name of an arm, which must differ from all others as a slug.
func (r *armReader) armName(n *node, seen map[string]*node) (name, slug string) {
	at := n.table["name"]
	name = strings.TrimSpace(r.text(n, "name", ""))
	slug = Slug(name)
	twin := seen[slug]
	switch {
	case at == nil:
		r.fail(n.lacks("name", `write name = "bf16 nearest"`, "name is missing"))
		return name, slug
	case at.value == nil:
	case slug == "":
		r.fail(at.errorf("use letters a to z and digits", "the name %q has no letter or digit to call runs by", name))
	case slug == BaselineSlug || slug == PretrainSlug || slices.Contains(controlSlugs, slug):
		r.fail(at.errorf("choose another name", "%q is the name of the plan's own %s", name, slug))
	case twin != nil && twin.value == at.value:
		r.fail(at.errorf("give each arm a name of its own", "the name %q is taken by the arm in %s line %d", name, twin.file, twin.line))
	case twin != nil:
		r.fail(at.errorf("give each arm a name of its own", "the name %q and %q in %s line %d are both %q as names of runs", name, twin.value, twin.file, twin.line, slug))
	}
	seen[slug] = at
	return name, slug
}

// readOverrides reads how an arm trains otherwise than the plan says.
func (r *armReader) readOverrides(n *node, arm *Arm) {
	t := r.training
	if sub := r.table(n, "training", "training.learning_rate = 0.01"); sub != nil {
		t = r.readTraining(sub, t, true, trainingOverrideKeys)
		r.checkBatch(sub, &t, r.examples)
	}
	if at := n.table["learning_rate"]; at != nil {
		t.LearningRate = r.readSchedule(at)
		if twin := n.table["training"]; twin != nil && twin.table["learning_rate"] != nil {
			other := twin.table["learning_rate"]
			r.fail(at.errorf("keep one of them", "the learning rate is set in %s line %d too", other.file, other.line))
		}
		r.checkBatch(n, &t, r.examples)
	}
	arm.Training = t
	for _, c := range []struct {
		what     string
		old, new any
	}{
		{"learning rate", r.training.LearningRate, t.LearningRate},
		{"optimizer", r.training.Optimizer, t.Optimizer},
		{"batch", r.training.Batch, t.Batch},
		{"epochs", r.training.Epochs, t.Epochs},
	} {
		if fmt.Sprint(c.old) != fmt.Sprint(c.new) {
			arm.Overrides = append(arm.Overrides, c.what)
		}
	}
}

// checkBatch refuses a batch in the training table n that is larger than the
// training set, and a warm-up that outlasts the training.
func (r *reader) checkBatch(n *node, t *trainer.Training, examples int) {
	batch := t.Batch
	if rate := n.table["learning_rate"]; rate != nil && rate.table["warm_up"] != nil && examples > 0 {
		if steps := trainer.Describe(trainer.Network{}, nil, *t, trainer.Sizes{Train: examples}).Steps; t.LearningRate.WarmUp >= steps {
			r.fail(rate.table["warm_up"].errorf("rise over fewer steps", "the training has %d steps, no more than the warm-up", steps))
		}
	}
	if at := n.table["batch"]; at != nil && examples > 0 && batch > examples {
		r.fail(at.errorf(fmt.Sprintf("write at most %d", examples), "a batch of %d is larger than the %d training examples", batch, examples))
	}
}

// finish resolves an arm whose settings and stages are read.
func (r *armReader) finish(arm Arm, a *assignment, scale trainer.LossScale, stages ...trainer.Stage) Arm {
	states, _ := arm.Training.Optimizer.States()
	r.checkStates(a, states)
	arm.Arithmetic = a.arm(r.network, states)
	arm.Arithmetic.LossScale, arm.Arithmetic.Stages = scale, stages
	arm.LossScale = describeLossScale(scale)
	arm.Settings = settings(r.network, &arm.Arithmetic)
	arm.Summary = summary(a, &arm)
	arm.Canonical = arm.canonical(r.network)
	arm.assignment = a
	return arm
}

// checkStates holds lists of formats of states to the optimizer's number of them,
// each list once.
func (r *armReader) checkStates(a *assignment, states int) {
	told := map[*node]bool{}
	for i := range a.layers {
		s := &a.layers[i][trainer.UpdateState]
		if n := len(s.value.states); s.at != nil && n > 0 && n != states && !told[s.at] {
			told[s.at] = true
			r.fail(s.at.errorf(fmt.Sprintf("write %d, or one for all", states), "%d formats for the %d state tensors of the optimizer", n, states))
		}
	}
}

// summary is an arm in one line.
func summary(a *assignment, arm *Arm) string {
	parts := slices.Clone(a.spelled)
	if len(parts) == 0 {
		parts = []string{"as the baseline"}
		if arm.Baseline {
			parts = []string{"everything fp32"}
		}
	}
	if arm.Arithmetic.LossScale.Kind != trainer.NoScale {
		parts = append(parts, "loss scale "+arm.LossScale)
	}
	for _, o := range arm.Overrides {
		parts = append(parts, "its own "+o)
	}
	for _, s := range arm.Stages {
		parts = append(parts, "from "+s.Start+": "+s.Summary)
	}
	return joined(parts)
}

// joined lists settings.
func joined(parts []string) string { return strings.Join(parts, ", ") }

// settings lists the rounding points an arm computes with, input and loss as
// layer -1, in the order of computation within each layer.
func settings(network *trainer.Network, arm *trainer.Arm) []Setting {
	rows := append(inputRows(arm), pointRow(-1, "loss", trainer.LossGradient, arm.LossGradient))
	for i := range network.Layers {
		for _, id := range network.PointsOf(i) {
			rows = append(rows, layerRows(network, arm, i, id)...)
		}
	}
	return rows
}

// layerRows are the rows of one point of layer i: none for an outer sum that is
// done as the sum is, one a state tensor at update.state.
func layerRows(network *trainer.Network, arm *trainer.Arm, i int, id trainer.PointID) []Setting {
	name, a := network.Layers[i].Name, &arm.Layers[i]
	points := a.At(id)
	switch {
	case follows(id) && !isOptional(id):
		return []Setting{followerRow(i, name, id, a)}
	case len(points) > 0:
	case isProduct(id):
		return []Setting{{Layer: i, Name: name, Point: id.String(), Format: exactWord, Rounding: exactWord}}
	case isOptional(id):
		return nil // nothing is rounded: the product takes what is stored, a residue is lost
	case isOperand(id):
		from := reused(network, arm, i, id)
		row := pointRow(i, name, id, from)
		if !SharesScales(from.Format) { // those are taken anew along their own axis
			row.Rounding = reusedWord
		}
		return []Setting{row}
	}
	rows := make([]Setting, len(points))
	for k, p := range points {
		rows[k] = pointRow(i, name, id, *p)
		if acc := sumOf(id, a); acc != nil {
			rows[k].Order = acc.Order.String()
			if acc.Through32 {
				rows[k].Order += " through binary32"
			}
		}
	}
	return rows
}

// followerRow is the row of a point that may follow another: what is computed.
func followerRow(i int, name string, id trainer.PointID, a *trainer.Arithmetic) Setting {
	if id == trainer.ForwardMoment {
		p := a.Activation
		if a.Moment != nil {
			p = *a.Moment
		}
		return pointRow(i, name, id, p)
	}
	acc := statisticOf(id, a)
	if acc == nil {
		acc = &a.Forward
		if id == trainer.InputGradientStatistic {
			acc = &a.InputGradient.Sums
		}
	}
	row := pointRow(i, name, id, acc.Sum)
	row.Order = acc.Order.String()
	if acc.Outer != nil {
		row.Order += ", outer " + shortName(acc.Outer.Format)
	}
	if acc.Through32 {
		row.Order += " through binary32"
	}
	return row
}

// statisticOf is the accumulation of a statistic's own, or nil.
func statisticOf(id trainer.PointID, a *trainer.Arithmetic) *quant.Accumulate {
	switch id {
	case trainer.ForwardStatistic:
		return a.Statistic
	case trainer.InputGradientStatistic:
		return a.InputGradient.Statistic
	}
	return nil
}

// reusedWord stands where an operand takes the stored tensor as it is.
const reusedWord = "reused"

// reused is the point at which the tensor that an unset operand takes was stored.
func reused(network *trainer.Network, arm *trainer.Arm, i int, id trainer.PointID) quant.Point {
	switch id {
	case trainer.InputGradientWeight:
		return arm.Layers[i].Weight
	case trainer.WeightGradientActivation:
		if p := arm.Layers[i].Operand; p != nil {
			return *p
		}
		return activationsBelow(network, arm, i)[0]
	}
	return gradientsAbove(network, arm, i)[0]
}

// sumOf is the accumulation whose sum point is id, or nil.
func sumOf(id trainer.PointID, a *trainer.Arithmetic) *quant.Accumulate {
	switch id {
	case trainer.ForwardSum:
		return &a.Forward
	case trainer.InputGradientSum:
		return &a.InputGradient.Sums
	case trainer.WeightGradientSum:
		return &a.WeightGradient.Sums
	}
	return nil
}

// pointRow is a point as a row.
func pointRow(layer int, name string, id trainer.PointID, p quant.Point) Setting {
	l := p.Format.Limits()
	policy := p.Overflow
	if policy == quant.FormatDefault {
		policy = l.DefaultOverflow
	}
	return Setting{
		Layer: layer, Name: name, Point: id.String(), Format: p.Format.String(),
		Exponent: l.Exponent, Fraction: l.Fraction, Bits: l.Bits,
		Rounding: describeRounding(p.Rounding), Overflow: policy.String(),
	}
}
