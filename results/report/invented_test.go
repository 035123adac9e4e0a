package report

import (
	"crypto/sha256"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"time"

	"ulpine/results"
)

// inventedArm says how an invented arm behaves.
type inventedArm struct {
	name, slug string
	format     string // of stored values; sums and update have their own
	sum        string
	update     string
	rounding   string // of the update
	bits       float64
	shift      float64 // of the accuracy
	floor      float64 // of the loss
	diverges   int     // replicates that do
	stalls     bool
	verdict    results.Verdict
}

// formats are the widths the strips need: exponent, fraction.
var formats = map[string][2]int{
	"binary32": {8, 23}, "bfloat16": {8, 7}, "binary16": {5, 10}, "E4M3": {4, 3}, "E5M2": {5, 2}, "E6M9": {6, 9}, "Q3.12": {0, 12},
}

// inventedArms are the arms of the invented study, one for each verdict, with
// names that try the page: long ones, markup, right-to-left, line ends.
var inventedArms = []inventedArm{
	{"FP32", "baseline", "binary32", "binary32", "binary32", "nearest-even", 32, 0, 0.19, 0, false, results.Verdict{}},
	{"bf16 stochastic update", "bf16-stochastic-update", "bfloat16", "binary32", "bfloat16", "stochastic r=16 truncated", 16, 0.0004, 0.188, 0, false, results.Verdict{Kind: results.Within}},
	{"bf16 nearest", "bf16-nearest", "bfloat16", "binary32", "bfloat16", "nearest-even", 16, -0.079, 0.42, 0, false, results.Verdict{Kind: results.Worse}},
	{`<b>E6M9</b> & "wide" sums`, "e6m9-wide", "E6M9", "binary32", "binary32", "nearest-even", 18.4, -0.0031, 0.2, 0, false, results.Verdict{Kind: results.Undecided, Pairs: 46}},
	{"fp16 nearest with sequential fp16 sums and a fixed loss scale of 1024 in every layer but the last", "fp16-all", "binary16", "binary16", "binary16", "nearest-even", 16.2, -0.02, 0.3, 3, false, results.Verdict{Kind: results.Diverged, Diverged: 3, Of: 10}},
	{"E4M3 stored,\nE5M2 gradients", "e4m3", "E4M3", "bfloat16", "binary32", "nearest-even", 9.5, -0.012, 0.24, 0, false, results.Verdict{Kind: results.Worse}},
	{"Q3.12 נקודה קבועה", "q3-12", "Q3.12", "Q3.12", "Q3.12", "stochastic r=8 centred", 16, -0.71, 1.6, 0, true, results.Verdict{Kind: results.Worse}},
}

const (
	inventedReplicates = 10
	inventedEpochs     = 15
	inventedSteps      = 63 // an epoch
	inventedClasses    = 5
)

// invented is a study with made-up numbers: no run stands behind any of them.
func invented() *results.Study {
	s := &results.Study{
		Title: "16-bit training without a master copy (invented numbers)", Question: "May 16-bit weights replace the FP32 master copy?",
		PlanFile: "experiments/plans/invented.toml", PlanText: "title = \"invented\"\n[claim]\nmargin = 0.005 # </script><script>alert(1)</script>\n",
		Resolved: "every point of every arm\n\tforward.weight = bfloat16", Data: "pump-vibration, invented data: 2000 training, 500 validation, 2000 test examples",
		Network: "conv1d out=6, relu, conv1d out=8, relu, dense 16, relu, dense 5: 1 973 parameters", Training: "SGD, momentum 0.9, rate 0.02, 15 epochs, batch 32",
		LongestSum: 3840, Metric: "test accuracy", Margin: 0.005, Confidence: 0.95,
		MarginFixed: time.Date(2026, 2, 3, 9, 30, 0, 0, time.UTC), Written: time.Date(2026, 2, 3, 11, 2, 0, 0, time.UTC),
		NoiseLow: -0.0012, NoiseHigh: 0.0012, NoiseFrom: "three replicates in binary64 and with pairwise sums", Planned: inventedReplicates,
		Classes:     []string{"sound", "unbalance", "misalignment", "bearing", "cavitation"},
		Warnings:    []string{"arm fp16-all: the loss scale 1000 is no power of two"},
		Cautions:    []string{"The data are invented; no pump was measured."},
		Answer:      "Within 0.5 percentage points of FP32 over 10 pairs: bf16 stochastic update. Not within it: bf16 nearest, E4M3 stored, and Q3.12, which did not learn.",
		StoreDigest: strings.Repeat("3fa9", 16), CodeVersion: "0.0.0-invented",
		Rerun: []string{"go run ./cmd/ulpine run experiments/plans/invented.toml", "go run ./cmd/ulpine show bf16-nearest/103"},
	}
	base := make([]float64, inventedReplicates)
	for k, a := range inventedArms {
		s.Arms = append(s.Arms, inventArm(a, k == 0))
		rng := rand.New(rand.NewPCG(uint64(k), 7))
		scores := make([]float64, inventedReplicates)
		for i := range scores {
			r := inventRun(a, i, rng)
			scores[i] = r.Epochs[len(r.Epochs)-1].TestMetric
			s.Runs = append(s.Runs, r)
		}
		if k == 0 {
			base = scores
			continue
		}
		s.Comparisons = append(s.Comparisons, inventComparison(a, "baseline", base, scores))
	}
	for _, c := range s.Runs[0].Counters {
		s.Volumes = append(s.Volumes, results.Volume{Layer: c.Layer, Point: c.Point, Values: 4_000_000})
	}
	s.Costs = inventCosts(s)
	inventDiagnosis(s)
	s.Arms[2].Guilty = []string{"update.master"}
	c := inventComparison(inventedArms[1], "bf16-nearest", lastScores(s, "bf16-nearest"), lastScores(s, inventedArms[1].slug))
	c.Headline = true
	s.Contrasts = []results.Comparison{c}
	inventItems(s)
	s.Comparisons[1].Warnings = []string{"skewness 1.4: the t interval is doubtful"}
	return s
}

// inventCosts charges every arm by its width.
func inventCosts(s *results.Study) *results.Costs {
	c := &results.Costs{
		Machine: "invented machine, 2026", Energy: "invented table", Answer: "E4M3 stored moves the fewest bytes.", Batch: 32,
		Assumptions: []string{"layers are not fused"}, Cautions: []string{"These are figures of a model, not measurements."}, Warnings: []string{"everything fits the cache"},
	}
	bill := func(slug string, bits float64) results.Bill {
		charge := func(scale float64) results.Charge {
			n := uint64(1e6 * bits * scale)
			return results.Charge{
				Bits: n, Weights: n / 4, Activations: n - n/4, Random: 16, Seconds: 1e-6 * bits, Binds: "memory", Picojoules: 3e5 * bits * scale,
				BitShare: bits / 32, Speedup: 32 / bits, EnergyShare: (bits + 4*scale) / 36, EnergyExtrapolated: bits < 16,
			}
		}
		return results.Bill{
			Arm: slug, TrainingBits: uint64(2e5 * bits), EndpointBits: uint64(6e4 * bits),
			Step: charge(1), StepTiled: charge(1.4), Inference: charge(0.1), InferenceTiled: charge(0.12),
		}
	}
	c.Reference = bill("", 32)
	for _, a := range s.Arms[1:] {
		c.Bills = append(c.Bills, bill(a.Slug, a.Bits))
	}
	return c
}

// lastScores are the test accuracies of an arm's runs.
func lastScores(s *results.Study, slug string) []float64 {
	var out []float64
	for _, r := range s.Runs {
		if r.Arm == slug {
			out = append(out, r.Epochs[len(r.Epochs)-1].TestMetric)
		}
	}
	return out
}

func inventArm(a inventedArm, baseline bool) results.Arm {
	out := results.Arm{Name: a.name, Slug: a.slug, Baseline: baseline, Bits: a.bits, LossScale: "none", Summary: "storage = " + a.format}
	if a.diverges > 0 {
		out.LossScale = "fixed 1024"
	}
	set := func(layer int, name, point, format, rounding, order string) {
		f := formats[format]
		w := 1 + f[0] + f[1]
		if format == "Q3.12" {
			w = 16
		}
		out.Settings = append(out.Settings, results.Setting{
			Layer: layer, Name: name, Point: point, Format: format, Exponent: f[0], Fraction: f[1], Bits: w,
			Rounding: rounding, Order: order, Overflow: "to infinity",
		})
	}
	set(-1, "input", "input", a.format, "nearest-even", "")
	set(-1, "loss", "loss.gradient", a.format, "nearest-even", "")
	for k, layer := range []string{"conv1d out=6", "conv1d out=8", "dense 16", "dense 5"} {
		stored := a.format
		if k == 3 && a.diverges > 0 {
			stored = "binary32" // the last layer of one arm is wider
		}
		gradient := stored
		if a.format == "E4M3" {
			gradient = "E5M2"
		}
		for _, p := range []struct{ point, format string }{
			{"forward.weight", stored},
			{"forward.activation", stored},
			{"input_gradient.weight", stored},
			{"input_gradient.gradient", gradient},
			{"input_gradient.result", gradient},
			{"weight_gradient.activation", stored},
			{"weight_gradient.gradient", gradient},
			{"weight_gradient.result", gradient},
		} {
			set(2*k, layer, p.point, p.format, "nearest-even", "")
		}
		for _, phase := range []string{"forward", "input_gradient", "weight_gradient"} {
			set(2*k, layer, phase+".product", "binary32", "nearest-even", "")
			order := "sequential"
			if a.format == "E6M9" {
				order = "wide"
			}
			set(2*k, layer, phase+".sum", a.sum, "nearest-even", order)
		}
		for _, p := range []string{"update.state", "update.step", "update.master"} {
			set(2*k, layer, p, a.update, a.rounding, "")
		}
	}
	return out
}

func inventRun(a inventedArm, i int, rng *rand.Rand) results.Run {
	r := results.Run{
		Arm: a.slug, Replicate: uint64(100 + i), State: results.Stored, Classes: inventedClasses, CodeVersion: "0.0.0-invented", Host: "nowhere",
		Started: time.Date(2026, 2, 3, 9, 31+i, 0, 0, time.UTC), Wall: time.Duration(1800+40*i) * time.Millisecond, Stalled: a.stalls,
	}
	r.Key = sha256.Sum256([]byte("key " + r.Name()))
	r.Digest = sha256.Sum256([]byte(r.Name()))
	skill := math.Exp(0.1 * rng.NormFloat64())
	stop := inventedEpochs * inventedSteps
	if i >= inventedReplicates-a.diverges {
		stop = inventedSteps*(4+i%3) + 17
		r.Diverged, r.DivergedStep = "NaN in the loss", stop
	}
	loss := func(t float64) float64 {
		if a.stalls {
			return 1.6 + 0.02*rng.NormFloat64()
		}
		return (a.floor + (1.6-a.floor)*math.Exp(-t/2.2)) * skill * math.Exp(0.15*rng.NormFloat64())
	}
	for n := range stop {
		r.Steps = append(r.Steps, loss(float64(n)/inventedSteps))
	}
	if r.Diverged != "" {
		r.Steps = append(r.Steps, math.NaN())
	}
	for e := range (stop + inventedSteps - 1) / inventedSteps {
		t := float64(e + 1)
		ep := results.Epoch{
			TrainLoss: loss(t), TrainMetric: math.NaN(), ValidationLoss: math.NaN(), ValidationMetric: math.NaN(),
			TestLoss: loss(t) * 1.25, TestMetric: 0.935 + 0.008*math.Log(1/skill) + a.shift + 0.002*rng.NormFloat64(), LossScale: 1,
		}
		if r.Diverged != "" {
			ep.TestMetric = 0.2
		}
		r.Epochs = append(r.Epochs, ep)
	}
	inventCounts(&r, a, rng)
	return r
}

func inventCounts(r *results.Run, a inventedArm, rng *rand.Rand) {
	r.Counters = []results.PointCounts{{Layer: 0, Name: "conv1d out=6", Point: "forward.sum"}, {Layer: 6, Name: "dense 5", Point: "weight_gradient.result"}}
	if a.format == "binary16" || a.format == "E4M3" {
		r.Counters[0].Counts.Overflow = rng.Uint64N(40)
		r.Counters[1].Counts = results.Counts{Underflow: 1000 + rng.Uint64N(250000), Saturated: rng.Uint64N(3)}
	}
	if r.Diverged != "" {
		r.Counters[0].Counts.NaN = 17
	}
	r.Confusion = make([]uint64, inventedClasses*inventedClasses)
	for t := range inventedClasses {
		right := uint64(340 + 12*t)
		if a.stalls {
			right = 80
		}
		right -= rng.Uint64N(20)
		r.Confusion[t*inventedClasses+t] = right
		r.Confusion[t*inventedClasses+(t+1)%inventedClasses] = 400 - right
	}
}

func inventComparison(a inventedArm, against string, base, scores []float64) results.Comparison {
	c := results.Comparison{
		Arm: a.slug, Against: against, Metric: "test accuracy", Margin: 0.005, Confidence: 0.95, N: len(scores), Planned: inventedReplicates,
		BootLow: math.NaN(), BootHigh: math.NaN(), Skewness: 0.3, P: 0.0004, Holm: 0.0021, PWorse: 0.9, HolmWorse: 1, Verdict: a.verdict, Diverged: a.diverges,
	}
	if a.stalls {
		c.Stalled = inventedReplicates
	}
	for i := range scores {
		c.Replicates = append(c.Replicates, uint64(100+i))
		c.Differences = append(c.Differences, scores[i]-base[i])
	}
	e := tInterval(c.Differences, c.Confidence)
	c.Mean, c.Low, c.High = e.Mean, e.Low, e.High
	c.SD = (e.High - e.Low) / 4.5 * math.Sqrt(float64(c.N)) // near enough for a made-up table
	c.BootLow, c.BootHigh = e.Low*0.97, e.High*0.98
	c.StudentLow, c.StudentHigh, c.FlipLow, c.FlipHigh = e.Low*1.1, e.High*1.1, math.Inf(-1), e.High
	c.Middle, c.RankLow, c.RankHigh, c.Offered = e.Mean, e.Low, e.High, "studentised bootstrap"
	c.DivergedLow, c.DivergedHigh = results.ExactRate(uint64(a.diverges), inventedReplicates, 0.95)
	for k := range 2 {
		c.Classes = append(c.Classes, results.ClassDifference{Class: k, N: c.N, Mean: -0.01, Low: -0.03, High: math.NaN(), Worst: -0.08, Replicate: 104, P: 0.02, Holm: 0.04})
	}
	return c
}

// inventDiagnosis is a closer look at one run.
func inventDiagnosis(s *results.Study) {
	d := results.Diagnosis{Arm: "e4m3", Replicate: 101}
	for e := range inventedEpochs {
		for _, c := range s.Runs[0].Counters {
			c.Counts = results.Counts{Underflow: uint64(e * e * 100), Saturated: uint64(max(0, 3-e))}
			d.Epochs = append(d.Epochs, results.EpochCounts{PointCounts: c, Epoch: e + 1})
		}
	}
	for k, p := range []string{"forward.weight", "forward.activation", "weight_gradient.result", "update.master"} {
		h := results.Histogram{Layer: 6, Name: "dense 5", Point: p, Epoch: 1 + k, Lowest: -18 - 3*k, Zeros: 400}
		for i := range 24 {
			h.Counts = append(h.Counts, uint64(1e5*math.Exp(-math.Pow(float64(i-14)/4, 2))))
		}
		d.Histograms = append(d.Histograms, h)
	}
	d.Histograms = append(d.Histograms, d.Histograms[0]) // a later epoch of the first point
	d.Histograms[4].Epoch = 9
	inventQualities(&d)
	baseline := results.Diagnosis{Arm: "baseline", Replicate: 101}
	inventQualities(&baseline)
	s.Diagnoses = []results.Diagnosis{d, {Arm: "unknown"}, baseline}
	s.Ranges = []results.Range{{Format: "E4M3", Least: -9, Normal: -6, Largest: 8}, {Format: "E5M2", Least: -16, Normal: -14, Largest: 15}}
}

// inventQualities lets a run lose more from epoch to epoch; what cannot be told,
// and what lost nothing, is among it.
func inventQualities(d *results.Diagnosis) {
	add := func(kind results.QualityKind, layer int, name, at string, epoch int, value float64) {
		d.Qualities = append(d.Qualities, results.Quality{Kind: kind, Layer: layer, Name: name, At: at, Epoch: epoch, Count: 256, Value: value})
	}
	for e := 1; e <= inventedEpochs; e++ {
		if e == 5 { // not looked at
			continue
		}
		t := float64(e)
		add(results.SignalToNoise, -1, "input", "input", e, math.Inf(1))
		add(results.SignalToNoise, -1, "loss", "loss.gradient", e, 20-t)
		for k, layer := range []string{"conv1d out=6 width=9 stride=2 pad=0", "conv1d out=8", "dense 16", "dense 5"} {
			add(results.SignalToNoise, 2*k, layer, "forward.weight", e, 40-t)
			add(results.SignalToNoise, 2*k, layer, "update.master", e, 30-2*t)
			add(results.SumsKept, 2*k, layer, "forward.sum", e, 1-1e-5*t*float64(k))
			add(results.UpdatesKept, 2*k, layer, "weight", e, 1-0.06*t)
			add(results.UpdateBias, 2*k, layer, "weight", e, -0.001*t)
			add(results.UpdatesStill, 2*k, layer, "weight", e, 0.01*t)
			add(results.GradientCosine, 2*k, layer, "bias", e, 1-1e-9*t)
		}
		add(results.GradientCosine, 6, "dense 5", "weight", e, math.NaN())
	}
}

// gridStudy is a study of a grid: splits by rounding by order of sums.
func gridStudy() *results.Study {
	s := manyArms(36)
	for i := range s.Arms[1:] {
		a := &s.Arms[i+1]
		a.Grid = "nine bits stored"
		a.Axes = []results.Coordinate{
			{Axis: "split", Value: fmt.Sprintf("E%dM%d", 2+i%6, 6-i%6)},
			{Axis: "rounding", Value: []string{"nearest-even", "stochastic"}[i/6%2]},
			{Axis: "order", Value: []string{"sequential", "chunk(64)", "wide"}[i/12]},
		}
		if i/6%2 == 1 {
			for k := range a.Settings {
				a.Settings[k].Rounding = "stochastic r=16 truncated"
			}
		}
	}
	return s
}

// manyArms is a study of n arms, for layouts.
func manyArms(n int) *results.Study {
	s := invented()
	s.Contrasts = nil
	template := s.Runs
	s.Arms, s.Comparisons, s.Runs = s.Arms[:1], nil, nil
	for _, r := range template {
		if r.Arm == "baseline" {
			s.Runs = append(s.Runs, r)
		}
	}
	base := append([]results.Run(nil), s.Runs...)
	for k := range n {
		a := inventedArms[1+k%(len(inventedArms)-1)]
		a.slug = fmt.Sprintf("%s-%d", a.slug, k)
		a.name = fmt.Sprintf("E%dM%d %s", 2+k%7, 1+k%20, strings.Repeat("long name ", k%9))
		arm := inventArm(a, false)
		arm.Bits = 4 + float64(k)*0.7
		s.Arms = append(s.Arms, arm)
		rng := rand.New(rand.NewPCG(uint64(k), 99))
		var scores, from []float64
		for i := range 3 {
			r := inventRun(a, i, rng)
			s.Runs = append(s.Runs, r)
			scores = append(scores, r.Epochs[len(r.Epochs)-1].TestMetric)
			from = append(from, base[i].Epochs[inventedEpochs-1].TestMetric)
		}
		s.Comparisons = append(s.Comparisons, inventComparison(a, "baseline", from, scores))
	}
	return s
}

// inventItems lets every pair differ in a few test examples, and arms be tuned over
// two learning rates and one loss scale.
func inventItems(s *results.Study) {
	for i := range s.Comparisons {
		c := &s.Comparisons[i]
		c.Items = &results.ItemComparison{
			Items: 2000, Replicates: c.N, Crossed: i%2 == 0, Method: "a bootstrap (invented)", Low: c.Low * 1.2, High: c.High * 1.2, ItemShare: 0.35,
			Gained: 12, Lost: 30, Changed: 60, Flips: []results.Flips{{Replicate: 100, Gained: 12, Lost: 30, Changed: 60, P: 0.008}},
		}
	}
	s.Comparisons[0].Items.Low = math.NaN()
	t := &results.Tuning{
		Metric: "validation accuracy", Replicates: 2, FirstSeed: 900, LearningRates: []string{"0.01", "0.02"}, LossScales: []string{"none"}, Runs: 28, Stored: 27,
	}
	for i, a := range s.Arms {
		t.Arms = append(t.Arms, results.TunedArm{Arm: a.Slug, Chosen: i%3 - 1, Edge: i == 2, Trials: []results.Trial{
			{LearningRate: "0.01", LossScale: "none", N: 2, Scores: []float64{0.9, 0.92}, Mean: 0.91},
			{LearningRate: "0.02", LossScale: "none", N: 1, Diverged: 1, Mean: math.NaN()},
		}})
	}
	s.Tuning = t
}
