package trainer

import (
	"math"
	"testing"
)

// TestGradientsAgreeWithFiniteDifferences holds every layer's backward pass to
// central differences of the loss, everything in binary64. Each layer kind
// stands above a layer with weights, so its input gradient is tested too.
func TestGradientsAgreeWithFiniteDifferences(t *testing.T) {
	cases := []struct {
		name   string
		input  []int
		layers []string
	}{
		{"dense", []int{5}, []string{"dense 4", "dense 3"}},
		{"relu", []int{5}, []string{"dense 6", "relu", "dense 3"}},
		{"leaky relu", []int{5}, []string{"dense 6", "leakyrelu slope=0.1", "dense 3"}},
		{"tanh", []int{5}, []string{"dense 6", "tanh", "dense 3"}},
		{"sigmoid", []int{5}, []string{"dense 6", "sigmoid", "dense 3"}},
		{"gelu", []int{5}, []string{"dense 6", "gelu", "dense 3"}},
		{"dropout", []int{5}, []string{"dense 12", "dropout 0.3", "dense 3"}},
		{"global average", []int{2, 5, 4}, []string{"conv2d out=3 size=2", "globalavgpool", "dense 3"}},
		{"global average of a length", []int{2, 9}, []string{"conv1d out=3 width=2", "globalavgpool", "dense 3"}},
		{"residual", []int{5}, []string{"dense 4", "residual begin", "dense 6", "tanh", "dense 4", "residual end", "dense 3"}},
		{"nested residuals", []int{5}, []string{"dense 4", "residual begin", "tanh", "residual begin", "dense 4", "residual end", "sigmoid", "residual end", "dense 3"}},
		{"layer norm", []int{5}, []string{"dense 6", "layernorm", "dense 3"}},
		{"layer norm on a plane", []int{2, 9}, []string{"conv1d out=3 width=3", "layernorm", "dense 3"}},
		{"batch norm", []int{5}, []string{"dense 6", "tanh", "batchnorm", "sigmoid", "dense 3"}},
		{"batch norm on planes", []int{2, 5, 4}, []string{"conv2d out=3 size=2", "tanh", "batchnorm epsilon=1e-3", "dense 3"}},
		{"dense on a plane flattens", []int{2, 3}, []string{"dense 4", "relu", "dense 3"}},
		{"conv1d", []int{2, 11}, []string{"conv1d out=3 width=3", "conv1d out=2 width=4 stride=2 pad=1", "dense 3"}},
		{"conv2d", []int{2, 6, 5}, []string{"conv2d out=3 size=3 pad=1", "conv2d out=2 size=2x3 stride=2x1 pad=0x2", "flatten", "dense 3"}},
		{"conv2d 1x1 and strides beyond the kernel", []int{1, 7, 7}, []string{"conv2d out=2 size=1", "conv2d out=3 size=2 stride=3", "dense 3"}},
		{"conv to a single position", []int{2, 3, 3}, []string{"conv2d out=4 size=3", "relu", "conv2d out=3 size=1"}},
		{"dilated conv1d", []int{2, 13}, []string{"conv1d out=2 width=3 dilation=2 pad=1", "conv1d out=3 width=3 dilation=3 stride=2 pad=2", "dense 3"}},
		{"dilated conv2d", []int{2, 8, 9}, []string{"conv2d out=2 size=2 dilation=3", "conv2d out=2 size=2x3 stride=2x1 pad=1x3 dilation=3x2", "dense 3"}},
		{"grouped conv2d", []int{4, 6, 5}, []string{"conv2d out=6 size=3 pad=1 groups=2", "conv2d out=4 size=2 groups=2 dilation=2", "dense 3"}},
		{"depthwise conv1d", []int{3, 9}, []string{"conv1d out=3 width=3 groups=3", "conv1d out=6 width=3 groups=3 stride=2", "dense 3"}},
		{"groups of one position", []int{4, 3, 3}, []string{"conv2d out=4 size=1", "conv2d out=6 size=3 groups=2", "dense 3"}},
		{"maxpool", []int{1, 6, 7}, []string{"conv2d out=2 size=2", "maxpool size=2", "dense 3"}},
		{"maxpool overlapping", []int{1, 7, 7}, []string{"conv2d out=2 size=1", "maxpool size=3 stride=2", "dense 3"}},
		{"maxpool overlapping one way", []int{1, 5, 8}, []string{"conv2d out=2 size=1", "maxpool size=2x3 stride=3x1", "dense 3"}},
		{"maxpool along a length", []int{2, 9}, []string{"conv1d out=2 width=2", "maxpool size=3 stride=1", "dense 3"}},
		{"avgpool", []int{1, 7, 7}, []string{"conv2d out=2 size=2", "avgpool size=3", "dense 3"}},
		{"avgpool overlapping", []int{2, 7, 6}, []string{"conv2d out=2 size=1", "avgpool size=3 stride=2x1", "dense 3"}},
		{"avgpool along a length", []int{2, 9}, []string{"conv1d out=2 width=2", "avgpool size=3 stride=2", "dense 3"}},
		{"attention", []int{2, 6}, []string{"conv1d out=4 width=2", "attention", "dense 3"}},
		{"attention heads", []int{3, 5}, []string{"attention heads=3 width=6", "conv1d out=4 width=2", "attention heads=2", "dense 3"}},
		{"causal attention", []int{2, 6}, []string{"conv1d out=3 width=2", "residual begin", "attention width=4 heads=2 mask=causal", "residual end", "dense 3"}},
		{"attention of one position", []int{3, 1}, []string{"conv1d out=2 width=1", "attention mask=causal", "dense 3"}},
		{"recurrent", []int{2, 6}, []string{"conv1d out=3 width=2", "recurrent units=4", "dense 3"}},
		{"recurrent, all states", []int{2, 5}, []string{"recurrent units=3 output=all", "recurrent units=4 output=all", "dense 3"}},
		{"recurrent of one column", []int{3, 1}, []string{"conv1d out=3 width=1", "recurrent units=3", "dense 3"}},
		{"gated", []int{2, 6}, []string{"conv1d out=3 width=2", "recurrent units=4 cell=gru", "dense 3"}},
		{"gated, all states", []int{2, 5}, []string{"recurrent units=3 cell=gru output=all", "recurrent units=4 cell=gru output=all", "dense 3"}},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) { checkGradients(t, c.input, c.layers) })
	}
}

func checkGradients(t *testing.T, input []int, layers []string) {
	net := network(t, input, layers...)
	job := Job{
		Network: net, Arm: Everything(point(t, "fp64"), len(layers), 1), Training: sgdTraining(3, 1), Seed: 7,
		Train: dataset(3, input, net.Outputs(), 11),
	}
	e := engineFor[float64](t, &job)
	for _, q := range e.params {
		if q.fanIn == 0 { // biases that are zero would leave their gradients' effect untested
			for i, v := range uniform(len(q.master.data), 3) {
				q.master.data[i] = float64(v) / 4
			}
		}
		copy(q.working.data, q.master.data)
	}
	batch := []int32{0, 1, 2}
	loss := func() float64 {
		e.pass.samples = 3
		y := e.forward(&e.pass, e.fetch(batch))
		return e.judge.losses(0, y, e.truths(3)) / 3
	}
	loss()
	_, slopes := e.judge.errors(e.outputs(3), e.truths(3), 1)
	e.backward(&e.pass, slopes)

	// h balances truncation (h^2) against rounding (2^-52/h): errors near 1e-10.
	const h, bound = 1e-5, 1e-7
	for _, q := range e.params {
		if q.fixed {
			continue
		}
		gradient := append([]float64(nil), q.gradient.data...)
		largest := 0.0
		for i := range q.working.data {
			w := q.working.data[i]
			q.working.data[i] = w + h
			up := loss()
			q.working.data[i] = w - h
			down := loss()
			q.working.data[i] = w
			numeric := (up - down) / (2 * h)
			if diff := math.Abs(gradient[i] - numeric); diff > bound*(math.Abs(numeric)+1e-2) {
				t.Errorf("%s[%d]: gradient %.12g, finite difference %.12g", paramName(q.layer, q.name), i, gradient[i], numeric)
			}
			largest = max(largest, math.Abs(numeric))
		}
		if largest < 1e-4 {
			t.Errorf("%s: all gradients below %g; the test would see nothing", paramName(q.layer, q.name), largest)
		}
	}
}
