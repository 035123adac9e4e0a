package cost

// Phase is a part of a training step.
type Phase string

// The phases, in the order of computation.
const (
	Forward        Phase = "forward"
	InputGradient  Phase = "input gradient"
	WeightGradient Phase = "weight gradient"
	Update         Phase = "update"
)

// Phases lists the phases of a training step in order.
func Phases() []Phase { return []Phase{Forward, InputGradient, WeightGradient, Update} }

// Class is a kind of tensor.
type Class string

// The classes. Weights are the working copies, biases included.
const (
	Weights     Class = "weights"
	Activations Class = "activations"
	Gradients   Class = "gradients" // of activations and of parameters
	State       Class = "optimizer state"
	Master      Class = "master copy"
)

// Classes lists the classes of tensors.
func Classes() []Class { return []Class{Weights, Activations, Gradients, State, Master} }

// Reuse is how often a phase fetches what it needs again.
type Reuse string

// The reuse models; see the package comment.
const (
	Once  Reuse = "once"
	Tiled Reuse = "tiled"
)

// ByClass are bits by class of tensor.
type ByClass struct {
	Weights     uint64 `json:"weights"`
	Activations uint64 `json:"activations"`
	Gradients   uint64 `json:"gradients"`
	State       uint64 `json:"optimizer_state"`
	Master      uint64 `json:"master_copy"`
}

// Of returns the bits of one class.
func (b *ByClass) Of(c Class) uint64 {
	if p := b.at(c); p != nil {
		return *p
	}
	return 0
}

// Total is the sum over the classes.
func (b *ByClass) Total() uint64 {
	return b.Weights + b.Activations + b.Gradients + b.State + b.Master
}

func (b *ByClass) at(c Class) *uint64 {
	switch c {
	case Weights:
		return &b.Weights
	case Activations:
		return &b.Activations
	case Gradients:
		return &b.Gradients
	case State:
		return &b.State
	case Master:
		return &b.Master
	}
	return nil
}

func (b *ByClass) add(o *ByClass) {
	b.Weights += o.Weights
	b.Activations += o.Activations
	b.Gradients += o.Gradients
	b.State += o.State
	b.Master += o.Master
}
