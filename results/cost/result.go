package cost

// Result is what every arm would cost, ready for print and JSON: it holds no
// NaN and no infinity. Bits are exact counts; times are in seconds, energies in
// picojoules.
type Result struct {
	Machine        Machine     `json:"machine"`
	Energy         EnergyTable `json:"energy"`
	Network        Network     `json:"network"`
	Optimizer      Optimizer   `json:"optimizer"`
	Batch          uint64      `json:"batch"`           // examples of a training step
	InferenceBatch uint64      `json:"inference_batch"` // examples of an inference
	Reference      Bill        `json:"reference"`       // everything in FP32
	Arms           []Bill      `json:"arms"`
	Answer         string      `json:"answer"`
	Assumptions    []string    `json:"assumptions"`
	Cautions       []string    `json:"cautions"`
	Warnings       []string    `json:"warnings,omitempty"`
}

// Bill is the cost of one arm.
type Bill struct {
	Name   string  `json:"name"`
	Slug   string  `json:"slug"`
	Memory Memory  `json:"memory"`
	Once   Account `json:"once"`
	Tiled  Account `json:"tiled"`
}

// Account is the cost of an arm under one reuse model.
type Account struct {
	Reuse Reuse `json:"reuse"`
	// What the figures of this account come from.
	TrafficLabel Label    `json:"traffic_label"`
	TimeLabel    Label    `json:"time_label"`
	EnergyLabel  Label    `json:"energy_label"`
	Step         Activity `json:"step"`
	Inference    Activity `json:"inference"`
}

// Label says what a figure is: the model it comes from, the source of the
// model's numbers, and what had to be extrapolated.
type Label struct {
	Model        string   `json:"model"`
	Source       string   `json:"source"`
	Extrapolated bool     `json:"extrapolated"`
	Rules        []string `json:"rules,omitempty"` // of the extrapolation, in words
}

// Memory is what an arm keeps in memory, in bits.
type Memory struct {
	// Training: working weights, a separate master copy, optimizer states,
	// parameter gradients, the activations of a batch that the backward phases
	// need, and the largest pair of neighbouring activation gradients.
	Training Footprint `json:"training"`
	// Endpoint: working weights and the largest pair of neighbouring activations
	// of an inference.
	Endpoint Footprint `json:"endpoint"`
	// Tensors are the tensors of Training, one by one.
	Tensors []Tensor `json:"tensors"`
	// Width is the mean number of bits of a value in Training.
	Width float64 `json:"bits_per_value"`
}

// Footprint is memory by class, in bits, and the number of values in it.
type Footprint struct {
	ByClass
	Values uint64 `json:"values"`
	Bits   uint64 `json:"bits"`
}

// Tensor is one stored tensor.
type Tensor struct {
	Layer  int     `json:"layer"` // -1: the network's input
	Class  Class   `json:"class"`
	Format string  `json:"format"`
	Width  float64 `json:"bits_per_value"` // of the format, in full blocks
	Values uint64  `json:"values"`
	Bits   uint64  `json:"bits"` // exact: short blocks and tensor scales included
}
