package trainer

import (
	"ulpine/quant"
	"ulpine/quant/elementary"
)

// Smooth activations round once forward and once backward:
//
//	y  = R[activation](f(x))
//	dx = R[input_gradient.result](dy f'(x))
//
// f and the product dy f' are binary64 values of package elementary's functions,
// every operation of the formulas below rounded to binary64. x and y are the
// layer's input and output as stored; where a slope is written in y it follows
// the rounded output, as a machine that keeps only y has it.
type curve struct {
	value func(x float64) float64
	slope func(x, y float64) float64
}

// tanhKind: f = tanh x, f' = 1 - y^2.
var tanhKind = smoothKind("tanh", curve{elementary.Tanh, func(_, y float64) float64 { return 1 - float64(y*y) }})

// sigmoidKind: f = 1/(1 + exp(-x)), f' = y (1 - y).
var sigmoidKind = smoothKind("sigmoid", curve{elementary.Sigmoid, func(_, y float64) float64 { return float64(y * (1 - y)) }})

// geluKind is the exact form of the Gaussian error linear unit (D. Hendrycks,
// K. Gimpel: Gaussian error linear units, arXiv:1606.08415): with h = erfc(-x/sqrt
// 2)/2, f = x h and f' = h + x exp(-x^2/2)/sqrt(2 pi). 1 + erf(z) is taken as
// erfc(-z), which keeps its figures for negative z.
var geluKind = smoothKind("gelu", curve{gelu, geluSlope})

const (
	rootHalf      = 0.70710678118654752440084436210484903928 // 1/sqrt(2)
	rootTwoPiOver = 0.39894228040143267793994605993438186848 // 1/sqrt(2 pi)
)

// normalShare is the standard normal distribution function.
func normalShare(x float64) float64 {
	return float64(0.5 * elementary.Erfc(float64(-x*rootHalf)))
}

func gelu(x float64) float64 {
	if x < -40 { // erfc is zero there; -Inf times zero would be NaN
		return 0
	}
	return float64(x * normalShare(x))
}

func geluSlope(x, _ float64) float64 {
	if x-x != 0 {
		return normalShare(x) // 0, 1 or NaN
	}
	bell := elementary.Exp(float64(float64(-0.5*x) * x))
	return normalShare(x) + float64(float64(x*bell)*rootTwoPiOver)
}

// smoothKind is the row of a smooth activation.
func smoothKind(name string, f curve) kind {
	return kind{
		name: name, usage: name, parse: parseSmooth,
		build32: func(b *bench[float32]) (layer[float32], error) { return newSmooth(b, f), nil },
		build64: func(b *bench[float64]) (layer[float64], error) { return newSmooth(b, f), nil },
	}
}

func parseSmooth(o *options, s *Spec) error {
	s.Name, s.Out = o.kind.name, s.In
	s.Points = []PointID{ForwardActivation, InputGradientResult}
	return nil
}

type smooth[T quant.Element] struct {
	place
	below, above *edge[T]
	f            curve
	block        []float64
}

func newSmooth[T quant.Element](b *bench[T], f curve) layer[T] {
	return &smooth[T]{b.place, b.below, b.above, f, make([]float64, combineLength)}
}

func (l *smooth[T]) forward(p *pass) {
	x, y := l.below.values(p.samples), l.above.values(p.samples)
	first := l.above.first(p)
	for at := 0; at < len(x); at += combineLength {
		end := min(at+combineLength, len(x))
		block := l.block[:end-at]
		for i, v := range x[at:end] {
			block[i] = l.f.value(float64(v))
		}
		round(l.place, p, ForwardActivation, opActivation, y[at:end], block, &l.set.Activation, first+uint64(at))
	}
}

func (l *smooth[T]) backward(p *pass, below bool) {
	if !below {
		return
	}
	x, y := l.below.values(p.samples), l.above.values(p.samples)
	dy, dx := l.above.gradients(p.samples), l.below.gradients(p.samples)
	for at := 0; at < len(x); at += combineLength {
		end := min(at+combineLength, len(x))
		block := l.block[:end-at]
		for i := range block {
			block[i] = float64(float64(dy[at+i]) * l.f.slope(float64(x[at+i]), float64(y[at+i])))
		}
		round(l.place, p, InputGradientResult, opInputResult, dx[at:end], block, &l.set.InputGradient.Result, uint64(at))
	}
}

func (l *smooth[T]) params() []*param[T] { return nil }
