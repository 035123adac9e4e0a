package results

import "math"

// QualityKind is what a Quality measures.
type QualityKind string

// The kinds of qualities.
const (
	// SignalToNoise is the power of values over that of their rounding errors, in
	// decibels; +Inf: nothing was rounded off.
	SignalToNoise QualityKind = "signal to rounding noise"
	// SumsKept is the sum of computed x exact over that of exact^2, of sums of products.
	SumsKept QualityKind = "sums kept"
	// UpdatesKept is the sum of applied x intended over that of intended^2, of updates.
	UpdatesKept QualityKind = "updates kept"
	// UpdateBias is the mean of applied - intended over the mean size of what was intended.
	UpdateBias QualityKind = "update bias"
	// UpdatesStill is the share of updates that were to move a parameter and did not.
	UpdatesStill QualityKind = "updates without effect"
	// GradientCosine is the cosine of the angle to the gradient of binary64 arithmetic
	// on the same masters and batch.
	GradientCosine QualityKind = "gradient cosine"
)

// Quality is one figure of how much arithmetic kept, at one place of one layer,
// from samples of one epoch; a gradient's is of one step.
type Quality struct {
	Kind  QualityKind `json:"kind"`
	Layer int         `json:"layer"` // index in the network; -1: input or loss
	Name  string      `json:"name"`
	At    string      `json:"at"`             // the rounding point, or the parameter: "weight"
	Epoch int         `json:"epoch"`          // from 1
	Step  int         `json:"step,omitempty"` // of a gradient, from 1
	Count uint64      `json:"count"`          // values, sums or updates looked at; 0 of a gradient
	Value float64     `json:"-"`              // NaN: none
}

// Qualities are the figures of a run's findings: points first, then sums, updates
// and gradients, each in the order in which they were found.
func Qualities(r *Run) []Quality {
	f := r.Findings
	if f == nil {
		return nil
	}
	names := map[int]string{}
	var out []Quality
	for i := range f.Points {
		p := &f.Points[i]
		if p.Layer >= 0 {
			names[p.Layer] = p.Name
		}
		out = append(out, Quality{SignalToNoise, p.Layer, p.Name, p.Point, p.Epoch, 0, p.Values, Decibels(p.Signal, p.Noise)})
	}
	for i := range f.Sums {
		s := &f.Sums[i]
		out = append(out, Quality{SumsKept, s.Layer, s.Name, s.Point, s.Epoch, 0, s.Count, s.Cross / s.Squares})
	}
	for i := range f.Updates {
		u := &f.Updates[i]
		at := Quality{Layer: u.Layer, Name: names[u.Layer], At: u.Param, Epoch: u.Epoch, Count: u.Count}
		for _, k := range []struct {
			kind  QualityKind
			value float64
		}{
			{UpdatesKept, u.Cross / u.Squares},
			{UpdateBias, u.Excess / u.Intended},
			{UpdatesStill, float64(u.Unmoved) / float64(u.Count)},
		} {
			at.Kind, at.Value = k.kind, k.value
			out = append(out, at)
		}
	}
	for i := range f.Gradients {
		g := &f.Gradients[i]
		out = append(out, Quality{GradientCosine, g.Layer, names[g.Layer], g.Param, epochAt(r, g.Step), g.Step, 0, g.Cosine})
	}
	return out
}

// epochAt is the epoch of a step, both counted from 1. The last epoch of a run
// that diverged may be shorter than the others, which are all of one length.
func epochAt(r *Run, step int) int {
	epochs := max(1, len(r.Epochs))
	long := int(math.Ceil(float64(len(r.Steps)) / float64(epochs)))
	if long == 0 {
		return 1
	}
	return min((step-1)/long+1, epochs)
}
