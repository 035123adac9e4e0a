package kernel

import "math"

// lanes is the type of a vector's elements.
type lanes interface{ float32 | float64 }

// Tile is the argument of a kernel: a block of terms of one panel, for groups of
// rows. The assembly reads fields by their offsets.
//
// For each group g of rows r (2, 4, 6 or 8, the kernel's own number), each column j
// of the panel (as many as the kernel is wide), and k ascending:
//
//	s = In[g,r,j] Scale
//	s = mode(s, A[g,r,k], B[k,j], R[g,r,k], V[k,j])    k = 0 .. K-1
//	Out[g,r,j] = s Unscale + 0
//	Flags[g] = some s of the group is not finite
type Tile[L lanes] struct {
	K        int       // terms, at least 1
	Groups   int       // groups of rows, at least 1
	A        []L       // A[g,r,k] is A[pair*AStride + 2k + r%2], pair = (rows*g + r)/2
	AStride  int       // elements from a pair of rows to the next, of A and of R
	B        []L       // B[k,j] is B[k*width + j]
	R        []uint32  // random words of rows, laid out as A, low bit set
	V        []uint32  // random words of columns, laid out as B
	In       []L       // In[g,r,j] is In[(rows*g+r)*InRow + j]
	InRow    int       // 0: all rows start alike
	Out      []L       // as In; may be In
	OutRow   int       //
	Final    []float32 // binary64 lanes: if not nil it takes the results instead of Out
	FinalRow int       //
	Flags    []uint8   // one a group
	C        *Constants
	TermR    []uint32 // as R and V, of the rounding of products
	TermV    []uint32
	Events   []uint64 // careful modes add their events, see Events
	Rows     int      // the kernel's rows and width; the portable loops read them
	Width    int
	numbers  *numbers[L] // scratch of the portable loops
}

// vector is one value in every lane of a 512-bit register: the assembly uses it
// whole, or its first half.
type vector [16]uint32

func bits32(b uint32) (v vector) {
	for i := range v {
		v[i] = b
	}
	return v
}

func bits64(b uint64) (v vector) {
	for i := 0; i < len(v); i += 2 {
		v[i], v[i+1] = uint32(b), uint32(b>>32)
	}
	return v
}

func (v *vector) bits64() uint64  { return uint64(v[1])<<32 | uint64(v[0]) }
func (v *vector) single() float32 { return math.Float32frombits(v[0]) }
func (v *vector) double() float64 { return math.Float64frombits(v.bits64()) }

// Constants are the numbers of one mode and its grids, equal in all lanes. s is the
// number of bits of a lane below the last place of the grid. The assembly reads
// fields by their offsets.
type Constants struct {
	ExponentMask  vector // the exponent field
	SignMask      vector
	MagnitudeMask vector // all but the sign
	Least         vector // least normal product, scaled
	Grow          vector // 1.5 2^s of products
	Rescale       vector // scale of sums over scale of products
	SumLeast      vector // least normal sum, scaled
	SumGrow       vector // 1.5 2^s of sums
	SumSplit      vector // 2^s + 1 of sums
	Scale         vector // scale of sums
	Unscale       vector // its inverse
	Keep          vector // the bits of a sum from its last place up
	RandomMask    vector // the random bits used, of 16, where the mode wants them
	RandomShift   vector // a shift that puts them below the last place
	RandomHalf    vector // the half of centred thresholds
	Fraction      vector // the fraction field
	Implicit      vector // the bit above it, of numbers other than zero
	PreShift      vector // significand to fixed point: up by this,
	BaseShift     vector // then down by this and the distance below the least binade;
	WholeShift    vector // fraction bits of the fixed point
	Quantum       vector // 2^-m
	Limit         vector // sums of this magnitude are handed back
	Ones          vector // 1, as an integer
	TermKeep      vector // as Keep, RandomMask, RandomShift, RandomHalf and Limit, of products
	TermMask      vector
	TermShift     vector
	TermHalf      vector
	TermLimit     vector
	Max           vector // careful modes, products: the largest finite value,
	Over          vector // what becomes of a finite number beyond it,
	Infinite      vector // and of an infinite one
	SumMax        vector // the same of sums
	SumOver       vector
	SumInfinite   vector
	Infinity      vector
	OddMask       vector // all ones where sums are rounded to odd before the grid
}
