package report

import (
	"math"
	"strings"

	"ulpine/results"
)

// study is an invented study with a name, for tests that try them all.
type study struct {
	name string
	*results.Study
}

// studies are the invented study and what is left of it in odd cases.
func studies() []study {
	out := []study{{"usual", invented()}, {"empty", &results.Study{}}, {"forty arms", manyArms(40)}, {"grid", gridStudy()}}
	add := func(name string, change func(*results.Study)) {
		s := invented()
		change(s)
		out = append(out, study{name, s})
	}
	add("baseline only", func(s *results.Study) {
		s.Arms, s.Runs, s.Comparisons, s.Contrasts = s.Arms[:1], s.Runs[:inventedReplicates], nil, nil
	})
	add("one replicate", oneReplicate)
	add("all diverged", allDiverged)
	add("nothing finite", nothingFinite)
	add("loss", func(s *results.Study) {
		s.Metric = "test loss"
		for i := range s.Comparisons {
			s.Comparisons[i].Metric = s.Metric
		}
	})
	add("unknown metric", func(s *results.Study) { s.Metric = "epochs to reach 0.9" })
	add("long names", func(s *results.Study) {
		for i := range s.Arms {
			s.Arms[i].Name = strings.Repeat("unbrokenname", 20) + s.Arms[i].Slug
		}
		for i := range s.Classes {
			s.Classes[i] = strings.Repeat("class", 30)
		}
		s.Metric, s.Answer = "test accuracy", strings.Repeat("endlessword", 40)
	})
	add("no steps", func(s *results.Study) {
		for i := range s.Runs {
			s.Runs[i].Steps = nil
		}
	})
	add("own margins", func(s *results.Study) {
		c := s.Contrasts[0]
		c.Margin = 0.02
		s.Contrasts = append(s.Contrasts, c, c)
		s.Contrasts[2].Margin = math.NaN()
	})
	add("held out at the end", func(s *results.Study) {
		for i := range s.Runs {
			for e := range s.Runs[i].Epochs[:len(s.Runs[i].Epochs)-1] {
				s.Runs[i].Epochs[e].TestLoss, s.Runs[i].Epochs[e].TestMetric = math.NaN(), math.NaN()
			}
		}
	})
	add("zero losses", func(s *results.Study) {
		for i := range s.Runs {
			for k := range s.Runs[i].Steps {
				s.Runs[i].Steps[k] = 0
			}
		}
	})
	return out
}

// oneReplicate leaves no interval.
func oneReplicate(s *results.Study) {
	var runs []results.Run
	for _, r := range s.Runs {
		if r.Replicate == 100 {
			runs = append(runs, r)
		}
	}
	s.Runs = runs
	for _, cs := range [][]results.Comparison{s.Comparisons, s.Contrasts} {
		for i := range cs {
			c := &cs[i]
			c.N, c.Replicates, c.Differences = 1, c.Replicates[:1], c.Differences[:1]
			c.Mean, c.Verdict = c.Differences[0], results.Verdict{}
			c.SD, c.Low, c.High, c.BootLow, c.BootHigh = math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN()
			c.StudentLow, c.StudentHigh, c.FlipLow, c.FlipHigh, c.RankLow, c.RankHigh = math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN()
		}
	}
}

// allDiverged lets every run but the baseline's break down in its first step.
func allDiverged(s *results.Study) {
	for i := range s.Runs {
		r := &s.Runs[i]
		if r.Arm == "baseline" {
			continue
		}
		r.Diverged, r.DivergedStep, r.Steps, r.Confusion, r.Classes = "NaN in the loss", 0, []float64{math.NaN()}, nil, 0
		r.Epochs = []results.Epoch{{TrainLoss: math.NaN(), TestLoss: math.NaN(), TestMetric: math.NaN()}}
	}
	for i := range s.Comparisons {
		c := &s.Comparisons[i]
		c.Verdict = results.Verdict{Kind: results.Diverged, Diverged: 10, Of: 10}
		c.Mean, c.SD, c.Low, c.High = math.NaN(), math.NaN(), math.NaN(), math.NaN()
		for k := range c.Differences {
			c.Differences[k] = math.NaN()
		}
	}
}

// nothingFinite replaces every number that can be missing.
func nothingFinite(s *results.Study) {
	allDiverged(s)
	s.Margin, s.Confidence, s.NoiseLow, s.NoiseHigh = math.NaN(), math.NaN(), math.NaN(), math.Inf(1)
	for i := range s.Arms {
		s.Arms[i].Bits = math.NaN()
	}
	for i := range s.Runs {
		r := &s.Runs[i]
		for k := range r.Steps {
			r.Steps[k] = math.Inf(1)
		}
		for k := range r.Epochs {
			r.Epochs[k] = results.Epoch{TrainLoss: math.Inf(1), TestLoss: math.NaN(), TestMetric: math.NaN()}
		}
	}
	for i := range s.Comparisons {
		c := &s.Comparisons[i]
		c.Margin, c.Confidence, c.P, c.Holm, c.Skewness = math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN()
		c.Low, c.High = math.Inf(-1), math.Inf(1)
	}
}
