package compare

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"ulpine/results"
)

// answered gives runs answers to examples of class 0: right where the score is 1.
func answered(rs []results.Run, data byte, right ...[]float64) []results.Run {
	for r := range rs {
		p := &results.Predictions{}
		sum := 0.0
		for _, x := range right[r] {
			p.Truth, p.Called = append(p.Truth, 0), append(p.Called, int32(1-x))
			sum += x
		}
		rs[r].Predictions, rs[r].Data = p, results.Hash{data}
		rs[r].Epochs[len(rs[r].Epochs)-1].TestMetric = sum / float64(len(right[r]))
	}
	return rs
}

// TestFlips: McNemar's counts, by hand, and the exact p-value: 1 of 7 discordant
// one way has 2 (1 + 7) / 2^7 = 0.125.
func TestFlips(t *testing.T) {
	arm := answered(runs("a", 0, 0), 1, []float64{1, 1, 1, 1, 1, 1, 0, 1, 0, 1}, []float64{1, 1, 1, 1, 1, 1, 1, 1, 1, 1})
	base := answered(runs("b", 0, 0), 1, []float64{0, 0, 0, 0, 0, 0, 1, 1, 0, 1}, []float64{1, 1, 1, 1, 1, 1, 1, 1, 1, 1})
	base[0].Predictions.Called[8] = -1 // no answer, where the arm has a wrong one
	c := Pair(question("a", 0.01), arm, base).Items
	if c == nil || c.Items != 10 || c.Replicates != 2 || c.Gained != 6 || c.Lost != 1 || c.Changed != 8 {
		t.Fatalf("%+v", c)
	}
	if f := c.Flips[0]; f.Replicate != arm[0].Replicate || f.Gained != 6 || f.Lost != 1 || f.Changed != 8 {
		t.Errorf("%+v", f)
	}
	near(t, "p", c.Flips[0].P, 0.125, 1e-12)
	if c.Flips[1].P != 1 {
		t.Errorf("p of equal answers %v", c.Flips[1].P)
	}
	base[1].Predictions = nil
	if c := Pair(question("a", 0.01), arm, base); c.Items != nil {
		t.Errorf("a run without predictions: %+v", c.Items)
	}
}

// TestTwoWayByHand: what the resampling converges to is known where the table is
// plain. Examples that differ in no replicate leave an interval without width;
// equal rows leave the variance of the examples alone, equal columns that of the
// replicates.
func TestTwoWayByHand(t *testing.T) {
	zero := [][]float64{{0, 0, 0}, {0, 0, 0}}
	tab := func(arm [][]float64) *table {
		against := make([][]float64, len(arm))
		for r := range arm {
			against[r] = make([]float64, len(arm[r]))
		}
		return &table{arm: arm, against: against, aggregate: func(m float64) float64 { return m }, linear: true, sign: 1, resamples: 1000}
	}
	if low, high := tab(zero).crossed(0.95); low != 0 || high != 0 {
		t.Errorf("nothing differs: %v to %v", low, high)
	}
	const n, m = 6, 400
	rows, columns := make([][]float64, n), make([][]float64, n)
	for r := range n {
		rows[r], columns[r] = make([]float64, m), make([]float64, m)
		for i := range m {
			rows[r][i] = float64(i % 4 / 3) // a quarter of the examples
			columns[r][i] = float64(r % 2)
		}
	}
	d := resampledDeviation(tab(rows))
	near(t, "SD of examples alone", d, math.Sqrt(0.25*0.75/m), 0.02*d)
	d = resampledDeviation(tab(columns))
	near(t, "SD of replicates alone", d, math.Sqrt(0.25/n), 0.02*d)
	if share := tab(rows).itemShare(make([]float64, n), true); math.Abs(share-1) > 1e-9 {
		t.Errorf("examples' share %v", share)
	}
	gains := []float64{0, 1, 0, 1, 0, 1}
	if share := tab(columns).itemShare(gains, true); share != 0 {
		t.Errorf("replicates alone: examples' share %v", share)
	}
	for _, k := range []func(n, m int) func(draws) float64{tab(rows).sparse, tab(rows).general} {
		f := k(n, m)
		if a, b := f(7), f(7); a != b {
			t.Error("one address, two resamples")
		}
	}
	// both ways of resampling come to the same spread
	flips := make([][]float64, n)
	for r := range flips {
		flips[r] = make([]float64, m)
		for i := range flips[r] {
			flips[r][i] = float64(count((i+r)%9 == 0) - count(i%11 == 0))
		}
	}
	sparse, general := resampledDeviation(tab(flips)), spread(tab(flips).general(n, m))
	near(t, "SD both ways", sparse, general, 0.05*general)
}

// resampledDeviation is the standard deviation of resampled means.
func resampledDeviation(t *table) float64 {
	return spread(t.sparse(len(t.arm), len(t.arm[0])))
}

func spread(f func(draws) float64) float64 {
	means := make([]float64, 4000)
	for k := range means {
		means[k] = f(twoWaySeed.stream(k))
	}
	return deviation(means)
}

// TestHits holds the binomial draws to mean and variance, and to the ends.
func TestHits(t *testing.T) {
	for _, c := range []struct{ m, k int }{{100, 5}, {10_000, 700}, {10, 9}, {1, 1}, {7, 0}, {50, 50}} {
		h := newHits(c.m, c.k)
		xs := make([]float64, 20_000)
		for i := range xs {
			xs[i] = float64(h.draw(draws(3).word(uint64(i))))
		}
		p := float64(c.k) / float64(c.m)
		sd := math.Sqrt(float64(c.m) * p * (1 - p))
		near(t, "mean", mean(xs), float64(c.k), 4*sd/math.Sqrt(20_000))
		near(t, "SD", deviation(xs), sd, 0.025*sd)
	}
}

// TestDraws: words by address are uniform (chi-squared of 64 cells over a million
// draws, 63 degrees of freedom; five standard deviations are allowed), and streams
// differ.
func TestDraws(t *testing.T) {
	const draws1, cells = 1 << 20, 64
	for _, d := range []draws{0, twoWaySeed, twoWaySeed.stream(3)} {
		counts := make([]float64, cells)
		for i := range draws1 {
			counts[d.below(uint64(i), cells)]++
		}
		chi := 0.0
		for _, c := range counts {
			chi += (c - draws1/cells) * (c - draws1/cells) / (draws1 / cells)
		}
		if math.Abs(chi-63) > 5*math.Sqrt(2*63) {
			t.Errorf("seed %d: chi-squared %.1f", d, chi)
		}
	}
	if d := twoWaySeed; d.stream(1) == d.stream(2) || d.word(0) == d.word(1) {
		t.Error("streams or words repeat")
	}
}

// TestRegressionItems: an RMSE is resampled as the root of a mean, and less is
// better.
func TestRegressionItems(t *testing.T) {
	rmse, _ := results.FindMetric("test RMSE")
	q := Question{Arm: "a", Against: "b", Metric: rmse, Margin: 0.1, Confidence: 0.95, Planned: 4}
	rng := rand.New(rand.NewPCG(validitySeed, 11))
	make1 := func(scale float64) []results.Run {
		rs := runs("a", 0, 0, 0, 0)
		for r := range rs {
			p := &results.Predictions{Outputs: 2}
			sum := 0.0
			for range 60 {
				v, w := float32(scale*rng.NormFloat64()), float32(scale*rng.NormFloat64())
				p.Values, p.Targets = append(p.Values, v, w), append(p.Targets, 0, 0)
				sum += float64(v)*float64(v) + float64(w)*float64(w)
			}
			e := &rs[r].Epochs[len(rs[r].Epochs)-1]
			e.TestMetric, e.TestLoss, e.TestRMSE = math.NaN(), 0, math.Sqrt(sum/120)
			rs[r].Predictions, rs[r].Data = p, results.Hash{1}
		}
		return rs
	}
	arm, base := make1(1.2), make1(1)
	c := Pair(q, arm, base)
	i := c.Items
	if i == nil || !i.Crossed || !(i.Low < c.Mean && c.Mean < i.High) || i.Low < -0.7 || i.High > 0.1 || len(i.Flips) != 0 || !math.IsNaN(i.ItemShare) {
		t.Errorf("mean %v: %+v", c.Mean, i)
	}
	if !strings.Contains(i.Method, "pigeonhole") {
		t.Errorf("method %q", i.Method)
	}
}

// TestTwoWayIsRepeatable: two calls agree, and replicates with examples of their
// own are told from shared ones by their data.
func TestTwoWayIsRepeatable(t *testing.T) {
	rng := rand.New(rand.NewPCG(validitySeed, 12))
	right := func(share float64) [][]float64 {
		all := make([][]float64, 5)
		for r := range all {
			all[r] = make([]float64, 80)
			for i := range all[r] {
				all[r][i] = float64(count(rng.Float64() < share))
			}
		}
		return all
	}
	arm, base := answered(runs("a", 0, 0, 0, 0, 0), 1, right(0.85)...), answered(runs("b", 0, 0, 0, 0, 0), 1, right(0.9)...)
	first, second := Pair(question("a", 0.01), arm, base).Items, Pair(question("a", 0.01), slices.Clone(arm), base).Items
	if first.Low != second.Low || first.High != second.High || !(first.Low < first.High) || !first.Crossed {
		t.Errorf("%+v, then %+v", first, second)
	}
	if !(first.ItemShare >= 0 && first.ItemShare <= 1) {
		t.Errorf("examples' share %v", first.ItemShare)
	}
	arm[2].Data[0], base[2].Data[0] = 2, 2
	if own := Pair(question("a", 0.01), arm, base).Items; own.Crossed || !strings.Contains(own.Method, "drawn for it") || own.Low == first.Low {
		t.Errorf("own examples: %+v", own)
	}
}

// TestTwoWayValidity simulates arms on the margin whose replicates and examples both
// vary. Where examples are shared, the t interval speaks of these examples only and
// says "within" too often when others are meant; the two-way one keeps to 2.5 %.
// Where each replicate has examples of its own both do.
func TestTwoWayValidity(t *testing.T) {
	const n, m = 10, 100
	tables := 4 * samples(t, true)
	for _, shared := range []bool{true, false} {
		rng := rand.New(rand.NewPCG(validitySeed, uint64(20+count(shared))))
		plain, both := 0, 0
		for range tables {
			tab, gains := drawTable(rng, n, m, shared)
			low, _ := interval(mean(gains), deviation(gains), n, 0.95)
			two, _ := nested(gains, 1000, 0.95)
			if shared {
				two, _ = tab.crossed(0.95)
			}
			plain, both = plain+count(low > 0), both+count(two > 0)
		}
		rate, limit := float64(both)/float64(tables), 0.025+slack(0.025, tables)
		t.Logf("examples shared %v: false within %.4f two-way, %.4f t, of %d", shared, rate, float64(plain)/float64(tables), tables)
		if rate > limit {
			t.Errorf("examples shared %v: false within %.4f, at most %.4f may be", shared, rate, limit)
		}
		if share := float64(plain) / float64(tables); shared && share < 0.06 {
			t.Errorf("t interval, shared examples: %.4f; the check sees nothing", share)
		}
	}
}

// drawTable draws differences of mean zero that vary by replicate, by example and
// by cell, in parts of the mean's variance of about a third, a half and a sixth.
func drawTable(rng *rand.Rand, n, m int, shared bool) (*table, []float64) {
	tab := &table{aggregate: func(x float64) float64 { return x }, linear: true, sign: 1, resamples: 1000}
	examples := normals(rng, m, 0, 1)
	var gains []float64
	for range n {
		if !shared {
			examples = normals(rng, m, 0, 1)
		}
		arm, of := make([]float64, m), 0.25*rng.NormFloat64()
		for i := range arm {
			arm[i] = of + examples[i] + rng.NormFloat64()
		}
		tab.arm, tab.against = append(tab.arm, arm), append(tab.against, make([]float64, m))
		gains = append(gains, mean(arm))
	}
	return tab, gains
}

// TestMcNemarExact holds the p-value to the approval of a prime minister asked twice
// of 1600 people (Agresti, Categorical Data Analysis, table 10.1; 150 turned away, 86
// the other way), for which R's mcnemar.exact gives 3.716e-05 (both from memory).
func TestMcNemarExact(t *testing.T) {
	arm, base := make([]float64, 236), make([]float64, 236)
	for i := range arm {
		arm[i] = float64(count(i < 86))
		base[i] = 1 - arm[i]
	}
	c := Pair(question("a", 0.01), answered(runs("a", 0), 1, arm), answered(runs("b", 0), 1, base))
	f := c.Items.Flips[0]
	if f.Gained != 86 || f.Lost != 150 {
		t.Fatalf("%+v", f)
	}
	near(t, "p", f.P, 3.716e-05, 5e-9)
}
