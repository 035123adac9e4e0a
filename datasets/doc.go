// Package datasets yields the labelled examples a training sees, split into
// training, validation and test sets and scaled: from generators of invented
// data, from IDX files, from NPY and NPZ arrays and from tables in CSV.
// Examples have labels or, in a regression, targets of values.
//
// A Source is made from the keys of a plan's task by New, or as a literal of its
// struct. Facts answers what a plan's reader asks before anything runs; Load
// yields the examples. Data of files is the same in every replicate; generated data
// is drawn anew for each from its seed.
//
// # Rules
//
// Everything here is part of what is compared bit by bit:
//
//   - computations are in binary64, each product and sum rounded on its own, sums
//     in ascending order of example and feature; exponential, logarithm and sine
//     are package elementary's, random draws package random's;
//   - an input is the binary32 number nearest to the binary64 result;
//   - statistics for scaling come from the training set alone: mean, and the
//     square root of the mean squared distance from it (n in the denominator);
//   - targets of a regression are never scaled: the binary32 numbers nearest to
//     those of the source, in its units;
//   - splits are fixed: no example changes its set with the seed.
//
// Set sizes: train, validation and test limit a set to its first n examples. Where
// a file has no validation set of its own, validation = n takes the last n
// examples of the training file; validation_every = k instead takes every k-th
// (k, 2k, ... counted from 1), of which validation = n then keeps the first n.
// Validation examples leave the training set before train limits it.
//
// # A new data set
//
// One file with a type that implements Source and a constructor that reads its
// options, and one row in the table in registry.go. Readers of files return
// unscaled examples; the splitting and scaling in split.go and scale.go serve
// them all.
package datasets
