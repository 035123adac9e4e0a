package trainer

import (
	"math"
	"strings"
	"testing"

	"ulpine/quant"
	"ulpine/quant/elementary"
)

// account recomputes updates of one parameter element by element with quant's
// scalar rounding, every random word addressed by numbers written out here.
type account struct {
	q                   *param[float32]
	step                uint32
	state, steps, point quant.Point
}

func (a *account) round(p quant.Point, x quant.Real, op, n int) float64 {
	d := quant.Draws{Seed: 5, Step: a.step, Site: uint32((a.q.layer+1)*256 + 64*(a.q.number+1) + op)}
	v, _ := p.Round(x, d.Word(uint64(n)))
	return v
}

func real(x float64) quant.Real                      { return quant.Exactly(x) }
func plus(x, y float64) quant.Real                   { return real(x).Add(real(y)) }
func minus(x, y float64) quant.Real                  { return real(x).Add(real(-y)) }
func b32(x float64) float64                          { return float64(float32(x)) }
func (a *account) s(x quant.Real, op, n int) float64 { return a.round(a.state, x, op, n) }
func (a *account) t(x quant.Real, op, n int) float64 { return a.round(a.steps, x, op, n) }

// formulas are the steps of every optimizer as its comment states them: element n,
// states v, gradient g, update number t.
var formulas = map[string]func(a *account, o Optimizer, v []float64, g float64, t, n int) float64{
	"sgd": func(a *account, o Optimizer, v []float64, g float64, _, n int) float64 {
		u := a.s(quant.ExactProduct(b32(o.Momentum), v[0]), 16, n)
		v[0] = a.s(plus(u, g), 17, n)
		return a.t(quant.ExactProduct(b32(0.05), v[0]), 7, n)
	},
	"nesterov": func(a *account, o Optimizer, v []float64, g float64, _, n int) float64 {
		mu := b32(o.Momentum)
		u := a.s(quant.ExactProduct(mu, v[0]), 16, n)
		v[0] = a.s(plus(u, g), 17, n)
		ahead := a.t(quant.ExactProduct(mu, v[0]), 9, n)
		return a.t(quant.ExactProduct(b32(0.05), a.t(plus(ahead, g), 10, n)), 7, n)
	},
	"adam":  adamFormula,
	"adamw": adamFormula,
}

func adamFormula(a *account, o Optimizer, v []float64, g float64, t, n int) float64 {
	b1, b2, eps := b32(0.9), b32(0.999), b32(1e-8)
	if o.Beta1 != 0 {
		b1, b2, eps = b32(o.Beta1), b32(o.Beta2), b32(o.Epsilon)
	}
	p1, p2 := 1.0, 1.0
	for range t {
		p1, p2 = p1*b1, p2*b2
	}
	u := a.s(quant.ExactProduct(b1, v[0]), 16, n)
	v[0] = a.s(plus(u, a.s(quant.ExactProduct(1-b1, g), 17, n)), 18, n)
	u = a.s(quant.ExactProduct(b2, v[1]), 20, n)
	v[1] = a.s(plus(u, a.s(quant.ExactProduct(1-b2, g*g), 21, n)), 22, n)
	top := a.t(real(v[0]/(1-p1)), 9, n)
	var below float64
	if o.EpsilonInside {
		below = a.t(real(math.Sqrt(v[1]/(1-p2)+eps)), 11, n)
	} else {
		below = a.t(plus(a.t(real(math.Sqrt(v[1]/(1-p2))), 11, n), eps), 12, n)
	}
	if below == 0 {
		return a.t(quant.ExactProduct(b32(0.05), a.t(real(top/below), 13, n)), 7, n)
	}
	return a.t(quant.ExactProduct(b32(0.05), a.t(quant.ExactQuotient(top, below), 13, n)), 7, n)
}

// TestUpdatesAreTheirFormulas takes three updates of every optimizer, decay and
// compensation in stochastic formats and holds every bit to the formulas.
func TestUpdatesAreTheirFormulas(t *testing.T) {
	cases := []Optimizer{
		{Kind: "sgd", Momentum: 0.9},
		{Kind: "sgd", Momentum: 0.9, WeightDecay: 0.01, Compensated: true},
		{Kind: "sgd", Momentum: 0.5, WeightDecay: 0.3, Decoupled: true},
		{Kind: "nesterov", Momentum: 0.9, WeightDecay: 0.02},
		{Kind: "adam"},
		{Kind: "adam", WeightDecay: 0.1, Beta1: 0.8, Beta2: 0.99, Epsilon: 1e-3, EpsilonInside: true},
		{Kind: "adamw", WeightDecay: 0.1, Beta1: 0.8, Beta2: 0.99, Epsilon: 1e-3, Compensated: true},
	}
	for _, o := range cases {
		checkUpdates(t, o)
	}
}

func checkUpdates(t *testing.T, o Optimizer) {
	a := &account{state: stochastic(t, "E8M9", 12), steps: stochastic(t, "E7M10", 9), point: stochastic(t, "bf16", 16)}
	states, err := o.States()
	if err != nil {
		t.Fatal(err)
	}
	arm := Everything(a.point, 1, states)
	arm.Layers[0].Step = a.steps
	for i := range arm.Layers[0].States {
		arm.Layers[0].States[i] = a.state
	}
	q := &param[float32]{place: place{set: &arm.Layers[0]}, shape: []int{3, 5}, number: 0, master: newArray[float32](3, 5), working: newArray[float32](3, 5), gradient: newArray[float32](3, 5)}
	a.q = q
	k, _ := findRule(o)
	m := newMover(k, o, []*param[float32]{q})
	w := make([]float64, 15)
	v := make([][]float64, 15)
	for i, x := range uniform(15, 1) {
		q.master.data[i] = float32(int(x*64)) / 64
		w[i], v[i] = float64(q.master.data[i]), make([]float64, states)
	}
	for step := 1; step <= 3; step++ {
		a.step = uint32(step)
		for i, x := range uniform(15, uint64(step)+7) {
			q.gradient.data[i] = x * 4
		}
		q.gradient.data[3] = 0
		m.move(&pass{seed: 5, step: uint32(step)}, b32(0.05), 4)
		for n := range w {
			w[n] = a.update(o, w[n], v[n], float64(q.gradient.data[n])/4, step, n)
			if got := float64(q.master.data[n]); math.Float64bits(got) != math.Float64bits(w[n]) {
				t.Fatalf("%+v: step %d, element %d: %v, want %v", o, step, n, got, w[n])
			}
			for s := range states {
				if got := float64(q.states[s].data[n]); got != v[n][s] {
					t.Fatalf("%+v: step %d, element %d: state %d is %v, want %v", o, step, n, s, got, v[n][s])
				}
			}
		}
	}
}

// update is one update of element n by the mover's comment.
func (a *account) update(o Optimizer, w float64, v []float64, g float64, t, n int) float64 {
	decoupled := o.Decoupled || o.Kind == "adamw"
	if o.WeightDecay != 0 && !decoupled {
		g += a.t(quant.ExactProduct(b32(o.WeightDecay), w), 14, n)
	}
	step := formulas[o.Kind](a, o, v, g, t, n)
	if o.WeightDecay != 0 && decoupled {
		e := a.t(quant.ExactProduct(float64(float32(0.05)*float32(o.WeightDecay)), w), 14, n)
		step = a.t(plus(step, e), 15, n)
	}
	if !o.Compensated {
		return a.round(a.point, minus(w, step), 8, n)
	}
	last := len(v) - 1
	y := a.s(minus(v[last], step), 16+4*last, n)
	moved := a.round(a.point, plus(w, y), 8, n)
	applied := a.s(minus(moved, w), 17+4*last, n)
	v[last] = a.s(minus(y, applied), 18+4*last, n)
	return moved
}

// TestCompensationKeepsSmallSteps: 1000 steps of 2^-12 from 1 vanish in bfloat16
// and arrive with a compensation in binary32.
func TestCompensationKeepsSmallSteps(t *testing.T) {
	move := func(o Optimizer) float64 {
		states, _ := o.States()
		arm := Everything(point(t, "bf16"), 1, states)
		for i := range arm.Layers[0].States {
			arm.Layers[0].States[i] = point(t, "fp32")
		}
		q := &param[float32]{place: place{set: &arm.Layers[0]}, shape: []int{1}, master: newArray[float32](1), working: newArray[float32](1), gradient: newArray[float32](1)}
		k, _ := findRule(o)
		m := newMover(k, o, []*param[float32]{q})
		q.master.data[0], q.gradient.data[0] = 1, -0x1p-12
		for step := range 1024 {
			m.move(&pass{step: uint32(step)}, 1, 1)
		}
		return float64(q.master.data[0])
	}
	if got := move(Optimizer{Kind: "sgd"}); got != 1 {
		t.Errorf("plain: %v", got)
	}
	if got := move(Optimizer{Kind: "sgd", Compensated: true}); got != 1.25 {
		t.Errorf("compensated: %v, want 1.25", got)
	}
}

// TestClippingCutsTheNorm over all parameters, and leaves shorter gradients alone.
func TestClippingCutsTheNorm(t *testing.T) {
	arm := Everything(point(t, "fp32"), 1, 0)
	var params []*param[float32]
	for i, g := range [][]float32{{3, 0}, {0, 4, 12}} {
		q := &param[float32]{place: place{set: &arm.Layers[0]}, number: i, shape: []int{len(g)}, master: newArray[float32](len(g)), working: newArray[float32](len(g)), gradient: newArray[float32](len(g))}
		copy(q.gradient.data, g)
		params = append(params, q)
	}
	for _, c := range []struct{ norm, want float64 }{{6.5, 6}, {13, 12}, {20, 12}, {0, 12}} {
		o := Optimizer{Kind: "sgd", ClipNorm: c.norm}
		k, err := findRule(o)
		if err != nil {
			t.Fatal(err)
		}
		params[1].master.data[2] = 0
		newMover(k, o, params).move(&pass{}, 1, 1)
		if got := -float64(params[1].master.data[2]); got != c.want {
			t.Errorf("norm %v: moved by %v, want %v", c.norm, got, c.want)
		}
	}
}

// TestWithoutMasterCopy: a master of the weight's format is the working copy.
func TestWithoutMasterCopy(t *testing.T) {
	for _, p := range []quant.Point{point(t, "bf16"), stochastic(t, "bf16", 16), stochastic(t, "E4M3", 8)} {
		job := convJob(t, func(n int) Arm { return storageArm(t, p, n) })
		e := engineFor[float32](t, &job)
		for range 3 {
			e.step([]int32{0, 1, 2, 3}, 0.05)
		}
		for _, q := range e.params {
			for i, v := range q.master.data {
				if math.Float32bits(q.working.data[i]) != math.Float32bits(v) {
					t.Fatalf("%v: %s[%d]: working copy %v, master %v", p, q.name, i, q.working.data[i], v)
				}
			}
		}
	}
}

func TestCosineAndWarmUp(t *testing.T) {
	s := Schedule{Start: 0.1, Cosine: true, End: 0.01, WarmUp: 4}
	start, end := b32(0.1), b32(0.01)
	for step, want := range map[int]float64{
		1: float64(float32(0.1) * 0.25), 3: float64(float32(0.1) * 0.75), 4: start, 5: start,
		9:  b32(end + (start-end)*(0.5*(1+elementary.Cos(math.Pi*0.5)))),
		12: b32(end + (start-end)*(0.5*(1+elementary.Cos(math.Pi*0.875)))),
	} {
		if got := s.at(1, step, 12); got != want {
			t.Errorf("step %d: %v, want %v", step, got, want)
		}
	}
	falls := Schedule{Start: 0.5, Multiply: 0.5, AtEpochs: []int{2}, WarmUp: 10}
	if got := falls.at(2, 5, 100); got != 0.125 {
		t.Errorf("warm-up on a fall: %v", got)
	}
	last := 1.0
	for step := 5; step <= 12; step++ {
		if r := s.at(1, step, 12); r > last {
			t.Errorf("the cosine rises at step %d", step)
		} else {
			last = r
		}
	}
}

func TestBadOptimizersAreRefused(t *testing.T) {
	for _, c := range []struct {
		o    Optimizer
		want string
	}{
		{Optimizer{Kind: "nesterov"}, "nesterov takes one above 0"},
		{Optimizer{Kind: "adam", Momentum: 0.9}, "takes beta1 instead"},
		{Optimizer{Kind: "adam", Beta2: 1}, "between 0 and 1"},
		{Optimizer{Kind: "adam", Beta2: 0.99999999999}, "between 0 and 1"},
		{Optimizer{Kind: "adamw", Epsilon: -1}, "epsilon is -1"},
		{Optimizer{Kind: "sgd", Epsilon: 1}, "belong to adam"},
		{Optimizer{Kind: "sgd", WeightDecay: -1}, "weight decay is -1"},
		{Optimizer{Kind: "sgd", ClipNorm: math.NaN()}, "clipping norm is NaN"},
		{Optimizer{Kind: "sgd", Decoupled: true}, "decoupled weight decay of 0"},
	} {
		if _, err := c.o.States(); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %q", c.o, err, c.want)
		}
	}
	for _, c := range []struct {
		s    Schedule
		want string
	}{
		{Schedule{Start: 1, WarmUp: -1}, "-1 steps"},
		{Schedule{Start: 1, End: 0.1}, "without a cosine"},
		{Schedule{Start: 1, Cosine: true, End: 2}, "between 0 and the start"},
		{Schedule{Start: 1, Cosine: true, Multiply: 0.5, AtEpochs: []int{2}}, "keep one"},
	} {
		if err := c.s.check(); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %q", c.s, err, c.want)
		}
	}
	if err := (Schedule{Start: 1, WarmUp: 9}).checkLength(9); err == nil {
		t.Error("a warm-up of the whole training is accepted")
	}
}
