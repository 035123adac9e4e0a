package trainer

import (
	"testing"

	"ulpine/quant"
)

// stochasticLayer builds a layer whose sums are stochastic E6M9 and whose stored
// tensors are binary32, and the oracle that goes with it.
func stochasticLayer(t *testing.T, input []int, text string, samples int) (*oracle, *pass, layer[float32], *edge[float32], *edge[float32]) {
	o := &oracle{stored: point(t, "fp32"), inside: stochastic(t, "E6M9", 7), seed: 1234, step: 8}
	arm := Everything(o.stored, 1, 0)
	sums := quant.Accumulate{Product: &o.inside, Sum: o.inside}
	a := &arm.Layers[0]
	a.Forward, a.InputGradient.Sums, a.WeightGradient.Sums = sums, sums, sums
	l, below, above := bareLayer(t, arm, input, text, samples)
	copy(below.value.data, uniform(len(below.value.data), 1))
	copy(above.gradient.data, uniform(len(above.gradient.data), 2))
	return o, &pass{seed: o.seed, step: o.step, samples: samples}, l, below, above
}

// TestConvolutionWordsHaveTheirAddresses recomputes the three products of a
// padded, strided convolution term by term: i, j, k of every random word.
func TestConvolutionWordsHaveTheirAddresses(t *testing.T) {
	const samples, cin, h, w, cout, kh, kw, sh, sw, ph, pw = 2, 2, 5, 4, 3, 3, 2, 2, 1, 1, 0
	o, p, l, below, above := stochasticLayer(t, []int{cin, h, w}, "conv2d out=3 size=3x2 stride=2x1 pad=1x0", samples)
	const oh, ow = (h+2*ph-kh)/sh + 1, (w+2*pw-kw)/sw + 1
	weight, bias := l.params()[0], l.params()[1]
	copy(weight.working.data, uniform(len(weight.working.data), 3))
	copy(bias.working.data, uniform(cout, 4))
	x, dy := below.value.data, above.gradient.data
	at := func(n, c, y, col int) (float64, bool) {
		if y < 0 || y >= h || col < 0 || col >= w {
			return 0, false
		}
		return float64(x[((n*cin+c)*h+y)*w+col]), true
	}
	// each visits the terms of output (oy, ox) in order: kernel term and input.
	each := func(oy, ox int, f func(k, c, y, col int)) {
		for k := range cin * kh * kw {
			f(k, k/(kh*kw), oy*sh-ph+k/kw%kh, ox*sw-pw+k%kw)
		}
	}

	const first = 5 // as in an evaluation that starts at example 5
	p.first = first
	l.forward(p)
	for e, got := range above.value.data {
		n, u, oy, ox := e/(cout*oh*ow), e/(oh*ow)%cout, e/ow%oh, e%ow
		var list []term
		each(oy, ox, func(k, c, y, col int) {
			if v, ok := at(n, c, y, col); ok {
				list = append(list, term{k, float64(weight.working.data[u*cin*kh*kw+k]), v})
			}
		})
		j := (first+n)*oh*ow + oy*ow + ox
		s := o.sum(list, 0, 4, 6, u, j)
		s = o.insideSum(quant.Exactly(s).Add(quant.Exactly(float64(bias.working.data[u]))), 0, 6, cin*kh*kw, u, j)
		if float64(got) != s {
			t.Fatalf("output %d is %v, want %v", e, got, s)
		}
	}

	p.first = 0
	l.backward(p, true)
	gradient := func(n, u, oy, ox int) float64 { return float64(dy[((n*cout+u)*oh+oy)*ow+ox]) }
	for u := range cout {
		lists := make([][]term, cin*kh*kw)
		var all []term
		for k := range samples * oh * ow { // sample, then output position
			n, oy, ox := k/(oh*ow), k/ow%oh, k%ow
			g := gradient(n, u, oy, ox)
			all = append(all, term{k: k, a: g})
			each(oy, ox, func(j, c, y, col int) {
				if v, ok := at(n, c, y, col); ok {
					lists[j] = append(lists[j], term{k, g, v})
				}
			})
		}
		for j, list := range lists {
			if got, want := float64(weight.gradient.data[u*len(lists)+j]), o.sum(list, 0, 64+2, 64+4, u, j); got != want {
				t.Fatalf("weight gradient %d of unit %d is %v, want %v", j, u, got, want)
			}
		}
		if got, want := float64(bias.gradient.data[u]), o.sum(all, 0, 0, 128+4, u, 0); got != want {
			t.Fatalf("bias gradient of unit %d is %v, want %v", u, got, want)
		}
	}

	lists := make([][]term, len(x))
	for u := range cout { // output channel, kernel row, kernel column
		for kernel := range kh * kw {
			for e := range samples * oh * ow {
				n, oy, ox := e/(oh*ow), e/ow%oh, e%ow
				y, col := oy*sh-ph+kernel/kw, ox*sw-pw+kernel%kw
				for c := range cin {
					if _, ok := at(n, c, y, col); ok {
						in := ((n*cin+c)*h+y)*w + col
						weightAt := float64(weight.working.data[(u*cin+c)*kh*kw+kernel])
						lists[in] = append(lists[in], term{u*kh*kw + kernel, weightAt, gradient(n, u, oy, ox)})
					}
				}
			}
		}
	}
	for in, list := range lists {
		n, c, position := in/(cin*h*w), in/(h*w)%cin, in%(h*w)
		if got, want := float64(below.gradient.data[in]), o.sum(list, 0, 9, 11, c, n*h*w+position); got != want {
			t.Fatalf("input gradient %d is %v, want %v", in, got, want)
		}
	}
}

// TestPoolWordsHaveTheirAddresses does the same for the sums of pools: row 0,
// the column is the element's number, terms count windows or window places.
func TestPoolWordsHaveTheirAddresses(t *testing.T) {
	const samples, c, h, w, size, stride = 2, 2, 5, 5, 3, 2
	const oh, ow, first = 2, 2, 3
	o, p, l, below, above := stochasticLayer(t, []int{c, h, w}, "avgpool size=3 stride=2", samples)
	p.first = first
	l.forward(p)
	for e, got := range above.value.data {
		plane, oy, ox := e/(oh*ow), e/ow%oh, e%ow
		var list []term
		for k := range size * size {
			v := below.value.data[(plane*h+oy*stride+k/size)*w+ox*stride+k%size]
			list = append(list, term{k: k, a: float64(v)})
		}
		s := o.sum(list, 0, 0, 6, 0, first*c*oh*ow+e)
		if want, _ := o.stored.Round(quant.ExactQuotient(s, size*size), 0); float64(got) != want {
			t.Fatalf("output %d is %v, want %v", e, got, want)
		}
	}

	p.first = 0
	l.backward(p, true)
	for e, got := range below.gradient.data {
		plane, y, x := e/(h*w), e/w%h, e%w
		var list []term
		for k := range 4 { // two windows reach an input along each axis
			oy, ox := y/stride-1+k/2, x/stride-1+k%2
			if oy < 0 || ox < 0 || oy >= oh || ox >= ow || y-oy*stride >= size || x-ox*stride >= size {
				continue
			}
			list = append(list, term{k: k, a: float64(above.gradient.data[(plane*oh+oy)*ow+ox])})
		}
		s := o.sum(list, 0, 0, 11, 0, e)
		if want, _ := o.stored.Round(quant.ExactQuotient(s, size*size), 0); float64(got) != want {
			t.Fatalf("input gradient %d is %v, want %v", e, got, want)
		}
	}
}
