package kernel

// mode numbers the kernels of one lane type; the loop each stands for is written
// at its portable form.
type mode int

// The modes of binary32 lanes.
const (
	baseline mode = iota
	fmaChain
	tree8
	rounded
	both
	bothScaled
	bothCare
	through
	throughFree
	productThrough
	odd
	oddRounded
	stochastic
	stochasticFused
	stochasticCare
	stochasticProductCare
	stochasticTruncated
	carefulFused
	carefulProduct
	carefulRounded
	singleModes
)

// The modes of binary64 lanes.
const (
	baseline64 mode = iota
	fmaChain64
	fused
	fusedFree
	stochasticWide
	stochasticProduct
	stochasticBoth
	doubleModes
)

// shape is one kernel: rows of a tile by the width of its family.
type shape[L lanes] struct {
	rows int
	run  func(*Tile[L])
}

// family is the kernels of one lane type, by mode: wide and narrow panels, each
// with shapes of falling rows, the last of two.
type family[L lanes] struct {
	width, narrow int
	tiles         [][2][]shape[L] // mode; wide, narrow
}

// Set is all kernels of one kind of processor.
type Set struct {
	Name    string
	single  family[float32]
	double  family[float64]
	loops   loops
	unfused bool // a multiply-add of binary32 takes longer than a product and a sum
}

// of returns the shapes of a mode for panels of the given width.
func (f *family[L]) of(m mode, width int) []shape[L] {
	if width == f.width {
		return f.tiles[m][0]
	}
	return f.tiles[m][1]
}

// panel returns the width of the panel for the columns that are left: a wide one,
// unless narrow ones waste less.
func (f *family[L]) panel(left int) int {
	if left < f.width && (left+f.narrow-1)/f.narrow*f.narrow*5 <= f.width*4 {
		return f.narrow
	}
	return f.width
}

// PanelWidths are the columns of the wide and of the narrow panels of the set in use.
func PanelWidths() (wide, narrow int) { return Sets[0].single.width, Sets[0].single.narrow }

// Sets are the sets that can run here, the fastest first.
var Sets = supported()
