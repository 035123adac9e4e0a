package store

import (
	"bytes"
	"cmp"
	"encoding/binary"
	"fmt"
	"slices"
	"strings"
	"time"

	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

// summary is what a list shows of a run without reading it whole.
type summary struct {
	Arm          string        `cbor:"1,keyasint"` // as it was called when it was run
	Replicate    uint64        `cbor:"2,keyasint"`
	Digest       results.Hash  `cbor:"3,keyasint"`
	State        results.State `cbor:"4,keyasint"`
	Cause        string        `cbor:"5,keyasint"`
	Diverged     string        `cbor:"6,keyasint"`
	DivergedStep int           `cbor:"7,keyasint"`
	Stalled      bool          `cbor:"8,keyasint"`
	Steps        int           `cbor:"9,keyasint"`
	Epochs       int           `cbor:"10,keyasint"`
	Last         results.Epoch `cbor:"11,keyasint"`
	CodeVersion  string        `cbor:"12,keyasint"`
	Host         string        `cbor:"13,keyasint"`
	Started      time.Time     `cbor:"14,keyasint"`
	Wall         time.Duration `cbor:"15,keyasint"`
}

func summarise(r *results.Run) summary {
	s := summary{
		Arm: r.Arm, Replicate: r.Replicate, Digest: r.Digest, State: r.State, Cause: r.Cause,
		Diverged: r.Diverged, DivergedStep: r.DivergedStep, Stalled: r.Stalled,
		Steps: len(r.Steps), Epochs: len(r.Epochs),
		CodeVersion: r.CodeVersion, Host: r.Host, Started: r.Started, Wall: r.Wall,
	}
	if len(r.Epochs) > 0 {
		s.Last = r.Epochs[len(r.Epochs)-1]
	}
	return s
}

// Entry is one run as a study calls it. A run that two arms or two studies
// share makes one entry for each.
type Entry struct {
	Study        results.Hash // zero: a run that no study names
	Title        string       // of the study
	Arm          string
	Replicate    uint64
	Key          results.Hash
	Digest       results.Hash // zero unless stored
	State        results.State
	Cause        string // why it failed
	Diverged     string // why it diverged; empty: it did not
	DivergedStep int
	Stalled      bool
	Steps        int
	Epochs       int
	Last         results.Epoch // what was known after the last epoch; zero without epochs
	CodeVersion  string
	Host         string
	Started      time.Time
	Wall         time.Duration

	place int
}

// Name is how the run is called: arm/replicate.
func (e *Entry) Name() string { return results.RunName(e.Arm, e.Replicate) }

// Filter chooses runs; its zero value takes them all.
type Filter struct {
	Study     results.Hash  // zero: any
	Arm       string        // empty: any
	Replicate *uint64       // nil: any
	State     results.State // empty: any
}

func (f *Filter) takes(e *Entry) bool {
	return (f.Study.IsZero() || f.Study == e.Study) &&
		(f.Arm == "" || f.Arm == e.Arm) &&
		(f.Replicate == nil || *f.Replicate == e.Replicate) &&
		(f.State == "" || f.State == e.State)
}

// List lists the runs that were started, whatever became of them: by study in
// the order in which the claims were fixed, then by the arm's place in the
// plan, then by replicate.
func (s *Store) List(f Filter) ([]Entry, error) {
	studies, err := s.Studies()
	if err != nil {
		return nil, err
	}
	order := map[results.Hash]int{{}: len(studies)}
	titles := map[results.Hash]string{}
	for i, study := range studies {
		order[study.ID], titles[study.ID] = i, study.Title
	}
	var list []Entry
	err = s.view(func(tx *bolt.Tx) (err error) {
		list, err = s.entries(tx)
		return err
	})
	if err != nil {
		return nil, err
	}
	list = slices.DeleteFunc(list, func(e Entry) bool { return !f.takes(&e) })
	for i := range list {
		list[i].Title = titles[list[i].Study]
	}
	slices.SortStableFunc(list, func(a, b Entry) int {
		return cmp.Or(cmp.Compare(order[a.Study], order[b.Study]), cmp.Compare(a.place, b.place),
			cmp.Compare(a.Arm, b.Arm), cmp.Compare(a.Replicate, b.Replicate))
	})
	return list, nil
}

// entries are the indexed runs, then those that no index names.
func (s *Store) entries(tx *bolt.Tx) (list []Entry, err error) {
	named := map[results.Hash]bool{}
	err = tx.Bucket(bucketIndex).ForEach(func(k, raw []byte) error {
		var at indexed
		if len(k) < 40 {
			return fmt.Errorf("%w: %s: index entry of %d bytes", ErrDamaged, s.path, len(k))
		}
		if err := decode(raw, &at); err != nil {
			return fmt.Errorf("%w: %s: index: %w", ErrDamaged, s.path, err)
		}
		named[at.Key] = true
		e := Entry{
			Study: results.Hash(k[:32]), Replicate: binary.BigEndian.Uint64(k[32:40]),
			Arm: string(k[40:]), Key: at.Key, place: at.Place,
		}
		found, err := s.fill(tx, &e)
		if err == nil && found {
			list = append(list, e)
		}
		return err
	})
	for _, bucket := range [][]byte{bucketRuns, bucketMarks} {
		if err != nil {
			return nil, err
		}
		err = tx.Bucket(bucket).ForEach(func(k, _ []byte) error {
			if len(k) != 32 || named[results.Hash(k)] {
				return nil
			}
			e := Entry{Key: results.Hash(k)}
			named[e.Key] = true
			_, err := s.fill(tx, &e)
			list = append(list, e)
			return err
		})
	}
	return list, err
}

// fill completes an entry from the run's summary or its mark. A mark beside a
// failed run is a later attempt, and counts.
func (s *Store) fill(tx *bolt.Tx, e *Entry) (found bool, err error) {
	if raw := tx.Bucket(bucketMarks).Get(e.Key[:]); raw != nil {
		var m mark
		if err := decode(raw, &m); err != nil {
			return false, fmt.Errorf("%w: %s: mark: %w", ErrDamaged, s.path, err)
		}
		e.Arm, e.Replicate = cmp.Or(e.Arm, m.Arm), cmp.Or(e.Replicate, m.Replicate)
		e.State, e.Started, e.Host = s.markState(m), m.Started, m.Host
		return true, nil
	}
	sum, state, err := stateOf(tx, e.Key)
	if err != nil || state == "" {
		return false, err
	}
	e.Arm, e.Replicate = cmp.Or(e.Arm, sum.Arm), cmp.Or(e.Replicate, sum.Replicate)
	e.Digest, e.State, e.Cause = sum.Digest, sum.State, sum.Cause
	e.Diverged, e.DivergedStep, e.Stalled = sum.Diverged, sum.DivergedStep, sum.Stalled
	e.Steps, e.Epochs, e.Last = sum.Steps, sum.Epochs, sum.Last
	e.CodeVersion, e.Host, e.Started, e.Wall = sum.CodeVersion, sum.Host, sum.Started, sum.Wall
	return true, nil
}

// markState: a mark of this session is a run in flight, any other was left over,
// unless this is a copy of a store in use and the process that wrote the mark
// still runs.
func (s *Store) markState(m mark) results.State {
	if m.Session == s.session || s.copied && m.Session != (session{}) && alive(m) {
		return results.InFlight
	}
	return results.BrokenOff
}

// stateOf is the summary and state of a run, empty when there is none. Marks do
// not count.
func stateOf(tx *bolt.Tx, key results.Hash) (sum summary, state results.State, err error) {
	raw := tx.Bucket(bucketRuns).Get(key[:])
	if raw == nil {
		return sum, "", nil
	}
	if err := decode(raw, &sum); err != nil {
		return sum, "", fmt.Errorf("%w: run %s: %w", ErrDamaged, key.Short(), err)
	}
	return sum, sum.State, nil
}

// Digest is the store digest: SHA-256 of the sorted (key, digest) pairs of all
// stored runs, or of those under the given keys.
func (s *Store) Digest(only ...results.Hash) (results.Hash, error) {
	var pairs []results.Pair
	err := s.view(func(tx *bolt.Tx) error {
		return tx.Bucket(bucketRuns).ForEach(func(k, _ []byte) error {
			if len(k) != 32 {
				return fmt.Errorf("%w: %s: a run's key of %d bytes", ErrDamaged, s.path, len(k))
			}
			key := results.Hash(k)
			sum, state, err := stateOf(tx, key)
			if err == nil && state == results.Stored && (len(only) == 0 || slices.Contains(only, key)) {
				pairs = append(pairs, results.Pair{Key: key, Digest: sum.Digest})
			}
			return err
		})
	})
	return results.StoreDigest(pairs), err
}

// resolvePrefix finds the key that begins with the hexadecimal digits given.
func (s *Store) resolvePrefix(tx *bolt.Tx, digits string) (key results.Hash, err error) {
	n := 0
	err = tx.Bucket(bucketRuns).ForEach(func(k, _ []byte) error {
		if len(k) == 32 && strings.HasPrefix(results.Hash(k).String(), digits) {
			key = results.Hash(bytes.Clone(k))
			n++
		}
		return nil
	})
	switch {
	case err == nil && n == 0:
		err = fmt.Errorf("%w with a key beginning %s in %s", ErrNoRun, digits, s.path)
	case err == nil && n > 1:
		err = fmt.Errorf("%w: %d keys in %s begin with %s", ErrAmbiguous, n, s.path, digits)
	}
	return key, err
}
