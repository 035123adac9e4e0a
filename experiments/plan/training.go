package plan

import (
	"fmt"
	"math"
	"slices"

	"ulpine/trainer"
)

// trainingKeys are the keys of [training]; an arm may override all but how data
// is ordered and when it is evaluated, which would break the pairing.
var (
	trainingKeys         = []string{"optimizer", "learning_rate", "batch", "epochs", "loss", "shuffle", "augment", "evaluate"}
	trainingOverrideKeys = []string{"optimizer", "learning_rate", "batch", "epochs"}
)

// maxCount bounds epochs and examples so that their products fit an int.
const maxCount = math.MaxInt32

// Predictions say whether the runs of a plan keep what they say of every test
// example. Keeping changes no bit, so it is in no key of a run.
type Predictions string

// The ways of keeping.
const (
	KeptPredictions Predictions = "stored"
	NoPredictions   Predictions = "none"
)

// readPredictions reads training.predictions of the plan.
func (r *reader) readPredictions(root *node) Predictions {
	n := root.table["training"]
	if n == nil || n.table == nil {
		return KeptPredictions
	}
	return Predictions(r.word(n, "predictions", string(KeptPredictions), string(KeptPredictions), string(NoPredictions)))
}

// predictionsText says what a plan keeps of every test example, and how much room
// that takes at most, before it is compressed.
func (p *Plan) predictionsText() string {
	if p.Predictions == NoPredictions || p.Training.EvaluateTest == trainer.Never || p.Task.Test == 0 {
		return string(NoPredictions)
	}
	example, what := 2, "the class and the class called" // bytes; stores take 2 or 4 beyond 254 classes
	switch classes := len(p.Task.ClassNames); {
	case len(p.Task.TargetNames) > 0:
		example, what = 8*len(p.Task.TargetNames), "outputs and targets in binary32"
	case classes > math.MaxUint16-1:
		example *= 4
	case classes > math.MaxUint8-1:
		example *= 2
	}
	each := float64(example * p.Task.Test)
	work := p.Work()
	runs := float64(work.Runs - work.Pretraining - work.Tuning)
	return fmt.Sprintf("%s: %s of every test example, %s a run and %s in all before compression",
		p.Predictions, what, bytesText(each), bytesText(each*runs))
}

// bytesText is a number of bytes with its unit.
func bytesText(n float64) string {
	if n < 1000 {
		return fmt.Sprintf("%.0f B", n)
	}
	return magnitude(n) + "B"
}

// readTraining reads the training table n over base. Keys that base cannot
// supply are required unless complete is set.
func (r *reader) readTraining(n *node, base trainer.Training, complete bool, keys []string) trainer.Training {
	t := base
	r.known(n, keys...)
	if !complete {
		for _, k := range []string{"learning_rate", "batch", "epochs"} {
			if n.table[k] == nil {
				r.fail(n.lacks(k, map[string]string{
					"learning_rate": "write learning_rate = 0.02", "batch": "write batch = 32", "epochs": "write epochs = 15",
				}[k], k+" is missing"))
			}
		}
	}
	if at := n.table["loss"]; at != nil {
		r.readLoss(at, &t)
	}
	t.Batch = int(r.whole(n, "batch", int64(base.Batch), 1, maxCount))
	t.Epochs = int(r.whole(n, "epochs", int64(base.Epochs), 1, maxCount))
	t.Shuffle = r.flag(n, "shuffle", base.Shuffle)
	if at := n.table["augment"]; at != nil {
		t.Augment = r.readAugment(at)
	}
	if at := n.table["optimizer"]; at != nil {
		t.Optimizer = r.readOptimizer(at)
	}
	if at := n.table["learning_rate"]; at != nil {
		t.LearningRate = r.readSchedule(at)
	}
	if at := n.table["evaluate"]; at != nil {
		r.readEvaluate(at, &t)
	}
	return t
}

// readLoss reads a loss: a word, or a table with its kind.
func (r *reader) readLoss(n *node, t *trainer.Training) {
	t.LabelSmoothing, t.HuberWidth = 0, 0
	if n.table == nil {
		word, isWord := n.value.(string)
		if t.Loss = word; !isWord {
			r.wrongType(n, "a word or a table", `loss = { kind = "cross-entropy", label_smoothing = 0.1 }`)
		} else if !slices.Contains(trainer.LossNames(), word) {
			r.fail(n.errorf(suggest(word, trainer.LossNames()), "unknown word %q", word))
		}
	} else {
		if n.table["kind"] == nil {
			r.fail(n.errorf(`write kind = "cross-entropy"`, "kind is missing"))
		}
		keys := []string{"kind"}
		switch t.Loss = r.word(n, "kind", t.Loss, trainer.LossNames()...); t.Loss {
		case "cross-entropy":
			keys = append(keys, "label_smoothing")
		case "huber":
			keys = append(keys, "width")
		}
		r.known(n, keys...)
		t.LabelSmoothing = r.number(n, "label_smoothing", 0)
		t.HuberWidth = r.number(n, "width", 0)
		if !(float32(t.LabelSmoothing) >= 0 && float32(t.LabelSmoothing) < 1) {
			r.fail(n.table["label_smoothing"].errorf("write a number from 0 to below 1, as 0.1", "a smoothing of %g is out of range", t.LabelSmoothing))
		}
		if at := n.table["width"]; at != nil && !positive32(t.HuberWidth) {
			r.fail(at.errorf("write a positive width, as 1", "a width of %g is not a positive binary32 number", t.HuberWidth))
		}
	}
	if t.Loss == "huber" && t.HuberWidth == 0 {
		t.HuberWidth = huberWidth
	}
}

// huberWidth is the trainer's default written out.
const huberWidth = 1

// describeLoss is a loss in words.
func describeLoss(t trainer.Training) string {
	switch {
	case t.LabelSmoothing != 0:
		return fmt.Sprintf("%s with labels smoothed by %g", t.Loss, float32(t.LabelSmoothing))
	case t.HuberWidth != 0:
		return fmt.Sprintf("%s of width %g", t.Loss, float32(t.HuberWidth))
	}
	return t.Loss
}

// checkTargets holds the loss to what the data has.
func (r *reader) checkTargets(n *node, t *trainer.Training, task *Task) {
	at := n.table["loss"]
	if at == nil {
		at = n
	}
	switch {
	case task.Source == nil, t.Regression() == (len(task.TargetNames) > 0):
		return
	case !t.Regression():
		r.fail(at.errorf(`write loss = "mean-squared-error"`, "%s takes classes, but the data of %s has targets of values", t.Loss, task.Data))
		return
	}
	r.fail(at.errorf(`write loss = "cross-entropy"`, "%s takes targets of values, but the data of %s has classes", t.Loss, task.Data))
}

// positive32 reports whether the binary32 number nearest to x is positive and finite.
func positive32(x float64) bool {
	y := float64(float32(x))
	return y > 0 && !math.IsInf(y, 0)
}

// whenWords are the times of evaluation.
var whenWords = []string{string(trainer.EveryEpoch), string(trainer.LastEpoch), string(trainer.Never)}

// readEvaluate reads when the test and validation sets are evaluated: one word
// for both, or a table with a word for each.
func (r *reader) readEvaluate(n *node, t *trainer.Training) {
	if n.table != nil {
		r.known(n, "test", "validation")
		t.EvaluateTest = trainer.When(r.word(n, "test", string(t.EvaluateTest), whenWords...))
		t.EvaluateValidation = trainer.When(r.word(n, "validation", string(t.EvaluateValidation), whenWords...))
		return
	}
	word, ok := n.value.(string)
	switch {
	case !ok:
		r.wrongType(n, "a text or a table", `evaluate = { test = "last epoch", validation = "every epoch" }`)
	case !slices.Contains(whenWords, word):
		r.fail(n.errorf(suggest(word, whenWords), "unknown word %q", word))
	default:
		t.EvaluateTest, t.EvaluateValidation = trainer.When(word), trainer.When(word)
	}
}

// readLossScale reads a loss scale: a word or a table.
func (r *reader) readLossScale(n *node) (l trainer.LossScale) {
	kinds := []string{"none", "fixed", "dynamic"}
	word, isWord := n.value.(string)
	keys := []string{"kind"}
	switch {
	case isWord && word == "fixed":
		r.fail(n.errorf(`write { kind = "fixed", value = 1024 }`, "a fixed loss scale needs its value"))
	case isWord && !slices.Contains(kinds, word):
		r.fail(n.errorf(suggest(word, kinds), "unknown word %q", word))
	case !isWord && n.table == nil:
		r.wrongType(n, "a word or a table", `loss_scale = { kind = "fixed", value = 1024 }`)
	case n.table != nil:
		if n.table["kind"] == nil {
			r.fail(n.errorf(`write kind = "fixed"`, "kind is missing"))
		}
		word = r.word(n, "kind", "", kinds...)
	}
	switch word {
	case "fixed":
		l.Kind, keys = trainer.FixedScale, append(keys, "value")
		if n.table != nil && n.table["value"] == nil {
			r.fail(n.errorf("write value = 1024", "a fixed loss scale needs its value"))
		}
	case "dynamic":
		l.Kind, keys = trainer.DynamicScale, append(keys, "value", "raise_after", "raise_by", "cut_by")
	}
	if n.table != nil && word != "" {
		r.known(n, keys...)
	}
	r.readScaleNumbers(n, &l)
	return l
}

// readScaleNumbers reads the figures of a loss scale. Defaults are written out,
// so that a resolved plan shows them.
func (r *reader) readScaleNumbers(n *node, l *trainer.LossScale) {
	if l.Kind == trainer.NoScale {
		return
	}
	check := func(key string, fallback float64, ok func(x float64) bool, remedy string) float64 {
		x := r.number(n, key, fallback)
		if !ok(x) {
			r.fail(n.table[key].errorf(remedy, "%g is out of range", x))
			return fallback
		}
		return x
	}
	l.Value = check("value", dynamicStart, positive32, "write a positive number, as 1024")
	if l.Kind != trainer.DynamicScale {
		return
	}
	l.RaiseAfter = int(r.whole(n, "raise_after", dynamicRaiseAfter, 1, maxCount))
	l.RaiseBy = check("raise_by", dynamicRaiseBy, func(x float64) bool { return positive32(x) && x >= 1 }, "write at least 1, as 2")
	l.CutBy = check("cut_by", dynamicCutBy, func(x float64) bool { return positive32(x) && float32(x) < 1 }, "write a number between 0 and 1, as 0.5")
}

// The defaults of dynamic loss scaling, those of the trainer written out: a
// resolved plan leaves nothing to a default. Common practice; the start keeps
// binary16's largest finite value, 65504, just out of reach.
const (
	dynamicStart      = 1 << 15
	dynamicRaiseAfter = 1000
	dynamicRaiseBy    = 2
	dynamicCutBy      = 0.5
)

// describeLossScale is a loss scale in words.
func describeLossScale(l trainer.LossScale) string {
	switch l.Kind {
	case trainer.FixedScale:
		return fmt.Sprintf("fixed %g", float32(l.Value))
	case trainer.DynamicScale:
		return fmt.Sprintf("dynamic from %g, x%g after %d clean steps, x%g on a skip",
			float32(l.Value), float32(l.RaiseBy), l.RaiseAfter, float32(l.CutBy))
	}
	return "none"
}

// describeTraining is a training in one line, every figure that shapes a run
// included.
func describeTraining(t trainer.Training) string {
	order := "shuffled"
	if !t.Shuffle {
		order = "in the data's order"
	}
	if t.Augment.Any() {
		order += ", augmented by " + DescribeAugment(t.Augment)
	}
	return fmt.Sprintf("%s, %s, learning rate %s, batch %d, epochs %d, %s, test data %s, validation data %s",
		describeLoss(t), DescribeOptimizer(t.Optimizer), DescribeRate(t.LearningRate), t.Batch, t.Epochs, order, t.EvaluateTest, t.EvaluateValidation)
}
