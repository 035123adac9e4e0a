package trainer

import "fmt"

// check finds everything that would make a job fail, or mean something else than
// its author thinks, before a step is taken.
func (j *Job) check() (parts, error) {
	var p parts
	if len(j.Network.Layers) == 0 || j.Network.Parameters() == 0 {
		return p, fmt.Errorf("the network has nothing to train; give it a dense or convolution layer")
	}
	p.classes = j.Network.Outputs()
	if err := j.checkTraining(&p); err != nil {
		return p, err
	}
	if err := j.Network.checkArm(&j.Arm, j.Training.Optimizer.stateCount(p.rule)); err != nil {
		return p, err
	}
	p.double, p.wide = j.Network.containers(&j.Arm)
	return p, j.openSets(&p)
}

// openSets checks the three sets.
func (j *Job) openSets(p *parts) (err error) {
	if p.train, err = j.Network.open("training", j.Train, p.classes, p.loss.regression()); err != nil {
		return err
	}
	if p.train.size() == 0 {
		return fmt.Errorf("training data: no examples")
	}
	if p.validation, err = j.Network.open("validation", j.Validation, p.classes, p.loss.regression()); err != nil {
		return err
	}
	if p.test, err = j.Network.open("test", j.Test, p.classes, p.loss.regression()); err != nil {
		return err
	}
	p.largest = max(p.train.size(), p.validation.size(), p.test.size())
	total := stepCount(j.Training.Epochs, p.train.size(), min(j.Training.Batch, p.train.size()))
	if err = j.Training.LearningRate.checkLength(total); err != nil {
		return err
	}
	if err = j.checkStages(p); err != nil {
		return err
	}
	if err = j.Network.checkBatchNorms(j.Training.Batch, p.train.size()); err != nil {
		return err
	}
	return j.checkExtents(p)
}

// Terms of a sum and columns of a product are numbered in the counters of random
// words; these are the ends of the numbers.
const (
	termLimit   = 1 << 25
	columnLimit = 1 << 32
)

// checkExtents refuses sums and data sets that run out of numbers.
func (j *Job) checkExtents(p *parts) error {
	batch, largest := min(j.Training.Batch, p.train.size()), p.largest
	for i := range j.Network.Layers {
		l := j.Network.describeLayer(i, batch)
		if l.Sums.longest() >= termLimit {
			return fmt.Errorf("%s: a sum of %d terms; fewer than %d can be numbered: use a smaller batch", j.Network.where(i), l.Sums.longest(), termLimit)
		}
		widest := max(volume(l.In), volume(l.Out))
		if heads := j.Network.Layers[i].heads; heads > 0 { // positions of each head are columns
			widest = max(widest, heads*l.In[1])
		}
		if largest > columnLimit/widest {
			return fmt.Errorf("%s: %d examples of %d values; fewer than %d values can be numbered: use fewer examples", j.Network.where(i), largest, widest, columnLimit)
		}
	}
	return nil
}

// checkTraining checks what all arms share.
func (j *Job) checkTraining(p *parts) (err error) {
	t := &j.Training
	if p.rule, err = findRule(t.Optimizer); err != nil {
		return err
	}
	if p.loss, err = findLoss(t); err != nil {
		return err
	}
	if t.Batch < 1 || t.Epochs < 1 {
		return fmt.Errorf("batch %d, epochs %d: both must be at least 1", t.Batch, t.Epochs)
	}
	for what, when := range map[string]When{"test": t.EvaluateTest, "validation": t.EvaluateValidation} {
		if when != "" && when != EveryEpoch && when != LastEpoch && when != Never {
			return fmt.Errorf("evaluation of %s data at %q; known: %q, %q, %q", what, when, EveryEpoch, LastEpoch, Never)
		}
	}
	if err := j.Diagnostics.check(); err != nil {
		return err
	}
	if err := t.Augment.Check(j.Network.Input); err != nil {
		return err
	}
	return t.LearningRate.check()
}
