package store

import (
	"fmt"
	"slices"
	"strings"

	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

// Lookup returns what the store knows of each key: runs stored or failed, in
// flight or broken off. Arm and replicate are those of the first study that ran
// it. Unknown keys are left out.
func (s *Store) Lookup(keys []results.Hash) (map[results.Hash]Entry, error) {
	known := make(map[results.Hash]Entry, len(keys))
	err := s.view(func(tx *bolt.Tx) error {
		for _, key := range keys {
			e := Entry{Key: key}
			found, err := s.fill(tx, &e)
			if err != nil {
				return err
			}
			if found {
				known[key] = e
			}
		}
		return nil
	})
	return known, err
}

// Get reads the run under a key, with its tensors. It recomputes the digest of a
// stored run and errs with ErrDamaged when it is not the one written beside it;
// ErrNoRun when no such run is stored or failed.
func (s *Store) Get(key results.Hash) (*results.Run, error) {
	r, err := s.read(key, true)
	if err != nil {
		return nil, err
	}
	if r.State == results.Stored {
		if d := results.DigestOf(r); d != r.Digest {
			return nil, fmt.Errorf("%w: %s: run %s has digest %s, its contents give %s; restore the store from a copy",
				ErrDamaged, s.path, r.Name(), r.Digest.Short(), d.Short())
		}
	}
	return r, nil
}

// Curve reads the run under a key without its tensors, and therefore without
// checking its digest: enough for tables and figures.
func (s *Store) Curve(key results.Hash) (*results.Run, error) { return s.read(key, false) }

func (s *Store) read(key results.Hash, tensors bool) (r *results.Run, err error) {
	err = s.view(func(tx *bolt.Tx) error {
		if tx.Bucket(bucketRuns).Get(key[:]) == nil {
			return fmt.Errorf("%w under key %s in %s", ErrNoRun, key.Short(), s.path)
		}
		if r, err = readRun(tx.Bucket(bucketParts), key, tensors); err != nil {
			return fmt.Errorf("%w: %s: run of key %s: %w; restore the store from a copy", ErrDamaged, s.path, key.Short(), err)
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	return r, nil
}

// Find returns the entry of the one run that name means: arm/replicate, or
// leading digits of its key (eight or more). study, if not zero, narrows the
// search where several plans share the store. It errs with ErrNoRun or
// ErrAmbiguous; names that point to the same run are not ambiguous.
func (s *Store) Find(name string, study results.Hash) (Entry, error) {
	if digits := strings.ToLower(name); len(digits) >= 8 && isHex(digits) {
		return s.findKey(digits)
	}
	arm, replicate, err := results.ParseRunName(name)
	if err != nil {
		return Entry{}, err
	}
	list, err := s.List(Filter{Study: study, Arm: arm, Replicate: &replicate})
	if err != nil {
		return Entry{}, err
	}
	if len(list) == 0 {
		return Entry{}, fmt.Errorf("%w as %s in %s%s", ErrNoRun, name, s.path, s.suggest(study, arm))
	}
	for _, e := range list[1:] {
		if e.Key != list[0].Key {
			return Entry{}, fmt.Errorf("%w: %s is a different run in %s; say which study", ErrAmbiguous, name, entryStudies(list))
		}
	}
	return list[0], nil
}

func (s *Store) findKey(digits string) (e Entry, err error) {
	err = s.view(func(tx *bolt.Tx) error {
		if e.Key, err = s.resolvePrefix(tx, digits); err == nil {
			_, err = s.fill(tx, &e)
		}
		return err
	})
	return e, err
}

func isHex(word string) bool {
	return strings.Trim(word, "0123456789abcdef") == ""
}

// suggest says what the store has instead of a run that it has not.
func (s *Store) suggest(study results.Hash, arm string) string {
	list, err := s.List(Filter{Study: study})
	if err != nil || len(list) == 0 {
		return ", which holds no run yet"
	}
	var arms, replicates []string
	for _, e := range list {
		if !slices.Contains(arms, e.Arm) {
			arms = append(arms, e.Arm)
		}
		if e.Arm == arm {
			replicates = append(replicates, fmt.Sprint(e.Replicate))
		}
	}
	if len(replicates) > 0 {
		return fmt.Sprintf("; of %s it has replicates %s", arm, strings.Join(replicates, ", "))
	}
	return "; it has the arms " + strings.Join(arms, ", ")
}

func entryStudies(list []Entry) string {
	var words []string
	for _, e := range list {
		if word := fmt.Sprintf("%s (%q)", e.Study.Short(), e.Title); !slices.Contains(words, word) {
			words = append(words, word)
		}
	}
	return strings.Join(words, " and ")
}
