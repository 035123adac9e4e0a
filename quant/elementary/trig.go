package elementary

import "math"

// Sin returns the sine of x radians; the error is below 0.8 ulp for every finite
// x. Below 2^20 in magnitude it is fast, beyond it is right but slow (see
// reduceHuge). The sine of an infinity is NaN; Sin(-0) is -0.
func Sin(x float64) float64 {
	switch {
	case x-x != 0: // NaN or infinite
		return math.NaN()
	case math.Abs(x) < 0x1p-27: // x^3/6 is below half a unit; keeps -0
		return x
	}
	q, r, rest := reduce(x)
	return rotate(q, r, rest)
}

// Cos returns the cosine of x radians; range, cost and error are those of Sin.
func Cos(x float64) float64 {
	if x-x != 0 {
		return math.NaN()
	}
	q, r, rest := reduce(x)
	return rotate(q+1, r, rest)
}

// rotate returns the sine of r + rest + q quarter turns.
func rotate(q int, r, rest float64) float64 {
	var y float64
	if q&1 == 0 {
		y = sinKernel(r, rest)
	} else {
		y = cosKernel(r, rest)
	}
	if q&2 != 0 {
		return -y
	}
	return y
}

// reduce returns q mod 4 and r + rest = x - q pi/2, |r| below pi/4 (1 + 2^-30),
// with an absolute error below 2^-100: a number below 2^20 comes no nearer
// to a multiple of pi/2 than about 2^-60.
//
// Method (Cody, Waite 1980): pi/2 in four parts. The first three have 33 bits, so
// their products with the 20-bit quotient are exact.
func reduce(x float64) (q int, r, rest float64) {
	if math.Abs(x) >= 0x1p20 {
		return reduceHuge(x)
	}
	if math.Abs(x) < 0.785 { // below pi/4
		return 0, x, 0
	}
	k := math.Floor(float64(x*quartersPerRadian) + 0.5)
	r = x - float64(k*halfPi1) // exact: the operands share their leading bits
	r, rest = twoDiff(r, float64(k*halfPi2))
	r, e := twoDiff(r, float64(k*halfPi3))
	r, rest = twoSum(r, rest+(e-float64(k*halfPi4)))
	return int(k) & 3, r, rest
}

// sinKernel returns sin(r + rest) for |r| <= 0.786, rest below one unit of r.
func sinKernel(r, rest float64) float64 {
	z := float64(r * r)
	// (sin r - r + r^3/6)/r^5 by Taylor: the first omitted term is below 2^-71 of r.
	p := -1.0/39916800 + float64(z*(1.0/6227020800-float64(z*(1.0/1307674368000-float64(z*(1.0/355687428096000))))))
	p = 1.0/120 + float64(z*(-1.0/5040+float64(z*(1.0/362880+float64(z*p)))))
	// The derivative 1 - z/2 carries the rest over.
	tail := float64(float64(z*r)*float64(z*p)) + float64(rest*(1-float64(0.5*z)))
	return r + (tail - float64(float64(z*r)*(1.0/6)))
}

// cosKernel returns cos(r + rest) for |r| <= 0.786, rest below one unit of r.
func cosKernel(r, rest float64) float64 {
	z := float64(r * r)
	zRest := math.FMA(r, r, -z)
	// (cos r - 1 + r^2/2)/r^4 by Taylor: the first omitted term is below 2^-64.
	p := 1.0/3628800 - float64(z*(1.0/479001600-float64(z*(1.0/87178291200-float64(z*(1.0/20922789888000))))))
	p = 1.0/24 - float64(z*(1.0/720-float64(z*(1.0/40320-float64(z*p)))))
	half := float64(0.5 * z)
	y := 1 - half
	tail := float64(float64(z*z)*p) - float64(0.5*zRest) - float64(r*rest)
	return y + ((1 - y - half) + tail)
}

// twoSum returns s = a + b rounded and the exact rest (D. E. Knuth, The Art of
// Computer Programming, vol. 2, section 4.2.2).
func twoSum(a, b float64) (s, rest float64) {
	s = a + b
	t := s - a
	return s, (a - (s - t)) + (b - t)
}

// twoDiff returns a - b rounded and the exact rest.
func twoDiff(a, b float64) (s, rest float64) { return twoSum(a, -b) }
