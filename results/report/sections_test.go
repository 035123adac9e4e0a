package report

import (
	"math"
	"strings"
	"testing"

	"ulpine/results"
)

// TestChanges: points that round alike share a row, and layers are named where
// they are not all.
func TestChanges(t *testing.T) {
	s := invented()
	v := newView(s)
	if rows := v.changes(v.baseline); len(rows) != 0 {
		t.Errorf("the baseline differs from itself: %v", rows)
	}
	one := v.changes(v.arms[1])
	if len(one) != 2 || one[0][1] != "bfloat16" || !strings.HasPrefix(one[0][5], "input; loss.gradient; forward.weight") ||
		one[1][2] != "stochastic r=16 truncated" || one[1][5] != "update.state; update.step; update.master" {
		t.Errorf("%q", one)
	}
	if four := v.changes(v.arms[4]); !strings.Contains(four[0][5], "forward.weight (all but 7 dense 5)") {
		t.Errorf("%q", four[0])
	}
	for i := range s.Arms[1].Settings { // one layer alone
		if x := &s.Arms[1].Settings[i]; x.Layer != 2 {
			*x = s.Arms[0].Settings[i]
		}
	}
	if one = newView(s).changes(newView(s).arms[1]); !strings.HasPrefix(one[0][5], "forward.weight (3 conv1d out=8)") {
		t.Errorf("%q", one)
	}
}

func TestTallies(t *testing.T) {
	point := func(name string, over, under uint64) results.PointCounts {
		return results.PointCounts{Name: name, Point: "forward.sum", Counts: results.Counts{Overflow: over, Underflow: under}}
	}
	a := &armView{Runs: []*results.Run{
		{Counters: []results.PointCounts{point("a", 1, 10), point("b", 2, 0)}},
		{Counters: []results.PointCounts{point("b", 3, 0), point("a", 4, 100)}},
	}}
	got := tallies(a)
	if len(got) != 2 || got[0].Counts.Overflow != 5 || got[0].Counts.Underflow != 110 || got[1].Counts.Overflow != 5 {
		t.Errorf("%+v", got)
	}
}

func TestRecall(t *testing.T) {
	s := invented()
	run := func(seed uint64, confusion ...uint64) *results.Run {
		return &results.Run{Replicate: seed, Classes: 2, Confusion: confusion}
	}
	v := newView(s)
	a := &armView{Runs: []*results.Run{run(7, 90, 10, 0, 100), run(8, 80, 20, 5, 95), {Classes: 3, Confusion: []uint64{1}}}}
	r := v.recalls(a)
	if len(r) != 2 || r[0].Worst.Replicate != 8 || r[0].Hit != 80 || r[0].Of != 100 || r[0].Mean.N != 2 {
		t.Fatalf("%+v", r)
	}
	near(t, "mean recall", r[0].Mean.Mean, 0.85, 1e-15)
	// 80 of 100: 0.708 to 0.873, as tables of exact 95 % intervals have it (from memory).
	near(t, "low", r[0].Low, 0.7081573, 1e-6)
	near(t, "high", r[0].High, 0.8733444, 1e-6)
	sum, classes, n := pooled(a)
	if classes != 2 || n != 2 || sum[0] != 170 || sum[2] != 5 {
		t.Errorf("pooled %v, %d classes, %d runs", sum, classes, n)
	}
	if lo := leastRecall([][]recall{r}); lo != 0.2 { // below 0.215, the lower end of two replicates' interval
		t.Errorf("scale from %v", lo)
	}
	if lo := leastRecall([][]recall{{{Mean: estimate{0.95, 0.93, 0.97, 10}, Of: 100, Hit: 92}}}); lo != 0.9 {
		t.Errorf("scale from %v", lo)
	}
}

func TestPareto(t *testing.T) {
	s := invented()
	v := newView(s)
	var names []string
	for _, a := range pareto(v, &expenses[0], v.scored(&expenses[0])) {
		names = append(names, a.Slug)
	}
	// E4M3 has the fewest bits; the stochastic update scores better with more; no
	// arm beats it; the diverged arm does not count.
	if got := strings.Join(names, " "); got != "e4m3 bf16-stochastic-update" {
		t.Errorf("Pareto set: %s", got)
	}
	s.Metric = "test loss"
	v = newView(s)
	best := pareto(v, &expenses[0], v.scored(&expenses[0]))
	for i := 1; i < len(best); i++ {
		if best[i].Score.Mean >= best[i-1].Score.Mean || best[i].Bits <= best[i-1].Bits {
			t.Errorf("with a loss: %v %v after %v %v", best[i].Bits, best[i].Score.Mean, best[i-1].Bits, best[i-1].Score.Mean)
		}
	}
}

func TestFrontBounds(t *testing.T) {
	v := newView(invented())
	for _, a := range v.others() {
		low, high := v.frontBounds(a)
		c := a.Comparison
		near(t, a.Slug+" low", low-a.Score.Mean, c.Low-c.Mean, 1e-12)
		near(t, a.Slug+" high", high-a.Score.Mean, c.High-c.Mean, 1e-12)
	}
	v.words = newScoreWords("test loss", 0.01) // a gain of 1 is a loss lower by 1
	a := v.arms[1]
	a.Comparison = &results.Comparison{Mean: 0.1, Low: 0.05, High: 0.3}
	a.Score.Mean = 2
	if low, high := v.frontBounds(a); math.Abs(low-1.8) > 1e-12 || math.Abs(high-2.05) > 1e-12 {
		t.Errorf("with a loss: %v to %v", low, high)
	}
}

func TestShortfall(t *testing.T) {
	v := newView(invented())
	s := v.scoreScale(v.scored(&expenses[0]), frame{y0: 10, y1: 300})
	if !(s.At(0.95) < s.At(0.93) && s.At(0.93) < s.At(0.5)) {
		t.Error("a better score is not higher")
	}
	if d := s.At(1); math.IsNaN(d) || d < 5 {
		t.Errorf("a perfect score is at %v", d)
	}
}

func TestWords(t *testing.T) {
	w := newScoreWords("test accuracy", 0.005)
	for got, want := range map[string]string{
		w.diff(-0.0082): "−0.82", w.diff(0.01): "+1.00", w.diff(0): "0.00", w.diff(-1e-9): "−0.00", w.diff(1e-9): "+0.00", w.diff(math.Copysign(0, -1)): "0.00", w.diff(math.NaN()): "-",
		w.value(0.93412): "93.41 %", w.value(math.NaN()): "-", w.interval(-0.01, 0.002): "[−1.00, +0.20]",
		w.interval(math.NaN(), 1): "-", w.interval(math.Inf(-1), math.Inf(1)): "[−∞, +∞]",
		newScoreWords("test loss", 0.01).diff(-0.00321): "−0.0032", newScoreWords("test loss", 0.01).value(0.31415): "0.3141",
		percentage(0.95): "95 %", percentage(0.999): "99.9 %", count(1234567): "1\u202f234\u202f567", count(999): "999",
		verdictWords(results.Verdict{Kind: results.Undecided}):                     "undecided",
		verdictWords(results.Verdict{Kind: results.Undecided, Pairs: 46}):          "undecided (needs about 46 pairs)",
		verdictWords(results.Verdict{Kind: results.Diverged, Diverged: 2, Of: 10}): "diverged 2 of 10",
		probability(0.00001): "<0.0001", probability(0.05): "0.0500", probability(math.NaN()): "-",
		plain("\x1b[31ma\u202eb\n c"): "\ufffd[31ma\ufffdb  c",
	} {
		if got != want {
			t.Errorf("%q, want %q", got, want)
		}
	}
	for m, want := range map[float64]int{0.5: 1, 1: 0, 0.25: 2, 0.125: 3, 100: 0} {
		if got := marginDigits(m); got != want {
			t.Errorf("margin %v with %d decimals", m, got)
		}
	}
}
