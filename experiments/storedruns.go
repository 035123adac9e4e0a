package experiments

import (
	"fmt"

	"ulpine/experiments/plan"
	"ulpine/results"
	"ulpine/results/store"
	"ulpine/trainer"
)

// LoadPlan is plan.Load with stores read where a plan starts from a stored run.
func LoadPlan(name string) (*plan.Plan, error) { return plan.LoadWith(name, storedRuns{}) }

// storedRuns reads the parameters of runs from stores.
type storedRuns struct{}

// FinalParams implements plan.StoredRuns. A run that diverged is nothing to start
// from.
func (storedRuns) FinalParams(file, run string) ([]trainer.Param, error) {
	s, err := store.Open(file, store.Options{ReadOnly: true})
	if err != nil {
		return nil, err
	}
	defer s.Close()
	entry, err := s.Find(run, results.Hash{})
	if err != nil {
		return nil, err
	}
	switch {
	case entry.State != results.Stored:
		return nil, fmt.Errorf("run %s of %s is %s: nothing is stored of it", entry.Name(), file, entry.State)
	case entry.Diverged != "":
		return nil, fmt.Errorf("run %s of %s diverged: %s", entry.Name(), file, entry.Diverged)
	}
	r, err := s.Get(entry.Key)
	if err != nil {
		return nil, err
	}
	return params(r.Final), nil
}
