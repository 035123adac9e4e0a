package quant

import "math"

// blockLength is the number of elements that the elementwise roundings hold in
// binary64 at a time; a multiple of four, the words of one block of draws.
const blockLength = 256

// RoundSlice writes R[p](src[i]) to dst. Element i is number first+i of the
// tensor for the random bits of d. dst and src may be the same slice. n may be nil.
func RoundSlice[D, S Element](dst []D, src []S, p *Point, d Draws, first uint64, n *Counts) {
	sameLength(len(dst), len(src))
	holds[D](p)
	q := newQuick(p)
	w := newWords(d, p.Rounding)
	f := newFastSlice[D](&q, n)
	defer f.end()
	var x [blockLength]float64
	for at := 0; ; at += blockLength {
		at += fastRound(f, dst[min(at, len(dst)):], src[min(at, len(src)):], d, first+uint64(at))
		if at >= len(src) {
			break
		}
		s := src[at:min(at+blockLength, len(src))]
		b := x[:len(s)]
		for i, v := range s {
			b[i] = float64(v)
		}
		if q.block(b, &w, first+uint64(at), n) {
			store(dst[at:], b)
			continue
		}
		for i, v := range s {
			dst[at+i] = roundOne[D](p, Exactly(float64(v)), &w, first+uint64(at+i), n)
		}
	}
}

// ScaleSlice writes R[p](alpha src[i]), the product exact, to dst.
func ScaleSlice[D, S Element](dst []D, alpha float64, src []S, p *Point, d Draws, n *Counts) {
	sameLength(len(dst), len(src))
	holds[D](p)
	q := newQuick(p)
	w := newWords(d, p.Rounding)
	f := newFastSlice[D](&q, n)
	defer f.end()
	var x [blockLength]float64
	for at := 0; ; at += blockLength {
		at += fastScale(f, dst[min(at, len(dst)):], alpha, src[min(at, len(src)):], d, uint64(at))
		if at >= len(src) {
			break
		}
		s := src[at:min(at+blockLength, len(src))]
		b := x[:len(s)]
		if scaleBlock(b, alpha, s, &q) && q.block(b, &w, uint64(at), n) {
			store(dst[at:], b)
			continue
		}
		for i, v := range s {
			dst[at+i] = roundOne[D](p, ExactProduct(alpha, float64(v)), &w, uint64(at+i), n)
		}
	}
}

// AddSlice writes R[p](a[i] + b[i]), the sum exact, to dst.
func AddSlice[D, A, B Element](dst []D, a []A, b []B, p *Point, d Draws, n *Counts) {
	addScaled(dst, a, 1, b, p, d, n)
}

// SubSlice writes R[p](a[i] - b[i]), the difference exact, to dst.
func SubSlice[D, A, B Element](dst []D, a []A, b []B, p *Point, d Draws, n *Counts) {
	addScaled(dst, a, -1, b, p, d, n)
}

// addScaled writes R[p](a[i] + sign b[i]) to dst, sign +1 or -1.
func addScaled[D, A, B Element](dst []D, a []A, sign float64, b []B, p *Point, d Draws, n *Counts) {
	sameLength(len(dst), len(a))
	sameLength(len(dst), len(b))
	holds[D](p)
	q := newQuick(p)
	w := newWords(d, p.Rounding)
	f := newFastSlice[D](&q, n)
	defer f.end()
	var x [blockLength]float64
	for at := 0; ; at += blockLength {
		at += fastAdd(f, dst[min(at, len(dst)):], a[min(at, len(a)):], sign, b[min(at, len(b)):], d, uint64(at))
		if at >= len(dst) {
			break
		}
		end := min(at+blockLength, len(dst))
		s := x[:end-at]
		if addBlock(s, a[at:end], sign, b[at:end], &q) && q.block(s, &w, uint64(at), n) {
			store(dst[at:], s)
			continue
		}
		for i := at; i < end; i++ {
			sum := Exactly(float64(a[i])).Add(Exactly(float64(sign * float64(b[i]))))
			dst[i] = roundOne[D](p, sum, &w, uint64(i), n)
		}
	}
}

// roundOne rounds one exact real, number i of its tensor.
func roundOne[D Element](p *Point, x Real, w *words, i uint64, n *Counts) D {
	v, e := p.Round(x, w.at(i))
	n.Count(e)
	return D(v)
}

// scaleBlock writes alpha s[i] to x, exact or rounded to odd; false where binary64
// holds neither: at its bounds, and where q cannot take a folded result. Products
// for a point of binary64 are rounded by the multiplication itself.
func scaleBlock[S Element](x []float64, alpha float64, s []S, q *quick) bool {
	regular := q.kind != quickNone
	for i, v := range s {
		y := float64(v)
		p := float64(alpha * y)
		rest := math.FMA(alpha, y, -p)
		if q.kind != quickNative64 {
			regular = regular && (rest == 0 || q.foldable)
			p = oddFold(p, rest)
		}
		// Below 2^-900 the rest may be lost; a zero factor is always exact.
		m := math.Abs(p)
		regular = regular && (m >= 0x1p-900 && m <= 0x1p1000 || alpha == 0 && m == 0 || y == 0 && m == 0)
		x[i] = p
	}
	return regular
}

// addBlock writes a[i] + sign b[i] to x, exact or rounded to odd (rounded to
// nearest for a point of binary64); false where a sum is not finite or q cannot
// take a folded result.
func addBlock[A, B Element](x []float64, a []A, sign float64, b []B, q *quick) bool {
	regular := q.kind != quickNone
	for i := range x {
		s, t := float64(a[i]), float64(sign*float64(b[i]))
		v := s + t
		regular = regular && math.Abs(v) <= math.MaxFloat64
		if q.kind != quickNative64 {
			rest := twoSumRest(v, s, t)
			regular = regular && (rest == 0 || q.foldable)
			v = oddFold(v, rest)
		}
		x[i] = v
	}
	return regular
}

// twoSumRest returns the exact rest of x = nearest(s + t) (D. E. Knuth, The Art of
// Computer Programming 2, 4.2.2, theorem B).
func twoSumRest(x, s, t float64) float64 {
	z := x - s
	return (s - (x - z)) + (t - z)
}

// store converts finished values.
func store[D Element](dst []D, x []float64) {
	dst = dst[:len(x)]
	for i, v := range x {
		dst[i] = D(v)
	}
}

func sameLength(a, b int) {
	if a != b {
		panic("quant: slices of different length")
	}
}

// holds panics when tensors of D cannot hold the values of the point: they would
// be rounded twice.
func holds[D Element](p *Point) {
	if _, shared := p.Format.(Blocked); shared {
		panic("quant: " + p.Format.String() + " shares scales along an axis: round with RoundTensor")
	}
	fits[D](p)
}

// fits is holds for formats with scales, too.
func fits[D Element](p *Point) {
	var d D
	if _, narrow := any(d).(float32); narrow && !Fits32(p.Format) {
		panic("quant: values of format " + p.Format.String() + " do not fit a slice of float32")
	}
}
