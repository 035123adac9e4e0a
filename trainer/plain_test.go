package trainer

import (
	"testing"

	"ulpine/quant/elementary"
)

// plainNet is conv1d -> relu -> dense with momentum, in nothing but float32
// loops: an independent account of the baseline. Products are rounded, then added.
type plainNet struct {
	cin, l, cout, width, stride, pad, lo int
	classes                              int
	w, b, d, e                           []float32 // kernel, its bias, dense weight, its bias
	vw, vb, vd, ve                       []float32
	rate, momentum                       float32
}

// step trains on inputs [n][cin][l] and returns the mean loss.
func (p *plainNet) step(x []float32, labels []int32) float64 {
	n := len(labels)
	hidden := p.cout * p.lo
	pre, act := make([]float32, n*hidden), make([]float32, n*hidden)
	p.convolve(pre, x, n)
	for i, v := range pre {
		if v > 0 {
			act[i] = v
		}
	}
	y := make([]float32, n*p.classes)
	for s := range n {
		for c := range p.classes {
			var sum float32
			for h := range hidden {
				sum += float32(p.d[c*hidden+h] * act[s*hidden+h])
			}
			y[s*p.classes+c] = sum + p.e[c]
		}
	}
	dy, loss := p.loss(y, labels)
	p.backward(x, pre, act, dy, n)
	return loss
}

func (p *plainNet) convolve(pre, x []float32, n int) {
	for s := range n {
		for o := range p.cout {
			for t := range p.lo {
				var sum float32
				for c := range p.cin {
					for k := range p.width {
						if at := t*p.stride + k - p.pad; at >= 0 && at < p.l {
							sum += float32(p.w[(o*p.cin+c)*p.width+k] * x[(s*p.cin+c)*p.l+at])
						}
					}
				}
				pre[(s*p.cout+o)*p.lo+t] = sum + p.b[o]
			}
		}
	}
}

func (p *plainNet) loss(y []float32, labels []int32) (dy []float32, loss float64) {
	n := len(labels)
	dy = make([]float32, len(y))
	for s, label := range labels {
		row := y[s*p.classes:][:p.classes]
		m := float64(row[0])
		for _, v := range row {
			m = max(m, float64(v))
		}
		var z float64
		for _, v := range row {
			z += elementary.Exp(float64(v) - m)
		}
		for c, v := range row {
			q := elementary.Exp(float64(v)-m) / z
			if c == int(label) {
				q -= 1
			}
			dy[s*p.classes+c] = float32(q / float64(n))
		}
		loss += elementary.Log(z) - (float64(row[label]) - m)
	}
	return dy, loss / float64(n)
}

func (p *plainNet) backward(x, pre, act, dy []float32, n int) {
	hidden := p.cout * p.lo
	gd, ge := make([]float32, len(p.d)), make([]float32, len(p.e))
	gw, gb := make([]float32, len(p.w)), make([]float32, len(p.b))
	dh := make([]float32, n*hidden)
	for c := range p.classes {
		for s := range n {
			ge[c] += dy[s*p.classes+c]
			for h := range hidden {
				gd[c*hidden+h] += float32(dy[s*p.classes+c] * act[s*hidden+h])
			}
		}
	}
	for s := range n {
		for h := range hidden {
			var sum float32
			for c := range p.classes {
				sum += float32(p.d[c*hidden+h] * dy[s*p.classes+c])
			}
			if pre[s*hidden+h] > 0 {
				dh[s*hidden+h] = sum
			}
		}
	}
	for o := range p.cout {
		for s := range n {
			for t := range p.lo {
				g := dh[s*hidden+o*p.lo+t]
				gb[o] += g
				for c := range p.cin {
					for k := range p.width {
						if at := t*p.stride + k - p.pad; at >= 0 && at < p.l {
							gw[(o*p.cin+c)*p.width+k] += float32(g * x[(s*p.cin+c)*p.l+at])
						}
					}
				}
			}
		}
	}
	p.move(p.w, p.vw, gw)
	p.move(p.b, p.vb, gb)
	p.move(p.d, p.vd, gd)
	p.move(p.e, p.ve, ge)
}

func (p *plainNet) move(w, v, g []float32) {
	for i := range w {
		v[i] = float32(p.momentum*v[i]) + g[i]
		w[i] -= float32(p.rate * v[i])
	}
}

// TestBaselineIsPlainFloat32 trains the same network by Run and by plain loops:
// losses and parameters must agree bit for bit, the short last batch included.
func TestBaselineIsPlainFloat32(t *testing.T) {
	const n, batch, epochs = 10, 3, 4
	p := &plainNet{cin: 2, l: 11, cout: 3, width: 4, stride: 2, pad: 1, lo: 5, classes: 4, rate: 0.05, momentum: 0.9}
	net := network(t, []int{p.cin, p.l}, "conv1d out=3 width=4 stride=2 pad=1", "relu", "dense 4")
	job := Job{Network: net, Arm: baseline(t, 3), Training: sgdTraining(batch, epochs), Seed: 5, Train: dataset(n, net.Input, 4, 1)}
	out := mustRun(t, job)

	narrow := func(q Param) []float32 {
		x := make([]float32, len(q.Values))
		for i, v := range q.Values {
			x[i] = float32(v)
		}
		return x
	}
	p.w, p.b, p.d, p.e = narrow(out.Initial[0]), narrow(out.Initial[1]), narrow(out.Initial[2]), narrow(out.Initial[3])
	p.vw, p.vb = make([]float32, len(p.w)), make([]float32, len(p.b))
	p.vd, p.ve = make([]float32, len(p.d)), make([]float32, len(p.e))
	x := job.Train.Inputs.Float32s()
	per := p.cin * p.l
	var losses []float64
	for range epochs {
		for first := 0; first < n; first += batch {
			end := min(first+batch, n)
			losses = append(losses, p.step(x[first*per:end*per], job.Train.Labels[first:end]))
		}
	}
	sameBits(t, "loss", out.Steps, losses)
	for i, want := range [][]float32{p.w, p.b, p.d, p.e} {
		wide := make([]float64, len(want))
		for k, v := range want {
			wide[k] = float64(v)
		}
		sameBits(t, out.Final[i].Name, out.Final[i].Values, wide)
	}
	if out.Steps[0] == out.Steps[len(out.Steps)-1] || out.Final[0].Values[0] == out.Initial[0].Values[0] {
		t.Fatal("nothing was trained")
	}
}
