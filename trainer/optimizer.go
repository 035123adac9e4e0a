package trainer

import (
	"fmt"
	"math"
	"strings"

	"ulpine/quant"
)

// rule is an optimizer: it says by how much one parameter moves.
type rule[T quant.Element] interface {
	// begin starts an update of all parameters.
	begin()
	// step writes what is to be subtracted from q's master. gradient is g' in
	// binary64 and may be overwritten, rate the learning rate.
	step(p *pass, q *param[T], gradient []float64, step []T, rate float64)
}

// ruleKind is a row of the table of optimizers.
type ruleKind struct {
	name string
	// states is the number of state tensors the formula needs for a parameter.
	states func(o Optimizer) int
	check  func(o Optimizer) error
	// make constructs a rule; largest is the size of the largest parameter.
	make32 func(o Optimizer, largest int) rule[float32]
	make64 func(o Optimizer, largest int) rule[float64]
}

// ruleKinds is the table of optimizers. A new one is one file and one line here.
var ruleKinds = []*ruleKind{&sgdKind, &nesterovKind, &adamKind, &adamWKind}

// findRule returns the row of an optimizer.
func findRule(o Optimizer) (*ruleKind, error) {
	names := make([]string, 0, len(ruleKinds))
	for _, k := range ruleKinds {
		if k.name == o.Kind {
			if err := k.check(o); err != nil {
				return k, err
			}
			return k, o.check()
		}
		names = append(names, k.name)
	}
	return nil, fmt.Errorf("unknown optimizer %q; write one of %s", o.Kind, strings.Join(names, ", "))
}

// check refuses what no optimizer can use.
func (o Optimizer) check() error {
	for what, x := range map[string]float64{"weight decay": o.WeightDecay, "clipping norm": o.ClipNorm} {
		if y := single(x); !(y >= 0) || math.IsInf(y, 0) || y == 0 && x != 0 {
			return fmt.Errorf("%s is %g; it must be 0 (none) or positive and finite in binary32", what, x)
		}
	}
	if o.Decoupled && o.WeightDecay == 0 {
		return fmt.Errorf("decoupled weight decay of 0; give the decay or leave it coupled")
	}
	return nil
}

// resolved takes the numbers that the mover uses to binary32.
func (o Optimizer) resolved() Optimizer {
	o.WeightDecay, o.ClipNorm = single(o.WeightDecay), single(o.ClipNorm)
	o.Decoupled = o.Decoupled || o.Kind == adamWKind.name
	return o
}

// States is the number of state tensors an optimizer keeps for each parameter,
// and so the length of Arithmetic.States: those of its formula in turn, then the
// compensation.
func (o Optimizer) States() (int, error) {
	k, err := findRule(o)
	if err != nil {
		return 0, err
	}
	return o.stateCount(k), nil
}

func (o Optimizer) stateCount(k *ruleKind) int {
	n := k.states(o)
	if o.Compensated {
		n++
	}
	return n
}

// OptimizerNames are the kinds of optimizers.
func OptimizerNames() []string {
	names := make([]string, len(ruleKinds))
	for i, k := range ruleKinds {
		names[i] = k.name
	}
	return names
}

// makeRule constructs an optimizer for an element type.
func makeRule[T quant.Element](k *ruleKind, o Optimizer, largest int) rule[T] {
	if m, ok := any(k.make32).(func(Optimizer, int) rule[T]); ok {
		return m(o, largest)
	}
	return any(k.make64).(func(Optimizer, int) rule[T])(o, largest)
}
