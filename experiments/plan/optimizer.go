package plan

import (
	"fmt"
	"slices"
	"strings"

	"ulpine/trainer"
)

// optimizerKeys are the keys of an optimizer's table.
var optimizerKeys = []string{
	"kind", "momentum", "beta1", "beta2", "epsilon", "epsilon_inside", "weight_decay", "decoupled", "clip_norm", "compensated",
}

// The defaults of Adam, those of the trainer written out (D. P. Kingma, J. Ba:
// Adam, a method for stochastic optimization, ICLR 2015): a resolved plan leaves
// nothing to a default.
const (
	adamBeta1   = 0.9
	adamBeta2   = 0.999
	adamEpsilon = 1e-8
)

// readOptimizer reads an optimizer: a word or a table with its kind.
func (r *reader) readOptimizer(n *node) (o trainer.Optimizer) {
	before := len(r.errs)
	switch word, isWord := n.value.(string); {
	case n.table != nil:
		r.known(n, optimizerKeys...)
		o = trainer.Optimizer{
			Kind: r.text(n, "kind", "sgd"), Momentum: r.number(n, "momentum", 0),
			Beta1: r.number(n, "beta1", 0), Beta2: r.number(n, "beta2", 0), Epsilon: r.number(n, "epsilon", 0),
			EpsilonInside: r.flag(n, "epsilon_inside", false),
			WeightDecay:   r.number(n, "weight_decay", 0), Decoupled: r.flag(n, "decoupled", false),
			ClipNorm: r.number(n, "clip_norm", 0), Compensated: r.flag(n, "compensated", false),
		}
		r.notZero(n, "beta1", "beta2", "epsilon", "weight_decay", "clip_norm")
	case isWord:
		o.Kind = word
	default:
		r.wrongType(n, "a word or a table", `optimizer = { kind = "sgd", momentum = 0.9 }`)
	}
	if len(r.errs) > before {
		return o
	}
	if _, err := o.States(); err != nil {
		r.fail(fault(n, err))
	}
	if o.Kind == "adam" || o.Kind == "adamw" {
		o.Beta1, o.Beta2, o.Epsilon = orElse(o.Beta1, adamBeta1), orElse(o.Beta2, adamBeta2), orElse(o.Epsilon, adamEpsilon)
		o.Decoupled = o.Decoupled || o.Kind == "adamw" && o.WeightDecay != 0
	}
	return o
}

// notZero refuses a zero, which the trainer would take for a default.
func (r *reader) notZero(n *node, keys ...string) {
	for _, k := range keys {
		if at := n.table[k]; at != nil && r.number(n, k, 1) == 0 {
			r.fail(at.errorf("leave it out or write another number", "%s of 0", k))
		}
	}
}

func orElse(x, fallback float64) float64 {
	if x == 0 {
		return fallback
	}
	return x
}

// DescribeOptimizer is an optimizer in words, each figure the binary32 number
// that is computed with.
func DescribeOptimizer(o trainer.Optimizer) string {
	words := []string{o.Kind}
	if o.Kind == "adam" || o.Kind == "adamw" {
		words = append(words, fmt.Sprintf("beta1 %g beta2 %g epsilon %g", float32(o.Beta1), float32(o.Beta2), float32(o.Epsilon)))
		if o.EpsilonInside {
			words = append(words, "inside the root")
		}
	} else {
		words = append(words, fmt.Sprintf("momentum %g", float32(o.Momentum)))
	}
	if o.WeightDecay != 0 {
		words = append(words, fmt.Sprintf("weight decay %g", float32(o.WeightDecay)))
		if o.Decoupled {
			words = append(words, "decoupled")
		}
	}
	if o.ClipNorm != 0 {
		words = append(words, fmt.Sprintf("clipped at norm %g", float32(o.ClipNorm)))
	}
	if o.Compensated {
		words = append(words, "compensated")
	}
	return strings.Join(words, " ")
}

// scheduleKeys are the keys of a learning rate's table.
var scheduleKeys = []string{"start", "multiply", "at_epochs", "cosine", "end", "warm_up"}

// readSchedule reads a learning rate: a number, or a table that also says at
// which epochs it is multiplied by what, or that it falls along a cosine, and over
// how many steps it rises first.
func (r *reader) readSchedule(n *node) (s trainer.Schedule) {
	s.Multiply = 1
	at := n
	if n.table == nil {
		s.Start = r.numberAt(n, "learning_rate", 0.02)
	} else {
		r.known(n, scheduleKeys...)
		if n.table["start"] == nil {
			r.fail(n.errorf("write start = 0.02", "start is missing"))
			return s
		}
		at = n.table["start"]
		s.Start = r.number(n, "start", 0.02)
		s.AtEpochs = r.wholes(n, "at_epochs", 1, maxCount)
		s.Multiply = r.multiplier(n, s.AtEpochs)
		if !slices.IsSorted(s.AtEpochs) {
			r.fail(n.table["at_epochs"].errorf("write the epochs in ascending order", "%v do not ascend", s.AtEpochs))
		}
		r.readShape(n, &s)
	}
	if !positive32(s.Start) {
		r.fail(at.errorf("write a positive rate, as 0.02", "a learning rate of %g is not a positive binary32 number", s.Start))
	}
	return s
}

// readShape reads the cosine and the warm-up.
func (r *reader) readShape(n *node, s *trainer.Schedule) {
	s.WarmUp = int(r.whole(n, "warm_up", 0, 1, maxCount))
	s.Cosine = r.flag(n, "cosine", false)
	s.End = r.number(n, "end", 0)
	end, falls := n.table["end"], n.table["at_epochs"]
	switch {
	case end != nil && !s.Cosine:
		r.fail(end.errorf("write cosine = true or leave end out", "an end without a cosine"))
	case end != nil && !(float32(s.End) >= 0 && float32(s.End) <= float32(s.Start)):
		r.fail(end.errorf("write a number between 0 and the start", "an end of %g does not lie between 0 and the start, %g", s.End, s.Start))
	case s.Cosine && falls != nil:
		r.fail(falls.errorf("keep one of them", "falls at epochs and along a cosine at once"))
	}
}

// DescribeRate is a learning rate in words.
func DescribeRate(s trainer.Schedule) string {
	text := fmt.Sprintf("%g", float32(s.Start))
	if len(s.AtEpochs) > 0 {
		text += fmt.Sprintf(" x%g at epochs %v", float32(s.Multiply), s.AtEpochs)
	}
	if s.Cosine {
		text += fmt.Sprintf(" along a cosine to %g", float32(s.End))
	}
	if s.WarmUp > 0 {
		text += fmt.Sprintf(" after a rise over %d steps", s.WarmUp)
	}
	return text
}

// multiplier reads multiply, which goes with at_epochs.
func (r *reader) multiplier(n *node, epochs []int) float64 {
	at := n.table["multiply"]
	switch {
	case at == nil && len(epochs) > 0:
		r.fail(n.errorf("write multiply = 0.2", "at_epochs without multiply"))
	case at != nil && n.table["at_epochs"] == nil:
		r.fail(at.errorf("write at_epochs = [9, 13]", "multiply without at_epochs"))
	case at != nil:
		factor := r.number(n, "multiply", 0.2)
		if !positive32(factor) {
			r.fail(at.errorf("write a positive factor, as 0.2", "a factor of %g is not a positive binary32 number", factor))
		}
		return factor
	}
	return 1
}
