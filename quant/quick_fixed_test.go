package quant

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// TestQuickFixed: the quick rounding of fixed point, alone and by the block, is that
// of the reference, at both ends of the range, around zero and between.
func TestQuickFixed(t *testing.T) {
	quick := 0
	rapid.Check(t, func(t *rapid.T) {
		f, err := NewFixed(rapid.IntRange(1, 20).Draw(t, "integer"), rapid.IntRange(0, 25).Draw(t, "fraction"),
			false, rapid.SampledFrom([]Overflow{Saturate, ToNaN}).Draw(t, "overflow"))
		if err != nil {
			t.Skip(err)
		}
		p := Point{Format: f, Rounding: anyRounding(t)}
		l := f.Limits()
		step := l.MinSubnormal
		base := rapid.SampledFrom([]float64{0, l.Max, l.Lowest, l.Max / 2, -step}).Draw(t, "base")
		x := base + step*math.Ldexp(float64(rapid.IntRange(-64, 64).Draw(t, "steps")), -4)
		if rapid.Bool().Draw(t, "hair") {
			x = math.Nextafter(x, rapid.SampledFrom([]float64{-1e300, 1e300}).Draw(t, "side"))
		}
		if rapid.IntRange(0, 9).Draw(t, "special") == 0 {
			x = rapid.SampledFrom([]float64{math.Inf(1), math.Inf(-1), math.NaN(), math.Copysign(0, -1), 1e300, -1e300, 5e-324}).Draw(t, "x")
		}
		word := rapid.Uint32().Draw(t, "word")
		want, event := p.Round(Exactly(x), word)
		q := newQuick(&p)
		if q.kind == quickNone {
			t.Fatalf("%v has no quick rounding", p)
		}
		quick++
		if got, e := q.round(x, word); !same(got, want) || e != event {
			t.Fatalf("%v: quick %v -> %v %d, want %v %d", p, x, got, e, want, event)
		}
		block := []float64{x}
		var n, c Counts
		c.Count(event)
		w := words{on: true, valid: true, four: [4]uint32{word}}
		if q.block(block, &w, 0, &n) && (!same(block[0], want) || n != c) {
			t.Fatalf("%v: block %v -> %v %+v, want %v %d", p, x, block[0], n, want, event)
		}
	})
	if quick == 0 {
		t.Error("nothing was compared")
	}
}

// TestQuickDraft does it for the draft's formats, every probe of the suite.
func TestQuickDraft(t *testing.T) {
	for _, l := range []*listed{listDraft(t, 8, 4), listDraft(t, 8, 3), listDraft(t, 6, 1), listDraft(t, 4, 3)} {
		for _, r := range suiteRoundings() {
			p := Point{Format: l.format, Rounding: r}
			q := newQuick(&p)
			for i, probe := range l.suiteProbes() {
				if probe.x.Sticky || probe.x.Lo != 0 || probe.x.Hi&(1<<11-1) != 0 {
					continue // no binary64 number
				}
				x, word := toFloat(probe.x), testWords[i%len(testWords)]
				want, event := p.Round(probe.x, word)
				if got, e := q.round(x, word); !same(got, want) || e != event {
					t.Fatalf("%v: quick %v -> %v %d, want %v %d", p, x, got, e, want, event)
				}
				block := []float64{x}
				var n, c Counts
				c.Count(event)
				w := words{on: true, valid: true, four: [4]uint32{word}}
				if q.block(block, &w, 0, &n) && (!same(block[0], want) || n != c) {
					t.Fatalf("%v: block %v -> %v %+v, want %v %d", p, x, block[0], n, want, event)
				}
			}
		}
	}
}
