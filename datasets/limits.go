package datasets

// Bounds that keep a damaged or hostile file from taking the machine's memory.
// Far above what a training on a CPU can use, they are refusals with a reason.
const (
	maxExamples = 10_000_000 // of a set
	maxValues   = 1 << 29    // of all examples: 4 GiB while they are binary64
)
