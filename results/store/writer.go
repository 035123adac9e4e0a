package store

import (
	"fmt"

	bolt "go.etcd.io/bbolt"
)

// queueLength bounds what waits for the writer, and with it the memory that
// finished runs take: a producer faster than the disk waits.
const queueLength = 32

// operation is one change. check looks and changes nothing; its error refuses
// this operation alone. write's error undoes the whole transaction, so it is
// left to the disk. done is called once, from the writer's goroutine, after the
// commit or the refusal.
type operation struct {
	check func(tx *bolt.Tx) error // may be nil
	write func(tx *bolt.Tx) error
	done  func(error)
}

func (s *Store) startWriter() {
	s.queue = make(chan *operation, queueLength)
	s.done = make(chan struct{})
	go func() {
		defer close(s.done)
		for first := range s.queue {
			s.commit(s.gather(first))
		}
	}()
}

// gather takes whatever else has queued up by now.
func (s *Store) gather(first *operation) []*operation {
	batch := []*operation{first}
	for len(batch) < queueLength {
		select {
		case op, open := <-s.queue:
			if !open {
				return batch
			}
			batch = append(batch, op)
		default:
			return batch
		}
	}
	return batch
}

// commit applies a batch in one transaction and reports to each operation.
func (s *Store) commit(batch []*operation) {
	refused := make([]error, len(batch))
	err := guard(s.path, func() error {
		return s.db.Update(func(tx *bolt.Tx) error {
			for i, op := range batch {
				if op.check != nil {
					if refused[i] = op.check(tx); refused[i] != nil {
						continue
					}
				}
				if err := op.write(tx); err != nil {
					return err
				}
			}
			return nil
		})
	})
	if err != nil {
		err = fmt.Errorf("write to store %s: %w", s.path, err)
	}
	for i, op := range batch {
		if refused[i] != nil {
			op.done(refused[i])
		} else {
			op.done(err)
		}
	}
}

// enqueue hands an operation to the writer. Its error means that done will not
// be called.
func (s *Store) enqueue(op *operation) error {
	s.mu.RLock()
	defer s.mu.RUnlock()
	switch {
	case s.closed:
		return fmt.Errorf("%w: %s", ErrClosed, s.path)
	case s.queue == nil:
		return fmt.Errorf("%w: %s", ErrReadOnly, s.path)
	}
	s.queue <- op
	return nil
}

// do hands an operation to the writer and waits until it is on disk.
func (s *Store) do(op *operation) error {
	result := make(chan error, 1)
	op.done = func(err error) { result <- err }
	if err := s.enqueue(op); err != nil {
		return err
	}
	return <-result
}
