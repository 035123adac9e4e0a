package kernel

// ProductKind says what happens to a product before it is added.
type ProductKind uint8

// The products.
const (
	ExactProduct   ProductKind = iota // enters the sum unrounded
	NativeProduct                     // rounded to nearest-even to the type of the elements
	RoundedProduct                    // rounded to nearest-even to Grid
	RandomProduct                     // rounded stochastically to Grid
)

// SumKind says how a sum is rounded.
type SumKind uint8

// The sums.
const (
	NativeSum     SumKind = iota // to nearest-even to the type of the elements
	NearestSum                   // to nearest-even to a grid
	StochasticSum                // stochastically to a grid
)

// Sum is the rounding of additions.
type Sum struct {
	Kind    SumKind
	Grid    Grid
	Through bool // each sum is rounded to binary32, nearest-even, before Grid
	Bits    int  // random bits r, 1 to 16
	Centred bool // the threshold is floor(f 2^r + 1/2) instead of floor(f 2^r)
}

// Arithmetic is how a sum of products is formed.
type Arithmetic struct {
	Product ProductKind
	Grid    Grid // of rounded products
	Bits    int  // of RandomProduct: random bits, 1 to 16
	Centred bool // of RandomProduct, as in Sum
	Sum     Sum
	// Chunk is the number of consecutive terms that are added from +0 in Sum
	// before Outer adds the finished chunks, from +0, in turn; 0: one sum.
	Chunk int
	// What becomes of products and sums beyond their formats, where the kernels form
	// them again with care.
	ProductPolicy, SumPolicy Policy
	// Pairwise adds neighbouring terms, then neighbouring sums, until one is left.
	Pairwise bool
	// Lanes, if not 0, is the number of sequential sums among which terms are dealt by
	// turns, to be added pairwise.
	Lanes int
	Outer Sum // adds chunks and the bias; equal to Sum where nothing else is meant
}
