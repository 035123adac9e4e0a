package trainer

import "ulpine/quant/elementary"

// crossEntropy is the softmax cross-entropy, in nats, of logits y and the right
// class t. In binary64, classes ascending throughout:
//
//	m = max y        e[c] = exp(y[c] - m)        z = e[0] + e[1] + ...
//	loss = log(z) - (y[t] - m)
//	slope[c] = e[c]/z - (1 if c = t else 0)
//
// A NaN or a positive infinity among the logits makes loss and slopes NaN.
type crossEntropy struct{}

func (crossEntropy) example(y []float64, label int32, slope []float64) float64 {
	largest := y[0]
	for _, v := range y[1:] {
		if v > largest || v != v {
			largest = v
		}
	}
	right := y[label] - largest
	var z float64
	for c, v := range y {
		y[c] = elementary.Exp(v - largest)
		z += y[c]
	}
	for c := range slope {
		slope[c] = y[c] / z
		if c == int(label) {
			slope[c]--
		}
	}
	return elementary.Log(z) - right
}
