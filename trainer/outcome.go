package trainer

import (
	"fmt"
	"slices"

	"ulpine/quant"
)

// Param is a parameter outside the engine. Values hold binary32 numbers unless Wide.
type Param struct {
	Name   string // "layer0.weight": the layer's index in the network, the parameter
	Shape  []int
	Wide   bool
	Values []float64 // row-major
}

func paramName(layer int, name string) string { return fmt.Sprintf("layer%d.%s", layer, name) }

// Epoch is what is known after one pass over the training data. Losses are means
// (of cross-entropy in nats), accuracies fractions of one, RMSE roots of mean squared
// distances over examples and outputs; NaN where a split was not evaluated, and
// accuracies of a regression, and RMSE of a classification.
type Epoch struct {
	TrainLoss          float64 // mean of step losses weighted by batch size
	TrainAccuracy      float64 // of the same outputs, each before its step's update
	ValidationLoss     float64
	ValidationAccuracy float64
	TestLoss           float64
	TestAccuracy       float64
	TrainRMSE          float64
	ValidationRMSE     float64
	TestRMSE           float64
	Ties               uint64  // test examples whose largest output is shared
	LossScale          float64 // S at the end of the epoch
	Skipped            uint64  // steps the loss scale skipped

	Validation, Test *ClassScores // nil: not evaluated, or a regression
}

// PointCounts are the tallies of one rounding point of one layer over all
// training steps; evaluations are not counted. Additions at an outer point are
// counted with the sum they belong to.
type PointCounts struct {
	Layer  int    // index in the network; -1: input or loss
	Name   string // "dense 16"
	Point  string // "forward.sum"
	Counts quant.Counts
}

// Outcome is what a training came to.
type Outcome struct {
	Steps    []float64 // mean loss of every step, the one it diverged in included
	Epochs   []Epoch   // the last may be cut short by divergence
	Counters []PointCounts
	Initial  []Param // masters before the first step
	Final    []Param
	// Diverged is the reason, empty where the run did not diverge; it then stopped
	// in DivergedStep (1 is the first) and its last epoch stands as it was.
	Diverged     string
	DivergedStep int
	Stalled      bool      // not diverged, yet the final loss is over 95 % of a constant predictor's
	Findings     *Findings // of diagnostics; nil if none were asked for
	Test         *Scores   // answers of the last evaluation of the test set; nil if there was none
}

// counters lists the tallies of every point a network computes with; of residues only
// where they are kept.
func (n *Network) counters(arm *Arm, t tally) []PointCounts {
	out := []PointCounts{
		{-1, "input", Input.String(), t[0][Input]},
		{-1, "loss", LossGradient.String(), t[0][LossGradient]},
	}
	for i := range n.Layers {
		for _, id := range n.PointsOf(i) {
			if id.outer() || id == WeightGradientResidue && !arm.keepsResidue(i) {
				continue
			}
			out = append(out, PointCounts{i, n.Layers[i].Name, id.String(), t[i+1][id]})
		}
	}
	return out
}

// keepsResidue reports whether a layer keeps residues in some stage.
func (a *Arm) keepsResidue(layer int) bool {
	return slices.ContainsFunc(a.arms(), func(a *Arm) bool { return a.Layers[layer].WeightGradient.Residue != nil })
}

// outer reports whether the point adds finished chunks and biases.
func (p PointID) outer() bool {
	return p == ForwardOuter || p == InputGradientOuter || p == WeightGradientOuter
}
