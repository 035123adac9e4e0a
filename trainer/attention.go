package trainer

import (
	"fmt"
	"math"
)

// attentionKind is self-attention over the positions of an input [channels, length]
// (A. Vaswani et al.: Attention is all you need, arXiv:1706.03762, section 3.2): width
// channels of queries q, keys k and values v, cut into heads in turn, D = width/heads
// channels each. With i the position that asks and j the one that is asked,
//
//	q, k, v  = R[activation](weight x + bias)          one product, 3 width units
//	a[j,i]   = sum over the head's channels of k[.,j] q[.,i]
//	s[j,i]   = R[activation](c a[j,i])                 c = 1/sqrt(D), the product exact
//	e[j,i]   = R[activation](exp(s[j,i] - m))          m the largest s of i
//	t[i]     = sum over j of e[j,i]                    at forward.statistic
//	p[j,i]   = R[activation](e[j,i]/t[i])              the quotient exact
//	o[.,i]   = R[activation](sum over j of v[.,j] p[j,i])
//	y        = R[activation](output_weight o + output_bias)
//
// the sums of products at the forward points, terms ascending; c is a binary32 number;
// the difference and the exponential are binary64 values. With mask=causal only j up to
// i exist: nothing is formed for the others, and their terms are padding. Operands of
// the two products of activations are as stored, or R[forward.operand] of that.
//
// Back, the gradients of o, then of p (dp), v, s, q and k are, rounded once a line
// unless said otherwise,
//
//	dp[j,i]  = R[result](sum over channels of v[.,j] do[.,i])
//	dv[.,j]  = R[result](sum over i of do[.,i] p[j,i])
//	g[i]     = sum over j of p[j,i] dp[j,i]            at input_gradient.statistic
//	u        = R[result](dp - g)
//	w        = R[result](p u)                          the gradient of s
//	da       = R[result](c w)
//	dq[.,i]  = R[result](sum over j of k[.,j] da[j,i])
//	dk[.,j]  = R[result](sum over i of q[.,i] da[j,i])
//
// at the points of the input gradient. Operands of the four products: do and da, or
// R[input_gradient.gradient] of them, once a tensor; v, p, k and q as in the forward
// products. input_gradient.weight is for the matrices alone. The gradients of weights
// and biases are those of convolutions of width 1, one sum over sample, then position.
//
// In a, o, dp, dv, dq, dk the left-hand operands, whose rows are rows of the result,
// are k, v, v, do, k, q, the right-hand ones q, p, do, p, da, da. Rows count within the
// head, columns as (sample heads + head) length + position. Formats with shared scales
// are rounded anew for each product, along its terms: the tensor is the operand of one
// head of one example, its elements count row by row, or column by column, terms
// running fastest, behind those of the heads before. Stored tensors are [sample, 3
// width, length], q before k before v, [sample, heads, j, i] and [sample, width,
// length]. Random words come from a key for each part: 0 the product of q, k, v, 1 that
// of the output, 2 to 7 a, o, dp, dv, dq, dk; the softmax draws under 2, back under 4,
// the gradients of q, k, v are rounded under 6, and operands of one rounding under 2 (q,
// k, v), 3 (p), 4 (do) and 6 (da).
var attentionKind = kind{
	name: "attention", usage: "attention heads=2 width=16 mask=causal", parse: parseAttention,
	build32: newAttention[float32], build64: newAttention[float64],
}

// The masks.
const (
	noMask = "none"
	causal = "causal"
)

func parseAttention(o *options, s *Spec) error {
	if len(s.In) != 2 {
		return fmt.Errorf("attention needs an input of channels x length; give a plain signal one channel, 1x%d, and a convolution", volume(s.In))
	}
	channels, length := s.In[0], s.In[1]
	heads, err := o.number("heads", 1, 1)
	if err != nil {
		return err
	}
	width, err := o.number("width", 1, channels)
	if err != nil {
		return err
	}
	mask, err := o.word("mask", noMask, causal)
	if err != nil {
		return err
	}
	if width%heads != 0 {
		return fmt.Errorf("heads=%d does not divide a width of %d; use a divisor", heads, width)
	}
	if width > maxElements/3/length || length > maxElements/length/heads {
		return fmt.Errorf("a width of %d, or scores of %d heads, at %d positions are more than %d values; use strides or pools below", width, heads, length, maxElements)
	}
	s.Name = fmt.Sprintf("attention heads=%d width=%d mask=%s", heads, width, mask)
	s.Out, s.heads, s.causal = s.In, heads, mask == causal
	s.number = single(1 / math.Sqrt(float64(width/heads)))
	s.Params = []ParamSpec{
		{Name: "weight", Shape: []int{3 * width, channels}, FanIn: channels},
		{Name: "bias", Shape: []int{3 * width}},
		{Name: "output_weight", Shape: []int{channels, width}, FanIn: width},
		{Name: "output_bias", Shape: []int{channels}},
	}
	s.Points = append(append([]PointID{}, productPoints...), ForwardStatistic, InputGradientStatistic)
	s.countAttention(width)
	return nil
}

// countAttention fills in lengths of sums and work.
func (s *Spec) countAttention(width int) {
	channels, length, heads := s.In[0], s.In[1], s.heads
	longest := max(length, width/heads, channels)
	s.Sums = Lengths{Forward: max(longest, width), InputGradient: max(longest, 3*width), WeightGradient: length, BiasGradient: length}
	pairs := uint64(length) * uint64(length)
	if s.causal {
		pairs = (pairs + uint64(length)) / 2
	}
	w, c, l := uint64(width), uint64(channels), uint64(length)
	one := pairs * w // each of the products of activations
	softmax := pairs * uint64(heads)
	s.MACs = Work{Forward: 4*w*c*l + 2*one + softmax, InputGradient: 4*w*c*l + 4*one + softmax, WeightGradient: 4 * w * c * l}
	s.Inner = Inner{
		Values: 4*w*l + 3*softmax, Gradients: 4*w*l + 4*softmax,
		Operands: (c+4*w)*l + softmax, Activations: (c + w) * l, Slopes: (c + 3*w) * l, Pulled: (c+w)*l + softmax, PulledInputs: 3 * w * l,
		Back: longest, BackMACs: w*c*l + 4*one + softmax,
	}
}
