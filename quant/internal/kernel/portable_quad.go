package kernel

// The loops of the modes that are most in use, for four terms at a time: a sum is
// loaded and stored once for all of them. That gains nothing where each term takes
// more operations, as in both (measured on amd64).

// quad is four terms of one row: b holds their columns one after another.
type quad[L lanes] func(c *numbers[L], s, b []L, a [4]L)

// quadBaseline is termBaseline.
func quadBaseline[L lanes](_ *numbers[L], s, b []L, a [4]L) {
	w := len(s)
	b0, b1, b2, b3 := b[:w], b[w:][:w], b[2*w:][:w], b[3*w:][:w]
	for j, v := range s {
		v += L(a[0] * b0[j])
		v += L(a[1] * b1[j])
		v += L(a[2] * b2[j])
		s[j] = v + L(a[3]*b3[j])
	}
}

// quadRounded is termRounded.
func quadRounded(c *numbers[float32], s, b []float32, a [4]float32) {
	w, least, grow := len(s), c.least, c.grow
	b0, b1, b2, b3 := b[:w], b[w:][:w], b[2*w:][:w], b[3*w:][:w]
	for j, v := range s {
		v += near32(float32(a[0]*b0[j]), least, grow)
		v += near32(float32(a[1]*b1[j]), least, grow)
		v += near32(float32(a[2]*b2[j]), least, grow)
		s[j] = v + near32(float32(a[3]*b3[j]), least, grow)
	}
}
