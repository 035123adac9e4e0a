// Package elementary holds the transcendental functions that training, data
// generation and initialisation may use: Exp, Log, Sin, Cos, Tanh, Sigmoid, Erf and
// Erfc, in binary64.
//
// The standard library's versions differ between machines (assembly on some,
// fused multiply-adds on others), so they have no place where results are
// compared bit by bit. The functions here give the same bits everywhere:
//
//   - every product is rounded by an explicit float64() before it is added, which
//     the language says prevents fusion; a test reads the source and insists;
//   - math.FMA appears only where the exact residue of a product is wanted. It is
//     correctly rounded on every machine, in software where there is no instruction;
//   - from package math nothing else is called but bit functions and Floor.
//
// Errors stay below one unit in the last place, subnormal results included;
// tests hold each function to a tighter bound against series summed with math/big
// (see the function). Functions are table-driven or Taylor polynomials on short
// intervals: no constant comes from anywhere but its definition, and the tables
// are rebuilt by a test.
//
// Every NaN returned is the canonical one of math.NaN. The methods are
// P. T. P. Tang: Table-driven implementation of the exponential function in IEEE
// floating-point arithmetic, ACM TOMS 15 (1989), and the companion paper on the
// logarithm, ACM TOMS 16 (1990); W. J. Cody, W. Waite: Software Manual for the
// Elementary Functions, 1980 (reduction by a constant in parts). Table sizes and
// polynomials are our own.
package elementary
