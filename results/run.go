// Package results holds the plain records of an experiment: runs, curves,
// counters, comparisons, and the study that a report is drawn from. It does no
// input or output and knows neither the trainer nor the plan language.
package results

import "time"

// State of a run in a store, in the words the tool prints.
type State string

// The states.
const (
	Stored    State = "stored"
	InFlight  State = "in flight"
	BrokenOff State = "broken off"
	Failed    State = "failed" // Run.Cause says why
)

// Hash is a SHA-256. It prints as 64 hexadecimal digits.
type Hash [32]byte

// Counts tallies the range events of one rounding point.
type Counts struct {
	Overflow  uint64 `cbor:"1,keyasint" json:"overflow"`
	Underflow uint64 `cbor:"2,keyasint" json:"underflow"`
	Saturated uint64 `cbor:"3,keyasint" json:"saturated"`
	NaN       uint64 `cbor:"4,keyasint" json:"nan"`
}

// PointCounts are the tallies of one rounding point of one layer over a run.
type PointCounts struct {
	Layer  int    `cbor:"1,keyasint" json:"layer"` // index in the network; -1: input or loss
	Name   string `cbor:"2,keyasint" json:"name"`  // the layer's own name, e.g. "dense 16"
	Point  string `cbor:"3,keyasint" json:"point"` // e.g. "forward.sum"
	Counts Counts `cbor:"4,keyasint" json:"counts"`
}

// Epoch is what is known after one pass over the training data. Losses are means,
// of cross-entropies in nats, metrics fractions of one; NaN where not evaluated.
type Epoch struct {
	TrainLoss        float64 `cbor:"1,keyasint"` // mean of step losses weighted by batch size
	TrainMetric      float64 `cbor:"2,keyasint"`
	ValidationLoss   float64 `cbor:"3,keyasint"`
	ValidationMetric float64 `cbor:"4,keyasint"`
	TestLoss         float64 `cbor:"5,keyasint"`
	TestMetric       float64 `cbor:"6,keyasint"`
	Ties             uint64  `cbor:"7,keyasint"` // test examples whose largest logit is shared
	LossScale        float64 `cbor:"8,keyasint"` // S at the end of the epoch
	Skipped          uint64  `cbor:"9,keyasint"` // steps skipped by the loss scaler
	// TestRMSE is that of a regression, in the units of its targets; else 0, which
	// leaves a run's record and digest what they were before there were regressions.
	TestRMSE float64 `cbor:"10,keyasint,omitempty"`

	// Noted since, and in no digest: they follow from the same outputs as the losses.
	TrainRMSE      float64      `cbor:"11,keyasint,omitempty"` // of a regression, else 0
	ValidationRMSE float64      `cbor:"12,keyasint,omitempty"` // likewise
	Validation     *ClassScores `cbor:"13,keyasint,omitempty"` // nil: a regression, not evaluated, or not noted
	Test           *ClassScores `cbor:"14,keyasint,omitempty"` // likewise
}

// ClassScores are the answers of one evaluation by class.
type ClassScores struct {
	Examples []uint64 `cbor:"1,keyasint"` // of each class
	Right    []uint64 `cbor:"2,keyasint"` // of them, answered rightly
	// Missed[a] counts the examples of faults, all classes but 0, that raise no alarm
	// where at most a of those of class 0, the sound state, raise one: the threshold
	// is the lowest at which they do. a runs to MostFalseAlarms of the sound examples.
	Missed []uint64 `cbor:"3,keyasint,omitempty"`
}

// Tensor is a named parameter. Values hold binary32 numbers unless Wide.
type Tensor struct {
	Name   string    `cbor:"1,keyasint"`
	Shape  []int     `cbor:"2,keyasint"`
	Wide   bool      `cbor:"3,keyasint"`
	Values []float64 `cbor:"-"`          // row-major
	Raw    []byte    `cbor:"4,keyasint"` // little-endian, 4 or 8 bytes a value; written by the store
}

// Run is one arm x one replicate.
type Run struct {
	Arm       string        `cbor:"1,keyasint"` // slug: "bf16-nearest"; "baseline"; "pretrain"
	Replicate uint64        `cbor:"2,keyasint"` // the replicate's seed
	Key       Hash          `cbor:"3,keyasint"` // what was asked for
	Digest    Hash          `cbor:"4,keyasint"` // what came out
	State     State         `cbor:"5,keyasint"`
	Cause     string        `cbor:"6,keyasint"`
	Steps     []float64     `cbor:"-"` // loss per step
	Epochs    []Epoch       `cbor:"8,keyasint"`
	Counters  []PointCounts `cbor:"9,keyasint"`
	Initial   []Tensor      `cbor:"10,keyasint"`
	Final     []Tensor      `cbor:"11,keyasint"`
	// Diverged is the reason, empty when the run did not diverge; the run then
	// stopped in DivergedStep and is scored as it stands.
	Diverged     string `cbor:"12,keyasint"`
	DivergedStep int    `cbor:"13,keyasint"`
	Stalled      bool   `cbor:"14,keyasint"`
	// Confusion[t*Classes+p] counts test examples of class t called p after the last epoch.
	Confusion []uint64 `cbor:"15,keyasint"`
	Classes   int      `cbor:"16,keyasint"`

	// Not in the digest.
	CodeVersion string        `cbor:"17,keyasint"`
	Host        string        `cbor:"18,keyasint"`
	Started     time.Time     `cbor:"19,keyasint"`
	Wall        time.Duration `cbor:"20,keyasint"`
	Data        Hash          `cbor:"22,keyasint"` // of the examples trained and tested on
	StepBytes   []byte        `cbor:"21,keyasint"` // Steps, little-endian binary64; written by the store
	Findings    *Findings     `cbor:"-"`           // nil: not looked at
	Looked      bool          `cbor:"23,keyasint"` // there are findings, stored apart; written by the store
	// Predictions on the test set, stored apart; nil: not kept.
	Predictions *Predictions `cbor:"-"`
	Kept        bool         `cbor:"24,keyasint,omitempty"` // there are predictions; written by the store
}

// Name is how a run is called: arm/replicate.
func (r *Run) Name() string { return RunName(r.Arm, r.Replicate) }
