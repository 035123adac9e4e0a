package results

// Volume is how many values a whole run rounds at a point of a layer while it
// trains, from shapes: what counts of range events are shares of.
type Volume struct {
	Layer  int    `json:"layer"` // index in the network; -1: input or loss
	Point  string `json:"point"`
	Values uint64 `json:"values"`
}

// Histogram counts the values that reached a rounding point, before rounding, by
// binary exponent.
type Histogram struct {
	Layer  int    `cbor:"1,keyasint" json:"layer"` // index in the network; -1: input or loss
	Name   string `cbor:"2,keyasint" json:"name"`
	Point  string `cbor:"3,keyasint" json:"point"`
	Epoch  int    `cbor:"4,keyasint" json:"epoch"` // from 1; 0: of the whole run
	Lowest int    `cbor:"5,keyasint" json:"lowest"`
	// Counts[i] is the number of values with 2^(Lowest+i) <= |x| < 2^(Lowest+i+1).
	Counts []uint64 `cbor:"6,keyasint" json:"counts"`
	Zeros  uint64   `cbor:"7,keyasint" json:"zeros"`
	// NotFinite counts infinities and NaN.
	NotFinite uint64 `cbor:"8,keyasint" json:"not_finite"`
}

// EpochCounts are the tallies of one rounding point within one epoch.
type EpochCounts struct {
	PointCounts
	Epoch int `json:"epoch"` // from 1
	// Values is how many values the counts are of, where only some were looked at;
	// 0: all that the point rounds.
	Values uint64 `json:"values,omitempty"`
}

// Diagnosis is what was looked at more closely in an arm's runs.
type Diagnosis struct {
	Arm        string        `json:"arm"` // slug
	Replicate  uint64        `json:"replicate"`
	Histograms []Histogram   `json:"histograms,omitempty"`
	Epochs     []EpochCounts `json:"epochs,omitempty"`
	Qualities  []Quality     `json:"-"` // how much was kept, epoch by epoch
}

// Range is what a format can hold, in binary exponents, for the ruler below a
// histogram.
type Range struct {
	Format  string `json:"format"`
	Least   int    `json:"least"`   // exponent of the least subnormal number above zero
	Normal  int    `json:"normal"`  // exponent of the least normal number
	Largest int    `json:"largest"` // exponent of the largest finite number
}

// Coordinate is an arm's place on one axis of the grid it comes from.
type Coordinate struct {
	Axis  string `json:"axis"`
	Value string `json:"value"`
}
