package store

import (
	"bytes"
	"crypto/rand"
	"fmt"
	"os"
	"time"

	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

// session tells the marks of this opening of the store from those of others.
type session [16]byte

func newSession() (s session) {
	rand.Read(s[:]) // never fails (crypto/rand, Go 1.24)
	return s
}

// mark says that a run was started. A zero session: it was broken off.
type mark struct {
	Session   session   `cbor:"1,keyasint"`
	Arm       string    `cbor:"2,keyasint"`
	Replicate uint64    `cbor:"3,keyasint"`
	Started   time.Time `cbor:"4,keyasint"`
	Host      string    `cbor:"5,keyasint"`
	Process   int       `cbor:"6,keyasint"`
}

// Begin marks the run of this key, called arm/replicate, as in flight. It does
// not wait for the disk: a mark lost in a crash only means that the run reads
// as never started.
func (s *Store) Begin(arm string, replicate uint64, key results.Hash) error {
	host, _ := os.Hostname() // for print only
	raw, err := encode(mark{s.session, arm, replicate, time.Now().UTC(), host, os.Getpid()})
	if err != nil {
		return err
	}
	return s.enqueue(&operation{
		write: func(tx *bolt.Tx) error { return tx.Bucket(bucketMarks).Put(key[:], raw) },
		done:  func(error) {},
	})
}

// BreakOff turns the marks of runs in flight that were given up into *broken
// off*, and waits for the disk. Keys without a mark are passed over.
func (s *Store) BreakOff(keys ...results.Hash) error {
	return s.do(&operation{write: func(tx *bolt.Tx) error {
		marks := tx.Bucket(bucketMarks)
		for _, key := range keys {
			raw := marks.Get(key[:])
			if raw == nil {
				continue
			}
			var m mark
			if err := decode(raw, &m); err != nil {
				return fmt.Errorf("%w: mark %s: %w", ErrDamaged, key.Short(), err)
			}
			m.Session = session{}
			raw, err := encode(m)
			if err != nil {
				return err
			}
			if err := marks.Put(key[:], raw); err != nil {
				return err
			}
		}
		return nil
	}})
}

// Put stores a run, whose state is Stored or Failed, under its key, takes its
// mark away, and waits for the disk. The digest is computed here. A failed run
// may be replaced; a stored one may be put again only with the same digest
// (which changes nothing), else Put errs with ErrDigestDiffers. The run is not
// altered and must not be until Put returns.
func (s *Store) Put(r *results.Run) error {
	op, err := putOperation(r)
	if err != nil {
		return err
	}
	return s.do(op)
}

// PutLater is Put without the wait: done is called once, from the writer's
// goroutine, when the run is on disk or was refused, unless PutLater itself
// errs. done must not call the store's writing methods. The run must not be
// altered any more.
func (s *Store) PutLater(r *results.Run, done func(error)) error {
	op, err := putOperation(r)
	if err != nil {
		return err
	}
	op.done = done
	return s.enqueue(op)
}

// putOperation encodes a run in the caller's goroutine, so that only copying is
// left to the writer.
func putOperation(r *results.Run) (*operation, error) {
	if r.State != results.Stored && r.State != results.Failed {
		return nil, fmt.Errorf("run %s: a run that is %q cannot be stored", r.Name(), r.State)
	}
	if r.Key.IsZero() {
		return nil, fmt.Errorf("run %s has no key", r.Name())
	}
	stored := *r
	stored.Digest = results.Hash{}
	if r.State == results.Stored {
		stored.Digest = results.DigestOf(r)
	}
	e, err := encodeRun(&stored)
	if err != nil {
		return nil, fmt.Errorf("run %s: %w", r.Name(), err)
	}
	same := false
	return &operation{
		check: func(tx *bolt.Tx) (err error) {
			same, err = checkAgain(tx, &stored)
			return err
		},
		write: func(tx *bolt.Tx) error { return e.write(tx, stored.Key, same) },
	}, nil
}

// checkAgain reports whether the very same run is stored already.
func checkAgain(tx *bolt.Tx, r *results.Run) (same bool, err error) {
	raw := tx.Bucket(bucketRuns).Get(r.Key[:])
	if raw == nil {
		return false, nil
	}
	var before summary
	if err := decode(raw, &before); err != nil {
		return false, fmt.Errorf("%w: run %s: %w", ErrDamaged, r.Name(), err)
	}
	switch {
	case before.State != results.Stored:
		return false, nil
	case r.State == results.Failed:
		return false, fmt.Errorf("run %s failed (%s), but is stored already under the same key %s", r.Name(), r.Cause, r.Key.Short())
	case before.Digest != r.Digest:
		return false, fmt.Errorf("%w: run %s, key %s: stored %s, now %s; raise the arithmetic version if a bit was meant to change, else test the machine",
			ErrDigestDiffers, r.Name(), r.Key.Short(), before.Digest.Short(), r.Digest.Short())
	}
	return true, nil
}

func (e encodedRun) write(tx *bolt.Tx, key results.Hash, same bool) error {
	if err := tx.Bucket(bucketMarks).Delete(key[:]); err != nil || same {
		return err
	}
	parts := tx.Bucket(bucketParts)
	if err := deleteParts(parts, key); err != nil {
		return err
	}
	for p, data := range e.parts {
		if err := putPart(parts, key, p, data); err != nil {
			return err
		}
	}
	return tx.Bucket(bucketRuns).Put(bytes.Clone(key[:]), e.summary)
}
