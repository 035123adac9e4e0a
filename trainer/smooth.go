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
var tanhKind = smoothKind("tanh", tanhCurve)

// sigmoidKind: f = 1/(1 + exp(-x)), f' = y (1 - y).
var sigmoidKind = smoothKind("sigmoid", sigmoidCurve)

// geluKind is the exact form of the Gaussian error linear unit (D. Hendrycks,
// K. Gimpel: Gaussian error linear units, arXiv:1606.08415): with h = erfc(-x/sqrt
// 2)/2, f = x h and f' = h + x exp(-x^2/2)/sqrt(2 pi). 1 + erf(z) is taken as
// erfc(-z), which keeps its figures for negative z.
var geluKind = smoothKind("gelu", curve{gelu, geluSlope})

// The curves that recurrent cells bend by as well.
var (
	tanhCurve    = curve{elementary.Tanh, func(_, y float64) float64 { return 1 - float64(y*y) }}
	sigmoidCurve = curve{elementary.Sigmoid, func(_, y float64) float64 { return float64(y * (1 - y)) }}
)

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
	bend(l.place, p, &l.f, l.above.values(p.samples), l.below.values(p.samples), l.block, l.above.first(p))
}

// bend writes R[activation](f(x)) to y, whose element 0 is number first.
func bend[T quant.Element](pl place, p *pass, f *curve, y, x []T, scratch []float64, first uint64) {
	for at := 0; at < len(x); at += combineLength {
		end := min(at+combineLength, len(x))
		block := scratch[:end-at]
		for i, v := range x[at:end] {
			block[i] = f.value(float64(v))
		}
		round(pl, p, ForwardActivation, opActivation, y[at:end], block, &pl.set.Activation, first+uint64(at))
	}
}

func (l *smooth[T]) backward(p *pass, below bool) {
	if !below {
		return
	}
	x, y := l.below.values(p.samples), l.above.values(p.samples)
	unbend(l.place, p, &l.f, opInputResult, l.below.gradients(p.samples), l.above.gradients(p.samples), x, y, l.block)
}

// unbend writes R[input_gradient.result](dy f'(x)) to dx.
func unbend[T quant.Element](pl place, p *pass, f *curve, o operation, dx, dy, x, y []T, scratch []float64) {
	for at := 0; at < len(y); at += combineLength {
		end := min(at+combineLength, len(y))
		block := scratch[:end-at]
		for i := range block {
			block[i] = float64(float64(dy[at+i]) * f.slope(float64(x[at+i]), float64(y[at+i])))
		}
		round(pl, p, InputGradientResult, o, dx[at:end], block, &pl.set.InputGradient.Result, uint64(at))
	}
}

func (l *smooth[T]) params() []*param[T] { return nil }
