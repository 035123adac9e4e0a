package trainer

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"

	"gorgonia.org/tensor"

	"ulpine/quant"
	exact "ulpine/quant/oracle"
	"ulpine/quant/random"
)

// judgeOf is a format and a rounding of the oracle, which shares no code with quant.
type judgeOf struct {
	format *exact.Format
	how    exact.Rounding
}

// split is the oracle's format of a split in the layout of IEEE 754, stochastic with
// so many random bits, or to nearest for 0.
func splitJudge(t testing.TB, exponent, fraction int, bits uint) judgeOf {
	t.Helper()
	f, err := exact.NewSplit(exact.Split{Exponent: exponent, Fraction: fraction, Bias: exact.Bias(exponent), Top: "ieee"})
	if err != nil {
		t.Fatal(err)
	}
	how := exact.Rounding{Mode: "nearest-even"}
	if bits > 0 {
		how = exact.Rounding{Mode: "stochastic", Bits: bits}
	}
	return judgeOf{f, how}
}

// round is R(x) with the word of element n.
func (j judgeOf) round(x *big.Rat, d quant.Draws, n int) float64 {
	var draw uint64
	if j.how.Bits > 0 {
		draw = uint64(d.Word(uint64(n)) >> (32 - j.how.Bits))
	}
	y, _ := j.format.Round(x, false, j.how, "", draw)
	return y
}

// Exact arithmetic of the oracle.
func rat(x float64) *big.Rat               { return new(big.Rat).SetFloat64(x) }
func ratSum(a, b *big.Rat) *big.Rat        { return new(big.Rat).Add(a, b) }
func ratDifference(a, b *big.Rat) *big.Rat { return new(big.Rat).Sub(a, b) }
func ratProduct(a, b float64) *big.Rat     { return new(big.Rat).Mul(rat(a), rat(b)) }
func (j judgeOf) sum(a, b float64) float64 { return j.round(ratSum(rat(a), rat(b)), quant.Draws{}, 0) }
func (j judgeOf) mul(a, b float64) float64 { return j.round(ratProduct(a, b), quant.Draws{}, 0) }

// linearOracle recomputes a regression by one dense layer of one unit, all points
// binary32 but the result and the residue of the weight gradient, in exact rationals.
type linearOracle struct {
	single, result, residue judgeOf
	seed                    uint64
	rate, s                 float64
	w, e                    []float64 // the weights, last the bias; their residues
}

// draws are the words of an operation on the weight or the bias, which is last.
func (o *linearOracle) draws(step, operation, element int) (d quant.Draws, n int) {
	block := 64
	if element == len(o.w)-1 {
		block, element = 128, 0
	}
	return quant.Draws{Seed: o.seed, Step: uint32(step), Site: uint32(1<<8 + block + operation)}, element
}

// step trains on a batch.
func (o *linearOracle) step(number int, x [][]float64, target []float64) {
	bias := len(o.w) - 1
	slope := make([]float64, len(x))
	for s := range x {
		var y float64
		for i, v := range x[s] {
			y = o.single.sum(y, o.single.mul(o.w[i], v))
		}
		y = o.single.sum(y, o.w[bias])
		slope[s] = o.single.round(rat((y-target[s])/float64(len(x))*o.s), quant.Draws{}, 0)
	}
	next := make([]float64, len(o.w))
	for i := range o.w {
		var s float64
		for k := range x {
			term := slope[k]
			if i < bias {
				term = o.single.mul(slope[k], x[k][i])
			}
			s = o.single.sum(s, term)
		}
		both := ratSum(rat(s), rat(o.e[i]))
		d, n := o.draws(number, 6, i)
		g := o.result.round(both, d, n)
		d, n = o.draws(number, 48, i)
		next[i] = o.residue.round(ratDifference(both, rat(g)), d, n)
		step := o.single.mul(o.rate, g/o.s)
		o.w[i] = o.single.round(ratDifference(rat(o.w[i]), rat(step)), quant.Draws{}, 0)
	}
	o.e = next
}

// rescale follows the loss scale by a factor.
func (o *linearOracle) rescale(step int, f float64) {
	o.s *= f
	for i := range o.e {
		d, n := o.draws(step, 49, i)
		o.e[i] = o.residue.round(ratProduct(o.e[i], f), d, n)
	}
}

// TestResiduesAreTheirExactAccount recomputes twenty steps of error feedback, both
// points stochastic, under a loss scale that is raised after every third step.
func TestResiduesAreTheirExactAccount(t *testing.T) {
	const inputs, batch, steps = 3, 2, 20
	residue := stochastic(t, "E6M3", 5)
	arm := Everything(point(t, "fp32"), 1, 0)
	arm.LossScale = LossScale{Kind: DynamicScale, Value: 4, RaiseAfter: 3, RaiseBy: 1.5}
	arm.Layers[0].WeightGradient.Result, arm.Layers[0].WeightGradient.Residue = stochastic(t, "E8M2", 7), &residue
	x, targets := uniform(batch*steps*inputs, 1), uniform(batch*steps, 2)
	job := Job{
		Network: network(t, []int{inputs}, "dense 1"), Arm: arm, Seed: 5,
		Training: Training{Loss: "mean-squared-error", Optimizer: Optimizer{Kind: "sgd"}, LearningRate: Schedule{Start: 0.05}, Batch: batch, Epochs: 1},
		Train: Set{
			Inputs:  tensor.New(tensor.WithShape(batch*steps, inputs), tensor.WithBacking(x)),
			Targets: tensor.New(tensor.WithShape(batch*steps, 1), tensor.WithBacking(targets)),
		},
		Start: []Param{startParam(3, 1, inputs), startParam(4, 1)},
	}
	e := engineFor[float32](t, &job)
	o := &linearOracle{
		single: splitJudge(t, 8, 23, 0), result: splitJudge(t, 8, 2, 7), residue: splitJudge(t, 6, 3, 5),
		seed: random.Derive(5, random.RoundingBits), rate: float64(float32(0.05)), s: 4, e: make([]float64, inputs+1),
	}
	for _, q := range e.params {
		for _, v := range q.master.data {
			o.w = append(o.w, float64(v))
		}
	}
	kept := 0
	for n := range steps {
		rows, want := make([][]float64, batch), make([]float64, batch)
		for s := range rows {
			at := n*batch + s
			want[s] = float64(targets[at])
			for _, v := range x[at*inputs:][:inputs] {
				rows[s] = append(rows[s], float64(v))
			}
		}
		o.step(n+1, rows, want)
		if (n+1)%3 == 0 {
			o.rescale(n+1, 1.5)
		}
		if _, what := e.step([]int32{int32(n * batch), int32(n*batch + 1)}, o.rate); what != stepTaken {
			t.Fatalf("step %d: %v", n+1, what)
		}
		i := 0
		for _, q := range e.params {
			for k := range q.master.data {
				if float64(q.master.data[k]) != o.w[i] || float64(q.residue.data[k]) != o.e[i] {
					t.Fatalf("step %d, parameter %d: master %v, residue %v, want %v, %v", n+1, i, q.master.data[k], q.residue.data[k], o.w[i], o.e[i])
				}
				if o.e[i] != 0 {
					kept++
				}
				i++
			}
		}
	}
	if kept < steps*(inputs+1)/2 || o.s != 4*math.Pow(1.5, 6) {
		t.Errorf("%d residues, S = %v: the test sees too little", kept, o.s)
	}
}

// TestResidueOfASkippedStep: a step that is skipped leaves the residues alone, but
// for the cut of the scale that they are under.
func TestResidueOfASkippedStep(t *testing.T) {
	residue := point(t, "fp32")
	arm := baseline(t, 1)
	arm.LossScale = LossScale{Kind: DynamicScale, Value: 0x1p30}
	arm.Layers[0].WeightGradient.Result, arm.Layers[0].WeightGradient.Residue = point(t, "E5M2"), &residue
	job := Job{Network: network(t, []int{4}, "dense 3"), Arm: arm, Training: sgdTraining(4, 1), Train: dataset(8, []int{4}, 3, 1), Seed: 2}
	e := engineFor[float32](t, &job)
	e.params[0].residue.data[1] = 3
	if _, what := e.step([]int32{0, 1, 2, 3}, 0.1); what != stepSkipped {
		t.Fatalf("%v", what)
	}
	if got := e.params[0].residue.data[:3]; got[0] != 0 || got[1] != 1.5 || got[2] != 0 {
		t.Errorf("residues %v, S = %v", got, e.scaler.s)
	}
}

// TestSmallGradientsArriveInTime: a gradient of a tenth of the format's least value is
// lost without a residue; with one every tenth step takes it all.
func TestSmallGradientsArriveInTime(t *testing.T) {
	move := func(residue *quant.Point) float64 {
		arm := Everything(point(t, "fp32"), 1, 0)
		arm.Layers[0].WeightGradient.Result, arm.Layers[0].WeightGradient.Residue = point(t, "Q1.6"), residue
		job := Job{
			Network: network(t, []int{1}, "dense 1"), Arm: arm, Seed: 1,
			Training: Training{Loss: "huber", HuberWidth: 0x1p-9, Optimizer: Optimizer{Kind: "sgd"}, LearningRate: Schedule{Start: 0x1p-10}, Batch: 1, Epochs: 64},
			Train: Set{
				Inputs:  tensor.New(tensor.WithShape(1, 1), tensor.WithBacking([]float32{1})),
				Targets: tensor.New(tensor.WithShape(1, 1), tensor.WithBacking([]float32{10})),
			},
			Start: []Param{{Shape: []int{1, 1}, Values: []float64{0}}, {Shape: []int{1}, Values: []float64{0}}},
		}
		return mustRun(t, job).Final[0].Values[0]
	}
	single := point(t, "fp32")
	if lost, kept := move(nil), move(&single); lost != 0 || kept != 64*0x1p-19 {
		t.Errorf("the weight moves by %g without and by %g with a residue, want 0 and %g", lost, kept, 64*0x1p-19)
	}
}

// TestResidueRoads holds both roads to exact rationals, over numbers so far apart that
// no one number holds their sum, and over those that cancel.
func TestResidueRoads(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	draw := func(wide int) float64 { return math.Ldexp(r.Float64()-0.5, r.IntN(2*wide+1)-wide) }
	for _, c := range []struct {
		p     quant.Point
		judge judgeOf
	}{
		{point(t, "bf16"), splitJudge(t, 8, 7, 0)},
		{stochastic(t, "E8M3", 9), splitJudge(t, 8, 3, 9)},
		{stochastic(t, "E11M30", 32), splitJudge(t, 11, 30, 32)},
		{point(t, "fp64"), splitJudge(t, 11, 52, 0)},
	} {
		odd, _ := roads(&c.p)
		for n := range 3000 {
			s, e := draw(n%300), draw(n%300)
			g := []float64{s + e, s, e, draw(n % 300), s / 3}[n%5]
			d := quant.Draws{Seed: 3, Step: uint32(n)}
			want := c.judge.round(ratDifference(ratSum(rat(s), rat(e)), rat(g)), d, 0)
			x, got := make([]float64, 1), make([]float64, 1)
			leaveScalar(got, []float64{s}, []float64{e}, []float64{g}, &c.p, d, 0, nil)
			if got[0] != want {
				t.Fatalf("%s: (%v + %v) - %v: %v by exact reals, want %v", c.p.String(), s, e, g, got[0], want)
			}
			if !odd {
				continue
			}
			if !foldLeft(x, []float64{s}, []float64{e}, []float64{g}) {
				t.Fatal("the quick road is not taken")
			}
			quant.RoundSlice(got, x, &c.p, d, 0, nil)
			if got[0] != want {
				t.Fatalf("%s: (%v + %v) - %v: %v, want %v", c.p.String(), s, e, g, got[0], want)
			}
		}
	}
	if v, _ := left(math.Inf(1), 1, 1); !math.IsInf(v, 1) {
		t.Errorf("infinity leaves %v", v)
	}
}
