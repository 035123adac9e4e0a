package trainer

import (
	"fmt"
	"math"

	"ulpine/quant/elementary"
)

// crossEntropy is the softmax cross-entropy, in nats, of logits y and the right
// class t of C. In binary64, classes ascending throughout:
//
//	m = max y        e[c] = exp(y[c] - m)        z = e[0] + e[1] + ...
//	loss = log(z) - (y[t] - m)
//	slope[c] = e[c]/z - (1 if c = t else 0)
//
// With label smoothing s, a binary32 number (C. Szegedy et al.: Rethinking the
// inception architecture for computer vision, CVPR 2016), off = s/C and on = (1-s) +
// off are the targets q[c]:
//
//	loss = log(z) - (q[0] (y[0] - m) + q[1] (y[1] - m) + ...)
//	slope[c] = e[c]/z - q[c]
//
// A NaN or a positive infinity among the logits makes loss and slopes NaN.
type crossEntropy struct{ smoothing float64 }

func newCrossEntropy(t *Training) (lossRule, error) {
	s := single(t.LabelSmoothing)
	if !(s >= 0 && s < 1) {
		return nil, fmt.Errorf("label smoothing is %g; it must be at least 0 and below 1", t.LabelSmoothing)
	}
	return crossEntropy{s}, nil
}

func (crossEntropy) regression() bool { return false }

func (r crossEntropy) example(y []float64, t target, slope []float64) float64 {
	label := t.label
	largest := y[0]
	for _, v := range y[1:] {
		if v > largest || v != v {
			largest = v
		}
	}
	off, on := 0.0, 1.0
	right := y[label] - largest
	if r.smoothing > 0 {
		off, on = r.targets(len(y))
		right = 0
		for c, v := range y {
			q := off
			if c == int(label) {
				q = on
			}
			right += float64(q * (v - largest))
		}
	}
	var z float64
	for c, v := range y {
		y[c] = elementary.Exp(v - largest)
		z += y[c]
	}
	for c := range slope {
		slope[c] = y[c] / z
		if c == int(label) {
			slope[c] -= on
		} else if off > 0 {
			slope[c] -= off
		}
	}
	return elementary.Log(z) - right
}

// targets are those of a wrong and of the right class among so many.
func (r crossEntropy) targets(classes int) (off, on float64) {
	off = r.smoothing / float64(classes)
	return off, (1 - r.smoothing) + off
}

// constant is the entropy, in nats, of the mean target: the least loss of a
// predictor that ignores its input.
func (r crossEntropy) constant(s *split, classes int) float64 {
	counts := make([]uint64, classes)
	for _, label := range s.labels {
		counts[label]++
	}
	var loss float64
	for _, k := range counts {
		share := float64(k) / float64(s.size())
		if r.smoothing > 0 {
			off, on := r.targets(classes)
			share = float64(share*on) + float64((1-share)*off)
		}
		if share > 0 {
			loss -= float64(share * elementary.Log(share))
		}
	}
	return math.Abs(loss) // +0, not -0, for a single class
}
