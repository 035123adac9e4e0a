package main

import (
	"errors"
	"fmt"
	"time"

	"github.com/spf13/cobra"

	"ulpine/results"
	"ulpine/results/store"
)

// storeFlag adds --store to a verb.
func storeFlag(cmd *cobra.Command) *string {
	return cmd.Flags().String("store", store.DefaultPath, "the `file` that holds the runs")
}

// openStore opens a store; what is wrong with the file is the input's fault.
func openStore(path string, readOnly bool) (*store.Store, error) {
	o := store.Options{ReadOnly: readOnly}
	if readOnly {
		o.Timeout = 100 * time.Millisecond // then a copy is read
	}
	s, err := store.Open(path, o)
	if err == nil {
		return s, nil
	}
	for _, known := range []error{
		store.ErrHeld, store.ErrMissing, store.ErrNotStore, store.ErrVersion, store.ErrDamaged,
	} {
		if errors.Is(err, known) {
			return nil, badInput(err)
		}
	}
	return nil, err
}

// studyFlag adds --study, which narrows a verb to one of several plans in a store.
func studyFlag(cmd *cobra.Command) *string {
	return cmd.Flags().String("study", "", "only the study with this title, plan file or leading digits of its `identity`")
}

// chosenStudy turns the word of --study into an identity; zero for none.
func chosenStudy(s *store.Store, word string) (results.Hash, error) {
	if word == "" {
		return results.Hash{}, nil
	}
	study, err := s.FindStudy(word)
	if err != nil {
		return results.Hash{}, badInput(err)
	}
	return study.ID, nil
}

// stateWords is a run's state as it is printed.
func stateWords(e *store.Entry) string {
	if e.State == results.Failed {
		return fmt.Sprintf("failed (%s)", e.Cause)
	}
	return string(e.State)
}
