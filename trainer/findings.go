package trainer

import (
	"fmt"
	"math"
)

// Diagnostics say how often a training is looked at. The zero value is never.
// Looking changes no bit of the training; what it finds is in Outcome.Findings.
type Diagnostics struct {
	// Every and Gradient: in every n-th step, and in the last step of an epoch that
	// has no such step, so that none goes unseen however short it is; 0: never.
	Every    int // look at tensors, sums and updates; at an epoch's end at a quarter of them
	Gradient int // compare gradients with those of binary64
	// Pause is how many steps must lie behind the last comparison of gradients before
	// the end of an epoch alone asks for one: a comparison takes as long as two to four
	// steps. The last step of a training is always compared.
	Pause  int
	Values int // values looked at in one tensor, spread evenly; 0: 256
	Sums   int // sums recomputed in one product of matrices; 0: 4
}

// DefaultDiagnostics are meant to cost under 10 % of a training; BenchmarkDiagnostics
// measures it, for epochs of six steps too.
var DefaultDiagnostics = Diagnostics{Every: 50, Gradient: 200, Pause: 64, Values: 256, Sums: 4}

func (d Diagnostics) check() error {
	if d.Every < 0 || d.Gradient < 0 || d.Pause < 0 || d.Values < 0 || d.Sums < 0 {
		return fmt.Errorf("diagnostics of %+v; no number may be negative", d)
	}
	return nil
}

// Findings are what the diagnostics of a run came to. Epochs count from 1, layers
// as in PointCounts.
type Findings struct {
	Points    []PointFinding
	Sums      []SumFinding
	Updates   []UpdateFinding
	Gradients []GradientFinding
}

// PointFinding is what was seen at one rounding point of one layer in an epoch:
// values before and after they were rounded.
type PointFinding struct {
	Epoch, Layer int
	Name, Point  string
	Values       uint64 // looked at
	Zeros        uint64 // before rounding
	Underflow    uint64 // not zero before, zero after
	Overflow     uint64 // finite before, infinity or NaN after
	Saturated    uint64 // beyond the largest finite value before, that value after
	NaN          uint64 // after
	// Exponents counts finite values that were not zero before rounding, by the
	// exponent of their binary64 form, ascending.
	Exponents []ExponentCount
	// Signal and Noise are the sums of x^2 and of (R(x) - x)^2 over values that are
	// finite before and after.
	Signal, Noise float64
}

// ExponentCount is one bar of a histogram: values with 2^Exponent <= |x| <
// 2^(Exponent+1).
type ExponentCount struct {
	Exponent int
	Count    uint64
}

// SignalToNoise is the ratio of powers in decibels; +Inf where nothing was rounded
// off, NaN where nothing was seen.
func (f *PointFinding) SignalToNoise() float64 { return 10 * math.Log10(f.Signal/f.Noise) }

// SumFinding compares sums of products with the exact sums of the same operands,
// bias included, over an epoch. Point is the sum's.
type SumFinding struct {
	Epoch, Layer int
	Name, Point  string
	Count, Terms uint64
	Cross        float64 // sum of computed x exact
	Squares      float64 // sum of exact^2
}

// Retention is 1 where sums are exact, below where they lose what they should keep.
func (f *SumFinding) Retention() float64 { return f.Cross / f.Squares }

// UpdateFinding compares what masters moved by with the steps they were to take, in
// an epoch.
type UpdateFinding struct {
	Epoch, Layer int
	Param        string
	Count        uint64
	Cross        float64 // sum of applied x intended
	Squares      float64 // sum of intended^2
	Excess       float64 // sum of applied - intended
	Intended     float64 // sum of |intended|
	Unmoved      uint64  // intended, yet nothing moved
}

// Retention is 1 where updates arrive, 0 where they vanish.
func (f *UpdateFinding) Retention() float64 { return f.Cross / f.Squares }

// Bias is the mean excess of the movement, as a share of the mean intended size.
func (f *UpdateFinding) Bias() float64 { return f.Excess / f.Intended }

// GradientFinding is the cosine of the angle between a parameter's gradient and the
// gradient that binary64 arithmetic gives on the same masters and the same batch.
type GradientFinding struct {
	Step, Layer int
	Param       string
	Cosine      float64
}
