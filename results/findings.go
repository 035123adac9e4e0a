package results

import "math"

// Findings are what looking closer at a run in some of its steps came to. They
// are samples, change no bit of the run and are not in its digest. Epochs and
// steps count from 1; a layer is its index in the network, -1 input or loss.
type Findings struct {
	Points    []PointFinding    `cbor:"1,keyasint"`
	Sums      []SumFinding      `cbor:"2,keyasint"`
	Updates   []UpdateFinding   `cbor:"3,keyasint"`
	Gradients []GradientFinding `cbor:"4,keyasint"`
}

// PointFinding is what was seen at one rounding point of one layer in an epoch.
type PointFinding struct {
	Epoch  int    `cbor:"1,keyasint"`
	Layer  int    `cbor:"2,keyasint"`
	Name   string `cbor:"3,keyasint"`
	Point  string `cbor:"4,keyasint"`
	Values uint64 `cbor:"5,keyasint"` // looked at
	Zeros  uint64 `cbor:"6,keyasint"` // before rounding
	Counts Counts `cbor:"7,keyasint"` // of the values looked at
	// Exponents counts finite values other than zero, before rounding; ascending.
	Exponents []ExponentCount `cbor:"8,keyasint"`
	Signal    float64         `cbor:"9,keyasint"`  // sum of x^2
	Noise     float64         `cbor:"10,keyasint"` // sum of (rounded x - x)^2
}

// ExponentCount is the number of values with 2^Exponent <= |x| < 2^(Exponent+1).
type ExponentCount struct {
	Exponent int    `cbor:"1,keyasint"`
	Count    uint64 `cbor:"2,keyasint"`
}

// SumFinding compares sums of products with the exact sums of the same operands.
type SumFinding struct {
	Epoch   int     `cbor:"1,keyasint"`
	Layer   int     `cbor:"2,keyasint"`
	Name    string  `cbor:"3,keyasint"`
	Point   string  `cbor:"4,keyasint"`
	Count   uint64  `cbor:"5,keyasint"` // sums recomputed
	Terms   uint64  `cbor:"6,keyasint"` // of all of them
	Cross   float64 `cbor:"7,keyasint"` // sum of computed x exact
	Squares float64 `cbor:"8,keyasint"` // sum of exact^2
}

// UpdateFinding compares what masters moved by with the steps they were to take.
type UpdateFinding struct {
	Epoch    int     `cbor:"1,keyasint"`
	Layer    int     `cbor:"2,keyasint"`
	Param    string  `cbor:"3,keyasint"` // "weight"
	Count    uint64  `cbor:"4,keyasint"`
	Cross    float64 `cbor:"5,keyasint"` // sum of applied x intended
	Squares  float64 `cbor:"6,keyasint"` // sum of intended^2
	Excess   float64 `cbor:"7,keyasint"` // sum of applied - intended
	Intended float64 `cbor:"8,keyasint"` // sum of |intended|
	Unmoved  uint64  `cbor:"9,keyasint"` // intended, yet nothing moved
}

// GradientFinding is the cosine of the angle between a parameter's gradient and
// the one of binary64 arithmetic on the same masters and batch.
type GradientFinding struct {
	Step   int     `cbor:"1,keyasint"`
	Layer  int     `cbor:"2,keyasint"`
	Param  string  `cbor:"3,keyasint"`
	Cosine float64 `cbor:"4,keyasint"` // NaN: one of the two is zero or not finite
}

// Decibels is a ratio of powers in decibels: +Inf without noise, NaN with neither.
func Decibels(signal, noise float64) float64 { return 10 * math.Log10(signal/noise) }

// Diagnose is a closer look at a run from its findings, those of the last epoch
// for histograms: one histogram a point is what a report can show.
func Diagnose(r *Run) Diagnosis {
	d := Diagnosis{Arm: r.Arm, Replicate: r.Replicate}
	if r.Findings == nil {
		return d
	}
	d.Qualities = Qualities(r)
	type place struct {
		layer int
		point string
	}
	at := map[place]int{}
	for i := range r.Findings.Points {
		f := &r.Findings.Points[i]
		d.Epochs = append(d.Epochs, EpochCounts{
			PointCounts: PointCounts{Layer: f.Layer, Name: f.Name, Point: f.Point, Counts: f.Counts},
			Epoch:       f.Epoch, Values: f.Values,
		})
		h := f.histogram()
		k, known := at[place{f.Layer, f.Point}]
		switch {
		case !known:
			at[place{f.Layer, f.Point}] = len(d.Histograms)
			d.Histograms = append(d.Histograms, h)
		case h.Epoch > d.Histograms[k].Epoch:
			d.Histograms[k] = h
		}
	}
	return d
}

// histogram is the finding's bars, the empty ones between them included.
func (f *PointFinding) histogram() Histogram {
	h := Histogram{Layer: f.Layer, Name: f.Name, Point: f.Point, Epoch: f.Epoch, Zeros: f.Zeros, NotFinite: f.Values - f.Zeros}
	if n := len(f.Exponents); n > 0 {
		h.Lowest = f.Exponents[0].Exponent
		h.Counts = make([]uint64, f.Exponents[n-1].Exponent-h.Lowest+1)
	}
	for _, b := range f.Exponents {
		h.Counts[b.Exponent-h.Lowest] = b.Count
		h.NotFinite -= b.Count
	}
	return h
}
