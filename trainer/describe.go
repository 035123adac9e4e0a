package trainer

// Sizes are numbers of examples.
type Sizes struct{ Train, Validation, Test int }

// LayerDescription is a layer where it stands, for a plan's reader.
type LayerDescription struct {
	Name       string
	In, Out    []int // shape of one example
	Params     []ParamSpec
	Parameters int
	// Lengths of sums in terms, padding included, over a full batch; 0 where no
	// such sum is formed.
	Sums   Lengths
	Points []PointID
	// StepMACs are the multiply-adds of one training step on a full batch.
	StepMACs uint64
}

// Description is what a training amounts to before it is run.
type Description struct {
	Layers     []LayerDescription
	Parameters int
	LongestSum int
	Steps      int    // training steps
	StepMACs   uint64 // multiply-adds of one step on a full batch, backward included
	TotalMACs  uint64 // of the whole training, evaluations included
	Double     bool   // tensors take eight bytes an element in memory
	Wide       bool   // parameters are recorded in eight bytes an element
}

// Describe computes shapes, lengths of sums and work of a training. The arm may
// be nil where only its network is of interest.
func Describe(n Network, arm *Arm, t Training, sizes Sizes) Description {
	batch := max(1, min(t.Batch, sizes.Train))
	var d Description
	var forward, training uint64 // of one example
	for i := range n.Layers {
		l := n.describeLayer(i, batch)
		d.Layers = append(d.Layers, l)
		d.Parameters += l.Parameters
		d.LongestSum = max(d.LongestSum, l.Sums.longest())
		d.StepMACs += l.StepMACs
		forward += n.Layers[i].MACs.Forward
		training += n.work(i)
	}
	d.Steps = stepCount(t.Epochs, sizes.Train, batch)
	evaluated := t.EvaluateValidation.times(t.Epochs)*sizes.Validation + t.EvaluateTest.times(t.Epochs)*sizes.Test
	d.TotalMACs = training*uint64(t.Epochs)*uint64(sizes.Train) + forward*uint64(evaluated)
	if arm != nil {
		d.Double, d.Wide = n.containers(arm)
	}
	return d
}

// describeLayer is layer i with its sums over a batch.
func (n *Network) describeLayer(i, batch int) LayerDescription {
	s := &n.Layers[i]
	l := LayerDescription{
		Name: s.Name, In: s.In, Out: s.Out, Params: s.Params, Sums: s.Sums,
		Points: n.PointsOf(i), StepMACs: n.work(i) * uint64(batch),
	}
	l.Sums.WeightGradient *= batch
	l.Sums.BiasGradient *= batch
	if !n.propagates(i) {
		l.Sums.InputGradient = s.Inner.Back
	}
	for _, p := range s.Params {
		if !p.Statistic {
			l.Parameters += volume(p.Shape)
		}
	}
	return l
}

// work is the multiply-adds of layer i for one example of a training step.
func (n *Network) work(i int) uint64 {
	m := n.Layers[i].MACs
	total := m.Forward + m.WeightGradient
	if n.propagates(i) {
		return total + m.InputGradient
	}
	return total + n.Layers[i].Inner.BackMACs
}

// stepCount is the number of steps of a training; a short last batch is a step.
func stepCount(epochs, examples, batch int) int { return epochs * ((examples + batch - 1) / batch) }

// longest is the longest sum of a layer.
func (l Lengths) longest() int {
	return max(l.Forward, l.InputGradient, l.WeightGradient, l.BiasGradient)
}

// times is how often a split is evaluated in a training.
func (w When) times(epochs int) int {
	switch w {
	case EveryEpoch:
		return epochs
	case Never:
		return 0
	}
	return min(1, epochs)
}
