package datasets

// Bounds that keep a damaged or hostile file from taking the machine's memory.
// Far above what a training on a CPU can use, they are refusals with a reason.
const (
	maxExamples = 10_000_000 // of a set
	maxValues   = 1 << 29    // of a file: 4 GiB where they are held in binary64
	maxClasses  = 1000
	maxText     = 1 << 30 // bytes of CSV, decompressed
	maxLine     = 1 << 22 // bytes of a line of CSV: a decoder holds 40 bytes for each separator
)
