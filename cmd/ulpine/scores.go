package main

import (
	"math"

	"ulpine/results"
	"ulpine/results/store"
)

// scores reads of each run the metric that its plan claims.
type scores struct {
	store  *store.Store
	claims map[results.Hash]results.Metric // by study
}

func newScores(s *store.Store) (*scores, error) {
	studies, err := s.Studies()
	if err != nil {
		return nil, err
	}
	all := &scores{s, map[results.Hash]results.Metric{}}
	for _, study := range studies {
		if m, known := results.FindMetric(study.Fixed.Claim.Metric); known {
			all.claims[study.ID] = m
		}
	}
	return all, nil
}

// metric is the one that a study claims; of runs without a study the commonest.
func (s *scores) metric(study results.Hash) results.Metric {
	if m, known := s.claims[study]; known {
		return m
	}
	m, _ := results.FindMetric("test accuracy")
	return m
}

// of is the score of a run, NaN where it has none. A count of epochs needs them all;
// any other metric is that of the last.
func (s *scores) of(e *store.Entry) (float64, error) {
	m := s.metric(e.Study)
	switch {
	case e.Epochs == 0:
		return math.NaN(), nil
	case m.Target == 0:
		return m.Final(&results.Run{Epochs: []results.Epoch{e.Last}}), nil
	}
	run, err := s.store.Curve(e.Key)
	if err != nil {
		return 0, err
	}
	return m.Final(run), nil
}
