package quant

import "ulpine/quant/internal/kernel"

// fast forms products with the kernels, where all points have kernels; what those
// hand back, and all other arithmetic, is left to the engine.
type fast struct {
	kernel *kernel.Multiplier
}

// newFast returns the fast path of acc for tensors of float32, nil where there is
// none.
func newFast[T Element](acc Accumulate) *fast {
	var t T
	if _, narrow := any(t).(float32); !narrow {
		return nil
	}
	a, ok := kernelArithmetic(acc)
	if !ok {
		return nil
	}
	k := kernel.New(a)
	if k == nil {
		return nil
	}
	return &fast{kernel: k}
}

// kernelArithmetic translates an accumulation; false where the kernels lack a
// part of it.
func kernelArithmetic(acc Accumulate) (a kernel.Arithmetic, ok bool) {
	switch acc.Order.Kind {
	case Sequential:
	case Chunk:
		a.Chunk = acc.Order.K
	default:
		return a, false
	}
	if acc.Product != nil {
		q := newQuick(acc.Product)
		switch q.kind {
		case quickNative32:
			a.Product = kernel.NativeProduct
		case quickNearest:
			a.Product, a.Grid = kernel.RoundedProduct, q.grid()
		default:
			return a, false
		}
	}
	if a.Sum, ok = kernelSum(&acc.Sum, acc.Through32); !ok {
		return a, false
	}
	a.Outer = a.Sum
	if acc.Outer != nil {
		a.Outer, ok = kernelSum(acc.Outer, acc.Through32)
	}
	return a, ok
}

// grid is the format of q as the kernels see it.
func (q *quick) grid() kernel.Grid {
	return kernel.Grid{Fraction: q.fraction, MinExponent: q.emin, Max: q.max}
}

// kernelSum translates the rounding of additions.
func kernelSum(p *Point, through32 bool) (s kernel.Sum, ok bool) {
	q := newQuick(p)
	s = kernel.Sum{Grid: q.grid(), Through: through32}
	switch q.kind {
	case quickNative32:
		s.Kind = kernel.NativeSum
	case quickNearest:
		s.Kind = kernel.NearestSum
	case quickStochastic:
		s.Kind, s.Bits, s.Centred = kernel.StochasticSum, int(q.random), p.Rounding.Variant == Centred
	default:
		return s, false
	}
	return s, true
}

// mulFast forms the product with the kernels; false where they do not serve.
func (m *Multiplier[T]) mulFast(p *Product[T], products, sums *Counts) bool {
	narrow, ok := any(p).(*Product[float32])
	if m.fast == nil || !ok || p.Scale != nil {
		return false
	}
	m.fast.kernel.Mul(&kernel.Product[float32]{
		I: p.I, J: p.J, K: p.K, A: narrow.A.Data, ARow: p.A.Row, ACol: p.A.Col, B: narrow.B, C: narrow.C,
		Bias: narrow.Bias, Sums: kernel.Streams(p.Sums), FirstJ: uint32(p.FirstJ),
	}, func(i0, i1, j0, j1 int) {
		b := block[T]{Multiplier: m, p: p, j0: j0, width: j1 - j0, products: products, sums: sums}
		b.formRows(i0, i1)
	})
	return true
}

// formRows forms rows i0 <= i < i1 of the block in the engine or in exact reals.
func (b *block[T]) formRows(i0, i1 int) {
	p := b.p
	b.slab = grown(b.slab, p.K*b.width)
	p.B.Pack(b.slab, b.width, 0, p.K, b.j0, b.j0+b.width)
	b.line = grown(b.line, p.K)
	for i := i0; i < i1; i++ {
		for k := range b.line {
			b.line[k] = p.A.At(i, k)
		}
		to := p.C[i*p.J+b.j0:][:b.width]
		if !b.engineRow(to, i) {
			b.referenceRow(to, i)
		}
	}
}
