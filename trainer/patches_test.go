package trainer

import (
	"math/rand/v2"
	"testing"

	"ulpine/quant"
)

// windows are geometries with every trait: strides, padding, kernels that do not
// reach the end, one dimension.
func windows(t *testing.T) []window {
	list := []window{
		{c: 1, h: 1, w: 9, kh: 1, kw: 3, sh: 1, sw: 1},
		{c: 2, h: 1, w: 11, kh: 1, kw: 4, sh: 1, sw: 2, pw: 1},
		{c: 3, h: 6, w: 5, kh: 3, kw: 3, sh: 1, sw: 1, ph: 1, pw: 1},
		{c: 2, h: 7, w: 8, kh: 2, kw: 3, sh: 2, sw: 1, pw: 2},
		{c: 1, h: 7, w: 7, kh: 2, kw: 2, sh: 3, sw: 3},
		{c: 2, h: 5, w: 6, kh: 5, kw: 5, sh: 2, sw: 2, ph: 4, pw: 4},
		{c: 2, h: 4, w: 4, kh: 1, kw: 1, sh: 1, sw: 1},
		{c: 1, h: 9, w: 9, kh: 3, kw: 3, sh: 2, sw: 2},
	}
	for i := range list {
		if err := list[i].place(list[i].h == 1); err != nil {
			t.Fatal(err)
		}
	}
	return list
}

// checkColumns compares every rectangle of Pack, also in wider rows with a mark
// beyond them, and Padded, with the definition.
func checkColumns(t *testing.T, what string, b quant.Columns[float32], rows, columns int, want func(k, j int) (float32, bool)) {
	t.Helper()
	rng := rand.New(rand.NewPCG(1, 2))
	for range 60 {
		k0, j0 := rng.IntN(rows), rng.IntN(columns)
		k1, j1 := k0+1+rng.IntN(rows-k0), j0+1+rng.IntN(columns-j0)
		width := j1 - j0 + rng.IntN(5)
		dst := make([]float32, (k1-k0)*width+3)
		for i := range dst {
			dst[i] = -99
		}
		b.Pack(dst, width, k0, k1, j0, j1)
		for k := k0; k < k1; k++ {
			for j := j0; j < j0+width; j++ {
				var v float32
				if j < j1 {
					v, _ = want(k, j)
				}
				if got := dst[(k-k0)*width+j-j0]; got != v {
					t.Fatalf("%s: B[%d,%d] in rectangle %d:%d, %d:%d is %v, want %v", what, k, j, k0, k1, j0, j1, got, v)
				}
			}
		}
		for _, mark := range dst[(k1-k0)*width:] {
			if mark != -99 {
				t.Fatalf("%s: wrote beyond the rectangle", what)
			}
		}
	}
	for k := range rows {
		for j := range columns {
			if _, ok := want(k, j); b.Padded(k, j) == ok {
				t.Fatalf("%s: padded(%d,%d) is %v", what, k, j, !ok)
			}
		}
	}
}

// numbered is a tensor whose elements tell where they are.
func numbered(n int) []float32 {
	x := make([]float32, n)
	for i := range x {
		x[i] = float32(i + 1)
	}
	return x
}

func TestConvolutionOperandsAreWhatTheyAreDefinedAs(t *testing.T) {
	const samples, units = 3, 2
	for _, g := range windows(t) {
		x, dy := numbered(samples*g.c*g.inner()), numbered(samples*units*g.outer())
		terms, places := g.c*g.size(), samples*g.outer()
		patch := func(k, j int) (float32, bool) {
			c, kr, kc := k/g.size(), k%g.size()/g.kw, k%g.kw
			n, oy, ox := j/g.outer(), j%g.outer()/g.ow, j%g.ow
			y, column := oy*g.sh+kr-g.ph, ox*g.sw+kc-g.pw
			if y < 0 || y >= g.h || column < 0 || column >= g.w {
				return 0, false
			}
			return x[((n*g.c+c)*g.h+y)*g.w+column], true
		}
		f := paddedFrame(x, &g)
		f.fill(samples)
		window, term := outputs(f, &g, samples), kernel(f, &g)
		checkColumns(t, "patches", &windowed[float32]{f, term, window}, terms, places, patch)
		turned := func(k, j int) (float32, bool) { return patch(j, k) }
		checkColumns(t, "turned patches", &windowed[float32]{f, window, term}, places, terms, turned)
		hole := func(k, j int) (float32, bool) {
			o, kr, kc := k/g.size(), k%g.size()/g.kw, k%g.kw
			n, y, column := j/g.inner(), j%g.inner()/g.w, j%g.w
			for oy := range g.oh {
				for ox := range g.ow {
					if oy*g.sh+kr-g.ph == y && ox*g.sw+kc-g.pw == column {
						return dy[((n*units+o)*g.oh+oy)*g.ow+ox], true
					}
				}
			}
			return 0, false
		}
		d := dilatedFrame(dy, units, &g)
		d.fill(samples)
		checkColumns(t, "holes", &windowed[float32]{d, turnedKernel(d, &g), inputs(d, &g, samples)}, units*g.size(), samples*g.inner(), hole)
	}
}

// TestPoolGradientTermsAscend lists, for every input, the windows over it in
// ascending order of outputs and compares them with the terms that are not padding.
func TestPoolGradientTermsAscend(t *testing.T) {
	for _, g := range windows(t) {
		if g.ph+g.pw > 0 {
			continue // pools take no padding
		}
		const planes = 2
		g = g.perChannel()
		dy := numbered(planes * g.outer())
		b := &covering[float32]{dy: dy, g: g}
		terms := make([][]float32, planes*g.inner())
		for out, v := range dy {
			plane, oy, ox := out/g.outer(), out%g.outer()/g.ow, out%g.ow
			for r := range g.kh {
				for c := range g.kw {
					in := (plane*g.h+oy*g.sh+r)*g.w + ox*g.sw + c
					terms[in] = append(terms[in], v)
				}
			}
		}
		for j, want := range terms {
			var got []float32
			column := make([]float32, g.covers())
			b.Pack(column, 1, 0, g.covers(), j, j+1)
			for k, v := range column {
				if !b.Padded(k, j) {
					got = append(got, v)
				} else if v != 0 {
					t.Fatalf("padding of input %d holds %v", j, v)
				}
			}
			if len(got) != len(want) {
				t.Fatalf("%+v: input %d has terms %v, want %v", g, j, got, want)
			}
			for i := range got {
				if got[i] != want[i] {
					t.Fatalf("%+v: input %d has terms %v, want %v", g, j, got, want)
				}
			}
		}
	}
}
