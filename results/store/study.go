package store

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"slices"
	"strings"
	"time"

	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

// Study is a plan as the store knows it. The ID is the caller's: whatever two
// plans must share to count as one study.
type Study struct {
	ID       results.Hash       `cbor:"1,keyasint"`
	Title    string             `cbor:"2,keyasint"`
	PlanFile string             `cbor:"3,keyasint"`
	Fixed    results.FixedClaim `cbor:"4,keyasint"` // set by Fix
}

// Planned is one run of a study and what it is called there.
type Planned struct {
	Arm       string // slug
	Replicate uint64
	Key       results.Hash
	Place     int // of the arm in the plan, for listing
	// Compared: the run decides a verdict, so that having seen it before the
	// claim was fixed matters. False for baseline and pretraining.
	Compared bool
}

// indexed is the value of an index entry.
type indexed struct {
	Key   results.Hash `cbor:"1,keyasint"`
	Place int          `cbor:"2,keyasint"`
}

// Fix writes the names of a study's runs and, unless the study is known
// already, its claim with the time of now. It returns the claim as it is fixed,
// now or earlier. It is to be called before the first run.
func (s *Store) Fix(study Study, claim results.Claim, planned []Planned) (fixed results.FixedClaim, err error) {
	err = s.do(&operation{write: func(tx *bolt.Tx) error {
		known, found, err := getStudy(tx, study.ID)
		if err != nil {
			return err
		}
		if found {
			study.Fixed = known.Fixed
		} else if study.Fixed, err = s.newClaim(tx, claim, planned); err != nil {
			return err
		}
		fixed = study.Fixed
		raw, err := encode(study)
		if err != nil {
			return err
		}
		if err := tx.Bucket(bucketStudies).Put(study.ID[:], raw); err != nil {
			return err
		}
		return putIndex(tx, study.ID, planned)
	}})
	return fixed, err
}

// AddRuns adds names of runs to a study that is fixed already, and notes what
// data their requests came to. It does not wait for the disk: whatever is put
// later is not stored without it.
func (s *Store) AddRuns(study results.Hash, planned []Planned, data map[results.Hash]results.Hash) error {
	return s.enqueue(&operation{
		write: func(tx *bolt.Tx) error {
			for request, hash := range data {
				if err := tx.Bucket(bucketData).Put(request[:], hash[:]); err != nil {
					return err
				}
			}
			return putIndex(tx, study, planned)
		},
		done: func(error) {},
	})
}

// Data returns what each request for data came to, as far as it is noted.
func (s *Store) Data(requests []results.Hash) (map[results.Hash]results.Hash, error) {
	noted := make(map[results.Hash]results.Hash, len(requests))
	err := s.view(func(tx *bolt.Tx) error {
		for _, request := range requests {
			switch raw := tx.Bucket(bucketData).Get(request[:]); len(raw) {
			case 0:
			case len(results.Hash{}):
				noted[request] = results.Hash(raw)
			default:
				return fmt.Errorf("%w: %s: a data hash of %d bytes", ErrDamaged, s.path, len(raw))
			}
		}
		return nil
	})
	return noted, err
}

// Claim returns the claim that was fixed for a study and how the claim of now
// differs from it, empty if it does not. It errs with ErrNoStudy before Fix.
func (s *Store) Claim(id results.Hash, now results.Claim) (fixed results.FixedClaim, differs string, err error) {
	err = s.view(func(tx *bolt.Tx) error {
		study, found, err := getStudy(tx, id)
		if err == nil && !found {
			err = fmt.Errorf("%w: nothing of this plan was run into %s yet", ErrNoStudy, s.path)
		}
		fixed = study.Fixed
		return err
	})
	return fixed, fixed.Claim.Differences(now), err
}

// Studies lists the studies in the order in which their claims were fixed.
func (s *Store) Studies() (studies []Study, err error) {
	err = s.view(func(tx *bolt.Tx) error {
		return tx.Bucket(bucketStudies).ForEach(func(_, raw []byte) error {
			var study Study
			if err := decode(raw, &study); err != nil {
				return fmt.Errorf("%w: %s: study: %w", ErrDamaged, s.path, err)
			}
			studies = append(studies, study)
			return nil
		})
	})
	slices.SortFunc(studies, func(a, b Study) int {
		if c := a.Fixed.Fixed.Compare(b.Fixed.Fixed); c != 0 {
			return c
		}
		return bytes.Compare(a.ID[:], b.ID[:])
	})
	return studies, err
}

// FindStudy returns the one study that word names: its title, its plan's file
// name, or at least four leading hexadecimal digits of its ID. It errs with
// ErrNoStudy or ErrAmbiguous.
func (s *Store) FindStudy(word string) (Study, error) {
	all, err := s.Studies()
	if err != nil {
		return Study{}, err
	}
	var hits []Study
	for _, study := range all {
		if word == study.Title || word == study.PlanFile ||
			len(word) >= 4 && strings.HasPrefix(study.ID.String(), strings.ToLower(word)) {
			hits = append(hits, study)
		}
	}
	switch len(hits) {
	case 1:
		return hits[0], nil
	case 0:
		return Study{}, fmt.Errorf("%w as %q in %s; it holds %s", ErrNoStudy, word, s.path, nameStudies(all))
	}
	return Study{}, fmt.Errorf("%w: %q fits %s", ErrAmbiguous, word, nameStudies(hits))
}

// nameStudies lists studies for an error message.
func nameStudies(studies []Study) string {
	if len(studies) == 0 {
		return "no study yet"
	}
	words := make([]string, len(studies))
	for i, study := range studies {
		words[i] = fmt.Sprintf("%s (%q)", study.ID.Short(), study.Title)
	}
	return strings.Join(words, ", ")
}

// newClaim is the claim with its hash, the time, and what had been stored of
// the study's compared runs before.
func (s *Store) newClaim(tx *bolt.Tx, claim results.Claim, planned []Planned) (f results.FixedClaim, err error) {
	raw, err := encode(claim)
	if err != nil {
		return f, err
	}
	f = results.FixedClaim{Claim: claim, Hash: sha256.Sum256(raw), Fixed: time.Now().UTC()}
	seen := map[results.Hash]bool{}
	for _, p := range planned {
		if !p.Compared || seen[p.Key] {
			continue
		}
		_, state, err := stateOf(tx, p.Key)
		if err != nil {
			return f, err
		}
		if state == results.Stored {
			seen[p.Key] = true
		}
	}
	f.RunsBefore = len(seen)
	f.Earlier, err = earlierClaims(tx, claim, seen)
	return f, err
}

// earlierClaims describes the differing claims of other studies over the runs
// in seen.
func earlierClaims(tx *bolt.Tx, claim results.Claim, seen map[results.Hash]bool) ([]string, error) {
	if len(seen) == 0 {
		return nil, nil
	}
	var words []string
	told := map[results.Hash]bool{}
	err := tx.Bucket(bucketIndex).ForEach(func(k, raw []byte) error {
		var at indexed
		if err := decode(raw, &at); err != nil || len(k) < 32 {
			return fmt.Errorf("%w: index: %w", ErrDamaged, err)
		}
		id := results.Hash(k[:32])
		if !seen[at.Key] || told[id] {
			return nil
		}
		told[id] = true
		study, found, err := getStudy(tx, id)
		if err != nil || !found {
			return err
		}
		if d := study.Fixed.Claim.Differences(claim); d != "" {
			words = append(words, fmt.Sprintf("%q, fixed %s: %s",
				study.Title, study.Fixed.Fixed.Format(time.DateTime), d))
		}
		return nil
	})
	return words, err
}

func getStudy(tx *bolt.Tx, id results.Hash) (study Study, found bool, err error) {
	raw := tx.Bucket(bucketStudies).Get(id[:])
	if raw == nil {
		return study, false, nil
	}
	if err := decode(raw, &study); err != nil {
		return study, false, fmt.Errorf("%w: study %s: %w", ErrDamaged, id.Short(), err)
	}
	return study, true, nil
}

// indexKey orders a study's runs by replicate.
func indexKey(study results.Hash, arm string, replicate uint64) []byte {
	k := append(make([]byte, 0, 40+len(arm)), study[:]...)
	k = binary.BigEndian.AppendUint64(k, replicate)
	return append(k, arm...)
}

func putIndex(tx *bolt.Tx, id results.Hash, planned []Planned) error {
	index := tx.Bucket(bucketIndex)
	for _, p := range planned {
		raw, err := encode(indexed{p.Key, p.Place})
		if err != nil {
			return err
		}
		if err := index.Put(indexKey(id, p.Arm, p.Replicate), raw); err != nil {
			return err
		}
	}
	return nil
}
