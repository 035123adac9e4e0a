package trainer

import (
	"math"
	"strings"
	"testing"

	"ulpine/quant"
)

// linearAccount recomputes one linear layer of stride 1 with plain loops in binary32; a
// dense layer is a convolution of width 1 over a single position.
type linearAccount struct {
	t                           *testing.T
	ints                        bool // INT8, else MXFP4 in blocks of two
	units, channels, width, pad int
	inner, outer, samples       int
	w, b, x, dy                 []float64
}

// terms replaces the elements of a tensor, listed along the reduction axis, by their
// terms, and returns the factor.
func (a *linearAccount) terms(x []float64, lines ...[]int) float64 {
	if a.ints {
		m := 0.0
		for _, line := range lines {
			for _, i := range line {
				m = max(m, math.Abs(x[i]))
			}
		}
		f := 1.0
		if m > 0 {
			f = a.round("fp32", quant.ExactQuotient(m, 127))
		}
		for _, line := range lines {
			for _, i := range line {
				x[i] = a.round("Q8.0", quant.ExactQuotient(x[i], f))
			}
		}
		return f
	}
	for _, line := range lines {
		for at := 0; at < len(line); at += 2 {
			block := line[at:min(at+2, len(line))]
			m := 0.0
			for _, i := range block {
				m = max(m, math.Abs(x[i]))
			}
			scale := 1.0
			if m > 0 {
				scale = math.Ldexp(1, max(math.Ilogb(m)-2, -127)) // the largest value of E2M1 is 6 = 1.5 2^2
			}
			for _, i := range block {
				x[i] = a.round("E2M1", quant.ExactQuotient(x[i], scale)) * scale
			}
		}
	}
	return 1
}

func (a *linearAccount) round(format string, x quant.Real) float64 {
	p := point(a.t, format)
	v, _ := p.Round(x, 0)
	return v
}

// finish multiplies a finished sum by its factor.
func (a *linearAccount) finish(s float32, f float64) float32 {
	if f == 1 {
		return s
	}
	return float32(a.round("fp32", quant.ExactProduct(float64(s), f)))
}

// span lists n numbers a step apart.
func span(from, n, step int) []int {
	out := make([]int, n)
	for i := range out {
		out[i] = from + i*step
	}
	return out
}

func mac(s float32, a, b float64) float32 { return s + float32(float32(a)*float32(b)) }

func (a *linearAccount) forward() (y []float64) {
	w, x := append([]float64(nil), a.w...), append([]float64(nil), a.x...)
	fw, fx := make([]float64, a.units), make([]float64, a.samples)
	for u := range a.units {
		var lines [][]int
		for k := range a.width {
			lines = append(lines, span(u*a.channels*a.width+k, a.channels, a.width))
		}
		fw[u] = a.terms(w, lines...)
	}
	for n := range a.samples {
		var lines [][]int
		for i := range a.inner {
			lines = append(lines, span(n*a.channels*a.inner+i, a.channels, a.inner))
		}
		fx[n] = a.terms(x, lines...)
	}
	for n := range a.samples {
		for u := range a.units {
			for t := range a.outer {
				var s float32
				for c := range a.channels {
					for k := range a.width {
						if i := t + k - a.pad; i >= 0 && i < a.inner {
							s = mac(s, w[(u*a.channels+c)*a.width+k], x[(n*a.channels+c)*a.inner+i])
						}
					}
				}
				y = append(y, float64(a.finish(s, float64(fw[u]*fx[n]))+float32(a.b[u])))
			}
		}
	}
	return y
}

func (a *linearAccount) inputGradient() (dx []float64) {
	w, dy := append([]float64(nil), a.w...), append([]float64(nil), a.dy...)
	fw := make([]float64, a.channels)
	for c := range a.channels {
		var lines [][]int
		for k := range a.width {
			lines = append(lines, span(c*a.width+k, a.units, a.channels*a.width))
		}
		fw[c] = a.terms(w, lines...)
	}
	var lines [][]int
	for n := range a.samples {
		for t := range a.outer {
			lines = append(lines, span(n*a.units*a.outer+t, a.units, a.outer))
		}
	}
	fy := a.terms(dy, lines...)
	for n := range a.samples {
		for c := range a.channels {
			for i := range a.inner {
				var s float32
				for u := range a.units {
					for k := range a.width {
						if t := i - k + a.pad; t >= 0 && t < a.outer {
							s = mac(s, w[(u*a.channels+c)*a.width+k], dy[(n*a.units+u)*a.outer+t])
						}
					}
				}
				dx = append(dx, float64(a.finish(s, float64(fw[c]*fy))))
			}
		}
	}
	return dx
}

func (a *linearAccount) weightGradient() (dw, db []float64) {
	x, dy := append([]float64(nil), a.x...), append([]float64(nil), a.dy...)
	var lines [][]int
	for i := range a.channels * a.inner {
		lines = append(lines, span(i, a.samples, a.channels*a.inner))
	}
	fx := a.terms(x, lines...)
	fy := make([]float64, a.units)
	for u := range a.units {
		lines = nil
		for t := range a.outer {
			lines = append(lines, span(u*a.outer+t, a.samples, a.units*a.outer))
		}
		fy[u] = a.terms(dy, lines...)
	}
	for u := range a.units {
		for c := range a.channels {
			for k := range a.width {
				var s float32
				for n := range a.samples {
					for t := range a.outer {
						if i := t + k - a.pad; i >= 0 && i < a.inner {
							s = mac(s, dy[(n*a.units+u)*a.outer+t], x[(n*a.channels+c)*a.inner+i])
						}
					}
				}
				dw = append(dw, float64(a.finish(s, float64(fy[u]*fx))))
			}
		}
		var s float32
		for n := range a.samples {
			for t := range a.outer {
				s += float32(a.dy[(n*a.units+u)*a.outer+t])
			}
		}
		db = append(db, float64(s))
	}
	return dw, db
}

// sharedArm gives the operands a shared format; the first operands of the backward
// products are left unset, so that they are taken anew.
func sharedArm(t *testing.T, layers int, ints bool) Arm {
	rows, columns := point(t, "MXFP4(block=2)"), point(t, "MXFP4(block=2)")
	if ints {
		rows, columns = point(t, "INT8(per=channel)"), point(t, "INT8")
	}
	arm := baseline(t, layers)
	for i := range arm.Layers {
		l := &arm.Layers[i]
		l.Weight, l.Operand = rows, &columns
		l.InputGradient.Gradient, l.WeightGradient.Gradient = &columns, &rows
	}
	return arm
}

func widened(x []float32) (out []float64) {
	for _, v := range x {
		out = append(out, float64(v))
	}
	return out
}

// TestSharedScalesByPlainLoops recomputes all products of a step on two convolutions
// and a dense layer, bit by bit.
func TestSharedScalesByPlainLoops(t *testing.T) {
	for _, ints := range []bool{false, true} {
		net := network(t, []int{3, 5}, "conv1d out=5 width=2", "conv1d out=4 width=3 pad=1", "dense 3")
		job := Job{Network: net, Arm: sharedArm(t, 3, ints), Training: sgdTraining(3, 1), Seed: 8, Train: dataset(3, net.Input, 3, 1)}
		e := engineFor[float32](t, &job)
		var masters [][]float64
		for _, q := range e.params {
			masters = append(masters, widened(q.master.data))
		}
		if _, what := e.step([]int32{0, 1, 2}, 0.05); what != stepTaken {
			t.Fatal(what)
		}
		for i, spec := range net.Layers {
			a := linearAccount{t: t, ints: ints, units: spec.Out[0], channels: volume(spec.In), width: 1, inner: 1, outer: 1, samples: 3}
			if len(spec.Out) > 1 {
				a.channels, a.inner, a.outer, a.width, a.pad = spec.In[0], spec.In[1], spec.Out[1], spec.window.kw, spec.window.pw
			}
			a.w, a.b = masters[2*i], masters[2*i+1]
			a.x, a.dy = widened(e.edges[i].values(3)), widened(e.edges[i+1].gradients(3))
			sameBits(t, spec.Name+" forward", widened(e.edges[i+1].values(3)), a.forward())
			dw, db := a.weightGradient()
			sameBits(t, spec.Name+" weight gradient", widened(e.params[2*i].gradient.data), dw)
			sameBits(t, spec.Name+" bias gradient", widened(e.params[2*i+1].gradient.data), db)
			if i > 0 {
				sameBits(t, spec.Name+" input gradient", widened(e.edges[i].gradients(3)), a.inputGradient())
			}
		}
	}
}

// TestSharedScalesOfEvaluations: what an example is answered does not depend on the
// examples evaluated beside it.
func TestSharedScalesOfEvaluations(t *testing.T) {
	for _, ints := range []bool{false, true} {
		net := network(t, []int{4, 5}, "conv1d out=4 width=3 pad=1 groups=2", "relu", "dense 3")
		arm := sharedArm(t, 3, ints)
		for i := range arm.Layers {
			o := *arm.Layers[i].Operand
			o.Rounding = quant.Rounding{Mode: quant.Stochastic, Bits: 8}
			arm.Layers[i].Operand = &o
		}
		job := Job{Network: net, Arm: arm, Training: sgdTraining(3, 1), Seed: 8, Train: dataset(6, net.Input, 3, 1)}
		e := engineFor[float32](t, &job)
		all := e.pass
		all.tally, all.phase, all.step, all.samples = nil, phaseTest, 1, 6
		x := job.Train.Inputs.Float32s()
		want := widened(e.forward(&all, x))
		var got []float64
		for n := range 6 {
			one := all
			one.samples, one.first = 1, uint64(n)
			got = append(got, widened(e.forward(&one, x[n*20:][:20]))...)
		}
		sameBits(t, "outputs", got, want)
		mustRun(t, job)
	}
}

// TestSharedScalesElsewhere: one error says where such formats can be.
func TestSharedScalesElsewhere(t *testing.T) {
	blocks, channels := point(t, "MXFP8"), point(t, "INT8(per=channel)")
	for want, set := range map[string]func(*Arm){
		"network, input: MXFP8(E4M3) shares scales among values":                 func(a *Arm) { a.Input = blocks },
		"layer 1 (dense 3), forward.activation: MXFP8(E4M3) shares scales":       func(a *Arm) { a.Layers[0].Activation = blocks },
		"layer 1 (dense 3), update.master: MXFP8(E4M3) shares scales":            func(a *Arm) { a.Layers[0].Master = blocks },
		"layer 1 (dense 3), forward.operand: INT8(per=channel): a channel with ": func(a *Arm) { a.Layers[0].Operand = &channels },
	} {
		net := network(t, []int{3}, "dense 3")
		arm := baseline(t, 1)
		set(&arm)
		if err := net.checkArm(&arm, 1); err == nil || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%v, want %s", err, want)
		}
	}
}
