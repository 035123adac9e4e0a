package report

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"ulpine/results"
)

// bare is a study of a baseline and arms that set a point or two; bits of
// 32-wide settings.
func bare(arms ...results.Arm) *results.Study {
	set := func(point, format string, bits int) results.Setting {
		return results.Setting{Layer: 0, Name: "dense 5", Point: point, Format: format, Bits: bits, Rounding: "nearest-even"}
	}
	s := &results.Study{Metric: "test accuracy", Margin: 0.01, Confidence: 0.95}
	s.Arms = []results.Arm{{Name: "FP32", Slug: "baseline", Baseline: true, Bits: 32, Settings: []results.Setting{set("forward.weight", "binary32", 32), set("forward.sum", "binary32", 32), set("update.master", "binary32", 32)}}}
	for _, a := range arms {
		base := slices.Clone(s.Arms[0].Settings)
		for _, own := range a.Settings {
			i := slices.IndexFunc(base, func(x results.Setting) bool { return x.Point == own.Point })
			own.Layer, own.Name = 0, "dense 5"
			base[i] = own
		}
		a.Settings = base
		s.Arms = append(s.Arms, a)
	}
	return s
}

// judge gives an arm a verdict.
func judge(s *results.Study, slug string, kind results.VerdictKind) {
	s.Comparisons = append(s.Comparisons, results.Comparison{
		Arm: slug, Against: "baseline", Metric: s.Metric, Margin: s.Margin, Confidence: 0.95, N: 8,
		Mean: -0.001, Low: -0.004, High: 0.002, Verdict: results.Verdict{Kind: kind},
	})
}

func oneSetting(point, format string, bits int, rounding string) results.Setting {
	return results.Setting{Point: point, Format: format, Bits: bits, Rounding: rounding}
}

// TestAdvice: the fewest bits within the margin win, an arm that changes one
// point is evidence for it alone, and narrower failures are named.
func TestAdvice(t *testing.T) {
	s := bare(
		results.Arm{Name: "one", Slug: "one", Bits: 20, Settings: []results.Setting{oneSetting("forward.weight", "bfloat16", 16, "nearest-even")}},
		results.Arm{Name: "two", Slug: "two", Bits: 10, Settings: []results.Setting{oneSetting("forward.weight", "E4M3", 8, "nearest-even"), oneSetting("forward.sum", "binary16", 16, "nearest-even")}},
		results.Arm{Name: "three", Slug: "three", Bits: 9, Settings: []results.Setting{oneSetting("forward.weight", "E2M1", 4, "nearest-even")}},
		results.Arm{Name: "four", Slug: "four", Bits: 12, Settings: []results.Setting{oneSetting("forward.weight", "E5M2", 8, "nearest-even")}},
	)
	judge(s, "one", results.Within)
	judge(s, "two", results.Within)
	judge(s, "three", results.Undecided)
	judge(s, "four", results.Worse)
	find := func(point string) advice {
		for _, a := range newView(s).advices() {
			if pointName(a.at) == point {
				return a
			}
		}
		t.Fatalf("nothing about %s", point)
		return advice{}
	}
	w := find("forward.weight")
	if w.arm == nil || w.arm.Slug != "two" || w.setting.Bits != 8 || w.alone || fmt.Sprint(w.narrower) != "[3 three (E2M1, undecided)]" {
		t.Errorf("weights: %+v", w)
	}
	if m := find("update.master"); m.arm != nil || m.setting.Format != "binary32" || len(m.narrower) != 0 {
		t.Errorf("master: %+v", m)
	}
	s.Comparisons[1].Verdict.Kind = results.Diverged
	if w = find("forward.weight"); w.arm.Slug != "one" || !w.alone || len(w.narrower) != 3 {
		t.Errorf("without the second: %+v", w)
	}
	text := fmt.Sprint(newView(s).recommendation())
	if !strings.Contains(text, "1 one is the arm within the margin with the fewest bits") || !strings.Contains(text, "alone") {
		t.Error(text)
	}
	for i := range s.Comparisons {
		s.Comparisons[i].Verdict.Kind = results.Undecided
	}
	if r := newView(s).recommendation(); r.Table != nil || !strings.Contains(r.Lead[0], "No arm is shown to stay within the margin") {
		t.Errorf("with nothing within: %+v", r)
	}
}

// TestAdviceOfLayers: where layers differ, the widest is what was tested.
func TestAdviceOfLayers(t *testing.T) {
	v := newView(invented())
	v.arms[4].Comparison.Verdict = results.Verdict{Kind: results.Within} // its last layer is in FP32
	for _, a := range v.advices() {
		if pointName(a.at) == "forward.weight" && (a.arm.Slug == "fp16-all" || a.setting.Bits != 16) {
			t.Errorf("%+v", a)
		}
	}
	s, mixed, there := widest(v.arms[4], station{"forward", "weight"})
	if s.Bits != 32 || !mixed || !there {
		t.Errorf("widest %+v, %v, %v", s, mixed, there)
	}
}

// TestTwins: pairs that differ in the rounding alone, and no others.
func TestTwins(t *testing.T) {
	ws := newView(invented()).twins()
	if len(ws) != 1 || ws[0].stochastic.Slug != "bf16-stochastic-update" || ws[0].nearest.Slug != "bf16-nearest" || ws[0].contrast == nil ||
		fmt.Sprint(ws[0].points) != "[update.state update.step update.master]" {
		t.Fatalf("%+v", ws)
	}
	for name, change := range map[string]func(a *results.Arm){
		"format":     func(a *results.Arm) { a.Settings[0].Format = "binary16" },
		"order":      func(a *results.Arm) { a.Settings[5].Order = "wide" },
		"loss scale": func(a *results.Arm) { a.LossScale = "fixed 2" },
		"one less":   func(a *results.Arm) { a.Settings = a.Settings[1:] },
		"directed": func(a *results.Arm) {
			for i := range a.Settings {
				a.Settings[i].Rounding = "toward-zero"
			}
		},
	} {
		s := invented()
		change(&s.Arms[2])
		if ws := newView(s).twins(); len(ws) != 0 {
			t.Errorf("%s: still a pair", name)
		}
	}
	// Half of the grid's 36 arms are stochastic, each with one to nearest beside it.
	if n := len(newView(gridStudy()).twins()); n != 18 {
		t.Errorf("in a grid: %d pairs", n)
	}
}

func TestShares(t *testing.T) {
	s := bare()
	s.Volumes = []results.Volume{{Layer: 0, Point: "forward.weight", Values: 1000}}
	full := results.Run{Arm: "baseline", Replicate: 1, Steps: make([]float64, 10)}
	half := results.Run{Arm: "baseline", Replicate: 2, Steps: make([]float64, 5), Diverged: "NaN"}
	s.Runs = []results.Run{full, half}
	v := newView(s)
	c := results.PointCounts{Layer: 0, Point: "forward.weight"}
	near(t, "share", v.share(v.baseline, c, 30), 30.0/1500, 1e-12)
	c.Point = "forward.sum"
	if x := v.share(v.baseline, c, 30); !math.IsNaN(x) {
		t.Errorf("a share of an unknown number: %v", x)
	}
	for share, want := range map[float64]string{0: "0", 4e-8: "<0.1", 3.2e-6: "3.2", 85e-6: "85", 0.0012: "1.2k", 0.85: "850k", 1: "all"} {
		if got := inMillion(share); got != want {
			t.Errorf("%v in a million: %q, want %q", share, got, want)
		}
	}
	if fullness(1) != 1 || fullness(1e-9) != 0 || math.Abs(fullness(1e-7/math.Sqrt(1e-7))-0.5) > 1e-9 {
		t.Error("cells fill wrongly")
	}
}

// TestRangeGroups: most events first, a dozen shown, the rest folded away.
func TestRangeGroups(t *testing.T) {
	s := bare()
	r := results.Run{Arm: "baseline"}
	for i := range 15 {
		r.Counters = append(r.Counters, results.PointCounts{Layer: i, Name: "dense", Point: "forward.weight", Counts: results.Counts{Underflow: uint64(i)}})
	}
	s.Runs = []results.Run{r}
	d := counterSection(newView(s)).(rangesData)
	g := d.Groups[0]
	if len(g.Rows) != 12 || g.Rows[0][0] != "15 dense" || g.More == nil || len(g.More.Rows) != 2 || g.Rest != "2 more points of FP32" || !strings.HasPrefix(d.Notes[0], "1 other counted point") {
		t.Errorf("%+v", d)
	}
	if n := len(newView(s).rangeTable().Rows); n != 14 {
		t.Errorf("%d rows in one table", n)
	}
}

// TestHistograms: the last epoch of a point counts, and what lies outside is
// counted by whole binades.
func TestHistograms(t *testing.T) {
	all := newView(invented()).histograms()
	if len(all) != 4 || all[0].Epoch != 9 || all[0].format != "E4M3" || all[3].limits != nil {
		t.Fatalf("%+v", all)
	}
	s := seen{Histogram: results.Histogram{Lowest: -11, Counts: []uint64{1, 2, 4, 8}, Zeros: 5}, limits: &results.Range{Least: -9, Normal: -6, Largest: -9}}
	if below, above := s.outside(); below != 3 || above != 8 || total(&s.Histogram) != 20 {
		t.Errorf("%d below, %d above", below, above)
	}
	if got := s.words(); got != "15 % below, 40 % above, 25 % zeros" {
		t.Errorf("%q", got)
	}
}

func TestEpochRows(t *testing.T) {
	v := newView(invented())
	rows := v.epochRowsOf()
	if len(rows) != 2 || len(rows[0].epochs) != inventedEpochs || rows[0].epochs[2].Underflow != 400 || rows[0].epochs[0].Saturated != 3 {
		t.Fatalf("%+v", rows)
	}
	near(t, "share of an epoch", v.epochShare(&rows[0], 2, 400), 400*inventedEpochs/4e6, 1e-12)
}

// TestSampledEpochs: counts of samples are shares of what was looked at, and an
// epoch that was not looked at has no cell.
func TestSampledEpochs(t *testing.T) {
	s := invented()
	at := results.PointCounts{Layer: 6, Name: "dense 5", Point: "forward.sum"}
	hit, calm := at, at
	hit.Counts.Underflow, calm.Point = 5, "forward.weight"
	s.Diagnoses = []results.Diagnosis{{Arm: "e4m3", Replicate: 101, Epochs: []results.EpochCounts{
		{PointCounts: at, Epoch: 1, Values: 100}, {PointCounts: hit, Epoch: 3, Values: 50}, {PointCounts: calm, Epoch: 3, Values: 50},
	}}}
	v := newView(s)
	rows := v.epochRowsOf()
	if len(rows) != 1 || !rows[0].sees(0) || rows[0].sees(1) || !rows[0].sees(2) || rows[0].sees(3) {
		t.Fatalf("%+v", rows)
	}
	near(t, "share of a sample", v.epochShare(&rows[0], 2, 5), 0.1, 1e-12)
}

// TestGridRoles: roundings become lines, the longest axis runs across, the rest
// parts the plots.
func TestGridRoles(t *testing.T) {
	gs := newView(gridStudy()).grids()
	if len(gs) != 1 || gs[0].lines.name != "rounding" || gs[0].across.name != "split" || len(gs[0].across.values) != 6 || len(gs[0].panels) != 1 || gs[0].panels[0].name != "order" {
		t.Fatalf("%+v", gs)
	}
	ps := gs[0].plots()
	if len(ps) != 3 || ps[1].head != "order chunk(64)" || len(ps[1].arms) != 12 {
		t.Errorf("%+v", ps)
	}
	if (axisView{values: []string{"E4M3", "nearest-even"}}).rounding() || !(axisView{values: []string{"to-odd", "stochastic"}}).rounding() {
		t.Error("roundings are told wrongly")
	}
	one := gridView{arms: []*armView{{Arm: results.Arm{Axes: []results.Coordinate{{Axis: "rounding", Value: "stochastic"}}}}}}
	if one.assign(); one.across.name != "rounding" {
		t.Errorf("a grid of roundings alone: %+v", one)
	}
}

func TestSentences(t *testing.T) {
	v := newView(&results.Study{Answer: "Of 2 arms, one stays (0.5 pp. in all. 8 pairs). “A. B” is worse. e4m3 is better by 0.3 points. Last."})
	v.Comparisons = make([]results.Comparison, 1)
	got := v.sentences()
	if len(got) != 4 || got[1] != "“A. B” is worse." || strings.Join(got, " ") != v.answer() {
		t.Errorf("%q", got)
	}
	v.Answer = strings.Repeat("One more. ", 8)
	var page bytes.Buffer
	if err := v.html(&page); err != nil {
		t.Fatal(err)
	}
	if n := strings.Count(page.String(), ">One more.</span>"); n != 8 || !strings.Contains(page.String(), "<summary>2 more sentences</summary>") {
		t.Errorf("%d sentences of 8", n)
	}
	if got := newView(&results.Study{}).sentences(); len(got) != 1 {
		t.Errorf("%q", got)
	}
}

func TestCostWords(t *testing.T) {
	for got, want := range map[string]string{
		byteWords(8): "1 B", byteWords(8 * 1536): "1.5 KiB", byteWords(8 << 20): "1 MiB", byteSpan(8<<20, 16<<20): "1 to 2 MiB", byteSpan(8, 8<<20): "1 B to 1 MiB",
		shareSpan(0.5, 0.5): "50", shareSpan(0.5, 0.612): "50 to 61.2", span("memory", "arithmetic"): "memory to arithmetic", starred("2", true): "2 *",
	} {
		if got != want {
			t.Errorf("%q, want %q", got, want)
		}
	}
	s := invented()
	page := pageOf(t, s)
	for _, want := range []string{"layers are not fused", "not measurements", "invented machine, 2026", "everything fits the cache"} {
		if !strings.Contains(page, want) {
			t.Errorf("the page does not say %q", want)
		}
	}
	s.Costs = nil
	if page = pageOf(t, s); strings.Contains(page, `id="costs"`) || strings.Contains(page, "score-against-energy") {
		t.Error("costs that were not worked out have a section")
	}
}
