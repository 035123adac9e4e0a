package trainer

import (
	"fmt"

	"ulpine/quant"
)

// batchNormKind brings every channel of a mini-batch to mean 0 and variance 1
// (S. Ioffe, C. Szegedy: Batch normalization, ICML 2015), then applies a weight and a
// bias of each channel: see standard. Rows are channels, elements ascend by sample,
// then position; in an input of one dimension every value is a channel.
//
// Evaluations use running statistics instead, stored beside the parameters as
// "running": the means, then the variances, at first 0 and 1. After every step that
// is taken, r being the running value and s the batch's mean, or
// R[moment](sum of d^2/(m-1)), each of the three lines rounded at forward.moment:
//
//	d = R(s - r)     e = R(momentum d)     r = R(r + e)
var batchNormKind = kind{
	name: batchNormName, usage: "batchnorm epsilon=1e-5 momentum=0.1", parse: parseBatchNorm,
	build32: newBatchNorm[float32], build64: newBatchNorm[float64],
}

const batchNormName = "batchnorm"

// runningMomentum is the share of a new batch where a plan does not say: common
// practice.
const runningMomentum = 0.1

func parseBatchNorm(o *options, s *Spec) error {
	if err := parseEpsilon(o, s); err != nil {
		return err
	}
	var err error
	if s.momentum, err = o.decimal("momentum", runningMomentum); err != nil {
		return err
	}
	if !(s.momentum > 0 && s.momentum <= 1) {
		return fmt.Errorf("momentum is %g; the share of the newest batch lies above 0 and is at most 1", s.momentum)
	}
	c, positions := s.In[0], volume(s.In[1:])
	s.Name = fmt.Sprintf("batchnorm epsilon=%s momentum=%s", decimalText(s.number), decimalText(s.momentum))
	s.Out = s.In
	s.Params = append(normParams(c), ParamSpec{Name: "running", Shape: []int{2, c}, Statistic: true})
	s.Points = normPoints()
	s.Sums = Lengths{Forward: 1, InputGradient: 1, WeightGradient: positions, BiasGradient: positions}
	values := uint64(volume(s.In))
	s.MACs = Work{Forward: 3 * values, InputGradient: 3 * values, WeightGradient: values}
	return nil
}

// checkBatchNorms refuses batches with a single value a channel, whose variance
// says nothing; the last batch of an epoch may be short.
func (n *Network) checkBatchNorms(batch, examples int) error {
	least := min(batch, examples)
	if rest := examples % least; rest > 0 {
		least = rest
	}
	for i := range n.Layers {
		s := &n.Layers[i]
		if s.Kind == batchNormName && least*volume(s.In[1:]) < 2 {
			return fmt.Errorf("%s: a batch of one example, of %d with batch %d, has one value a channel and no variance; choose a batch that leaves none of one", n.where(i), examples, batch)
		}
	}
	return nil
}

type batchNorm[T quant.Element] struct {
	*standard[T]
	affine   *linear[T]
	running  *param[T]
	channels int
	momentum float64
	count    int // elements a channel of the last training batch
}

func newBatchNorm[T quant.Element](b *bench[T]) (layer[T], error) {
	c, positions := b.spec.In[0], volume(b.spec.In[1:])
	core, err := newStandard(b, c, b.batch*positions)
	if err != nil {
		return nil, err
	}
	core.rowsOf = func(samples int) (int, int) { return c, samples * positions }
	core.gather = func(dst, src []T, samples int) { groupByUnit(dst, src, samples, c, positions) }
	core.spread = func(dst, rows []T, samples int) {
		for s := range samples {
			for r, v := range rows[:c] {
				row := dst[(s*c+r)*positions:][:positions]
				for i := range row {
					row[i] = v
				}
			}
		}
	}
	affine, err := newAffine(b, core.hat, c, positions)
	if err != nil {
		return nil, err
	}
	return &batchNorm[T]{standard: core, affine: affine, running: newParam(b, 2), channels: c, momentum: b.spec.momentum}, nil
}

func (l *batchNorm[T]) forward(p *pass) {
	if p.phase == phaseTraining {
		_, l.count = l.measure(p, 0)
		l.normalise(p, l.variance, 0)
	} else {
		l.deviate(p, l.running.master.data[:l.channels])
		l.normalise(p, l.running.master.data[l.channels:], 0)
	}
	l.affine.forward(p)
}

func (l *batchNorm[T]) backward(p *pass, below bool) {
	l.affine.backward(p, below)
	if below {
		l.standard.backward(p)
	}
}

// settle moves the running statistics.
func (l *batchNorm[T]) settle(p *pass) {
	less := [1]T{T(l.count - 1)}
	combined(l.place, p, ForwardMoment, opUnbiased, l.sums, l.squares, less[:], quotient, l.set.moment(), 0)
	l.follow(p, l.running.master.data[:l.channels], l.means, opFollowMean)
	l.follow(p, l.running.master.data[l.channels:], l.sums, opFollowVariance)
}

// follow moves running values towards a batch's; o is the first of three operations.
func (l *batchNorm[T]) follow(p *pass, running, batch []T, o operation) {
	part, share := l.scratch[:len(running)], [1]T{T(l.momentum)}
	combined(l.place, p, ForwardMoment, o, part, batch, running, difference, l.set.moment(), 0)
	combined(l.place, p, ForwardMoment, o+1, part, part, share[:], product, l.set.moment(), 0)
	combined(l.place, p, ForwardMoment, o+2, running, running, part, sum, l.set.moment(), 0)
}

func (l *batchNorm[T]) params() []*param[T] { return append(l.affine.params(), l.running) }
