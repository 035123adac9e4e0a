package compare

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"ulpine/results"
)

// settings are those of an arm that rounds update.master in its own way.
func settings(master string) []results.Setting {
	return []results.Setting{
		{Layer: -1, Point: "input", Rounding: "nearest-even"},
		{Layer: 0, Point: "forward.product", Rounding: "exact"},
		{Layer: 0, Point: "forward.sum", Rounding: "nearest-even"},
		{Layer: 0, Point: "update.master", Rounding: master},
		{Layer: 2, Point: "update.master", Rounding: master},
		{Layer: 2, Point: "weight_gradient.activation", Rounding: "reused"},
	}
}

var (
	armA = results.Arm{Name: "bf16 nearest", Slug: "a", Settings: settings("nearest-even")}
	armB = results.Arm{Name: "bf16 stochastic update", Slug: "b", Settings: settings("stochastic r=16 truncated")}
	armD = results.Arm{Name: "bf16 again", Slug: "d", Settings: settings("nearest-even")}
	armC = results.Arm{Name: "fp16 nearest, fp16 sums", Slug: "c", Settings: settings("toward-zero")}
)

func compared(slug string, v results.Verdict, n int) results.Comparison {
	return results.Comparison{
		Arm: slug, Against: "baseline", Metric: "test accuracy", Margin: 0.005, Confidence: 0.95,
		N: n, Planned: n, Mean: 0.0812345, SD: 0.01, Low: 0.07, High: 0.0924, Verdict: v,
	}
}

func TestAnswer(t *testing.T) {
	within := results.Verdict{Kind: results.Within}
	worse := results.Verdict{Kind: results.Worse}
	diverged := results.Verdict{Kind: results.Diverged, Diverged: 2, Of: 10}
	open := results.Verdict{Kind: results.Undecided, Pairs: 34}
	arms := []results.Arm{{Name: "baseline", Slug: "baseline", Baseline: true}, armA, armB, armC, armD}
	table := func(cs ...results.Comparison) results.Study { return results.Study{Arms: arms, Comparisons: cs} }
	contrast := func(change func(*results.Comparison)) results.Study {
		c := compared("b", within, 10)
		c.Against, c.Headline = "a", true
		change(&c)
		return results.Study{Arms: arms, Contrasts: []results.Comparison{c}}
	}
	partly := compared("a", results.Verdict{Kind: results.Undecided, Pairs: 10}, 6)
	partly.Planned = 10
	for _, c := range []struct {
		name  string
		study results.Study
		want  string
	}{
		{"no arm", results.Study{Arms: arms[:1]}, "There is nothing to compare: the plan has no arm besides the baseline."},
		{"no pair", table(compared("a", open, 0)), "There is no answer yet: no pair of runs is stored."},
		{
			"baseline diverged",
			results.Study{Arms: arms, Comparisons: []results.Comparison{compared("a", open, 10)}, BaselineProblem: "the baseline diverged in 1 of 10 replicates (103)"},
			"No verdict can be given: the baseline diverged in 1 of 10 replicates (103).",
		},
		{
			"the only arm within", table(compared("a", within, 10)),
			"The only arm, bf16 nearest, with nearest-even rounding, stays within the margin of 0.5 percentage points in test accuracy (10 pairs).",
		},
		{
			"the only arm worse", table(compared("a", worse, 10)),
			"No arm is shown to stay within the margin of 0.5 percentage points in test accuracy. bf16 nearest, with nearest-even rounding, is worse than the margin (10 pairs).",
		},
		{
			"all within", table(compared("a", within, 10), compared("b", within, 10)),
			"Both arms stay within the margin of 0.5 percentage points in test accuracy: bf16 nearest, with nearest-even rounding (10 pairs); " +
				"bf16 stochastic update, with stochastic rounding at update.master, nearest-even elsewhere (10 pairs).",
		},
		{
			"one of each", table(compared("a", worse, 10), compared("b", within, 10), compared("c", diverged, 10)),
			"Of 3 arms, one stays within the margin of 0.5 percentage points in test accuracy: bf16 stochastic update, with stochastic rounding at update.master, nearest-even elsewhere (10 pairs). " +
				"bf16 nearest, with nearest-even rounding, is worse than the margin (10 pairs). “fp16 nearest, fp16 sums” diverged in 2 of 10 replicates.",
		},
		{
			"undecided", table(compared("a", open, 10), compared("b", results.Verdict{}, 10), compared("c", results.Verdict{}, 1)),
			"No arm is shown to stay within the margin of 0.5 percentage points in test accuracy. bf16 nearest is undecided after 10 pairs; about 34 would settle it. " +
				"bf16 stochastic update is undecided after 10 pairs. “fp16 nearest, fp16 sums” is undecided: one pair gives no interval.",
		},
		{
			"not finished", table(partly),
			"No arm is shown to stay within the margin of 0.5 percentage points in test accuracy. bf16 nearest is undecided: 6 of 10 planned pairs stored.",
		},
		{
			"contrast", contrast(func(*results.Comparison) {}),
			"bf16 stochastic update scores 8.12 percentage points above bf16 nearest (95 % interval 7.00 to 9.24, 10 pairs): better, so within the margin of 0.5 percentage points.",
		},
		{
			"alike", table(compared("a", within, 10), compared("d", within, 10), compared("b", diverged, 10), compared("c", diverged, 10)),
			"Of 4 arms, 2 stay within the margin of 0.5 percentage points in test accuracy: bf16 nearest and bf16 again, with nearest-even rounding (10 pairs each). " +
				"bf16 stochastic update diverged in 2 of 10 replicates and “fp16 nearest, fp16 sums” in 2 of 10.",
		},
		{
			"contrast of losses", contrast(func(c *results.Comparison) {
				c.Metric, c.Margin, c.Mean, c.Low, c.High = "test loss", 0.02, -0.0234, -0.0311, 0.00001
				c.Verdict = open
			}),
			"bf16 stochastic update is worse by 0.0234 nats than bf16 nearest (95 % interval −0.0311 to 0.0000, 10 pairs): undecided after 10 pairs; about 34 would settle it.",
		},
		{
			"contrast near zero", contrast(func(c *results.Comparison) { c.Mean = -1e-6 }),
			"bf16 stochastic update differs by less than 0.01 percentage points from bf16 nearest (95 % interval 7.00 to 9.24, 10 pairs): better, so within the margin of 0.5 percentage points.",
		},
		{
			"contrast not begun",
			results.Study{Arms: arms, Comparisons: []results.Comparison{compared("a", within, 10)}, Contrasts: []results.Comparison{{Arm: "b", Against: "a"}}},
			"The only arm, bf16 nearest, with nearest-even rounding, stays within the margin of 0.5 percentage points in test accuracy (10 pairs). " +
				"bf16 stochastic update and bf16 nearest have no pair of runs stored yet.",
		},
		{
			"contrast worse", contrast(func(c *results.Comparison) { c.Mean, c.Low, c.High, c.Verdict = -0.05, -0.06, -0.04, worse }),
			"bf16 stochastic update scores 5.00 percentage points below bf16 nearest (95 % interval −6.00 to −4.00, 10 pairs): worse than the margin of 0.5 percentage points.",
		},
		{
			"contrast equal", contrast(func(c *results.Comparison) { c.Mean, c.SD, c.Low, c.High = 0, 0, 0, 0 }),
			"bf16 stochastic update does not differ in any pair from bf16 nearest (95 % interval 0.00 to 0.00, 10 pairs): within the margin of 0.5 percentage points.",
		},
		{
			"contrast of one pair", contrast(func(c *results.Comparison) {
				c.N, c.Planned, c.SD, c.Low, c.High, c.Verdict = 1, 1, math.NaN(), math.NaN(), math.NaN(), results.Verdict{}
			}),
			"bf16 stochastic update scores 8.12 percentage points above bf16 nearest (1 pair, no interval): undecided: one pair gives no interval.",
		},
		{
			"contrast diverged", contrast(func(c *results.Comparison) { c.Mean, c.Low, c.Verdict = math.NaN(), math.NaN(), diverged }),
			"bf16 stochastic update differs by an amount that is no number from bf16 nearest (10 pairs, no interval): it diverged in 2 of 10 replicates.",
		},
		{
			"contrast with a diverged arm", contrast(func(c *results.Comparison) { c.AgainstDiverged, c.Verdict = 1, results.Verdict{} }),
			"bf16 stochastic update scores 8.12 percentage points above bf16 nearest (95 % interval 7.00 to 9.24, 10 pairs): undecided, for the other arm diverged in 1 of 10 replicates.",
		},
	} {
		if got := Answer(&c.study); got != c.want {
			t.Errorf("%s\ngot  %s\nwant %s", c.name, got, c.want)
		}
	}
	both := table(compared("a", within, 10))
	c := contrast(func(*results.Comparison) {})
	both.Contrasts = c.Contrasts
	want := Answer(&results.Study{Arms: arms, Comparisons: both.Comparisons}) + " " + Answer(&c)
	if got := Answer(&both); got != want {
		t.Errorf("arms and contrast\ngot  %s\nwant %s", got, want)
	}
}

// TestAnswerAboutManyArms: a grid's answer stays short enough to be read aloud.
func TestAnswerAboutManyArms(t *testing.T) {
	var s results.Study
	for i, kind := range []results.VerdictKind{results.Within, results.Worse, results.Diverged, results.Undecided} {
		for k := range 8 {
			slug := fmt.Sprintf("%c%d", "abcd"[i], k)
			s.Arms = append(s.Arms, results.Arm{Name: slug, Slug: slug})
			v := results.Verdict{Kind: kind}
			switch kind {
			case results.Diverged:
				v.Diverged, v.Of = k+1, 10
			case results.Undecided:
				v.Pairs = 20 + 5*k
			}
			s.Comparisons = append(s.Comparisons, compared(slug, v, 10))
		}
	}
	want := "Of 32 arms, 8 stay within the margin of 0.5 percentage points in test accuracy: a0, a1, a2, a3, a4 and 3 more, with rounding as planned (10 pairs each). " +
		"b0, b1, b2, b3, b4 and 3 more, with rounding as planned, are worse than the margin (10 pairs each). " +
		"c0 diverged in 1 of 10 replicates, c1 in 2 of 10, c2 in 3 of 10, c3 in 4 of 10, c4 in 5 of 10 and 3 more arms in some. " +
		"d0, d1, d2, d3, d4 and 3 more are undecided after 10 pairs; about 20 to 55 would settle them."
	if got := Answer(&s); got != want {
		t.Errorf("got  %s\nwant %s", got, want)
	}
	six := s.Comparisons[:6]
	if got := Answer(&results.Study{Arms: s.Arms, Comparisons: six}); !strings.Contains(got, "a4 and a5,") {
		t.Errorf("six are named: %s", got)
	}
}

func TestFigures(t *testing.T) {
	share := newMeasure(&results.Comparison{Metric: "test accuracy", Margin: 0.002})
	loss := newMeasure(&results.Comparison{Metric: "test loss", Margin: 0.05})
	other := newMeasure(&results.Comparison{Metric: "speed", Margin: math.NaN()})
	for got, want := range map[string]string{
		share.figure(-0.01234):                "−1.234",
		share.figure(-1e-7):                   "0.000",
		share.span(math.Inf(-1), math.Inf(1)): "−∞ to +∞",
		share.margin(0.01):                    "1 percentage point",
		share.margin(0.002):                   "0.2 percentage points",
		loss.margin(0.05):                     "0.05 nats",
		loss.figure(-0.0123):                  "−0.012",
		other.with(other.figure(-2)):          "−2.0000",
	} {
		if got != want {
			t.Errorf("got %s, want %s", got, want)
		}
	}
}

func TestRounding(t *testing.T) {
	many := results.Arm{}
	for _, p := range []string{"input", "forward.weight", "forward.activation", "update.master"} {
		many.Settings = append(many.Settings, results.Setting{Point: p, Rounding: "stochastic r=8 centred"})
	}
	mixed := results.Arm{Settings: append(settings("stochastic r=16 truncated"), results.Setting{Point: "update.step", Rounding: "to-odd"})}
	exact := results.Arm{Settings: []results.Setting{{Point: "forward.product", Rounding: "exact"}}}
	for want, a := range map[string]*results.Arm{
		"nearest-even rounding": &armA,
		"stochastic rounding at update.master, nearest-even elsewhere":  &armB,
		"toward-zero rounding at update.master, nearest-even elsewhere": &armC,
		"stochastic rounding": &many,
		"stochastic rounding at update.master, to-odd at update.step, nearest-even elsewhere": &mixed,
		"no rounding":         &exact,
		"rounding as planned": nil,
	} {
		if got := Rounding(a); got != want {
			t.Errorf("got %q, want %q", got, want)
		}
	}
	many.Settings = append(many.Settings, results.Setting{Point: "forward.sum", Rounding: "nearest-even"})
	if got, want := Rounding(&many), "stochastic rounding at 4 points, nearest-even elsewhere"; got != want {
		t.Errorf("got %q, want %q", got, want)
	}
}

func TestAmount(t *testing.T) {
	for x, want := range map[float64]string{
		0.005: "0.005", 0.0812345: "0.0812", -0.1: "−0.1", 1: "1", 95: "95", 99.9: "99.9", 12345: "12300",
		0: "0", 1e-9: "1e−09", 0.00001: "0.00001", 2.0 / 3: "0.667",
	} {
		if got := amount(x); got != want {
			t.Errorf("%v printed as %s, want %s", x, got, want)
		}
	}
}
