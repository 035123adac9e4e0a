// Package oracle says what a rounding, a code or a sum must be, from the
// definitions alone and in exact rationals of math/big. It imports nothing of the
// project: the checks of `ulpine selftest`, the test vectors and the tests of
// package quant hold the fast arithmetic to it.
//
// A Format comes from its exponent bits, fraction bits and bias (Split), or from a
// list of its values (List): fixed point, code books, posits. Rounding is written
// for legibility, not speed: a rounding takes about a microsecond.
//
// big.Float is not used: it knows neither stochastic rounding nor rounding to odd,
// and has no least exponent near that of small formats.
//
// The words of roundings, overflow policies and orders are those that plans and
// the command line use.
package oracle
