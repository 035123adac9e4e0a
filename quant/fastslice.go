package quant

import "ulpine/quant/internal/kernel"

// borrowRounder returns a rounder of the kernels for a quick rounding into slices of
// D, nil where there is none.
func borrowRounder[D Element](q *quick) *kernel.Rounder {
	var d D
	if _, narrow := any(d).(float32); !narrow || q.oneZero {
		return nil
	}
	s := kernel.Sum{Grid: q.grid()}
	switch q.kind {
	case quickNearest, quickNative32:
		s.Kind = kernel.NearestSum
	case quickStochastic:
		s.Kind, s.Bits, s.Centred = kernel.StochasticSum, int(q.random), q.point.Rounding.Variant == Centred
	default:
		return nil
	}
	return kernel.Borrow(s)
}

// fastSlice is an elementwise operation on its way through a rounder, if there is one.
type fastSlice[D Element] struct {
	rounder *kernel.Rounder
	counts  *Counts
}

func newFastSlice[D Element](q *quick, n *Counts) fastSlice[D] {
	return fastSlice[D]{borrowRounder[D](q), n}
}

// end gives the rounder back.
func (f fastSlice[D]) end() {
	if f.rounder != nil {
		kernel.Return(f.rounder)
	}
}

// did counts what became zero.
func (f fastSlice[D]) did(done, lost int) int {
	if f.counts != nil {
		f.counts.Underflow += uint64(lost)
	}
	return done
}

// fastRound is RoundSlice up to the first block that the rounder leaves alone.
func fastRound[D, S Element](f fastSlice[D], dst []D, src []S, d Draws, first uint64) int {
	if f.rounder == nil {
		return 0
	}
	to := any(dst).([]float32)
	switch s := any(src).(type) {
	case []float32:
		return f.did(f.rounder.Round(to, s, d, first))
	case []float64:
		return f.did(f.rounder.RoundWide(to, s, d, first))
	}
	return 0
}

// fastScale is ScaleSlice up to the first block that the rounder leaves alone.
func fastScale[D, S Element](f fastSlice[D], dst []D, alpha float64, src []S, d Draws, first uint64) int {
	if f.rounder == nil {
		return 0
	}
	return f.did(kernel.Scale(f.rounder, any(dst).([]float32), alpha, src, d, first))
}

// fastAdd is addScaled up to the first block that the rounder leaves alone.
func fastAdd[D, A, B Element](f fastSlice[D], dst []D, a []A, sign float64, b []B, d Draws, first uint64) int {
	if f.rounder == nil {
		return 0
	}
	return f.did(kernel.Add(f.rounder, any(dst).([]float32), a, sign, b, d, first))
}
