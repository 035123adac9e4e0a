package trainer

import "ulpine/quant"

// ArithmeticVersion stands in the key of every run, so that results of different
// arithmetic never mix. It is raised, in package quant, whenever a bit of any
// result may change: in arithmetic, initial weights, order of batches, data
// generation, scores or counters.
const ArithmeticVersion = quant.ArithmeticVersion
