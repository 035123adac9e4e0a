package store

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime/debug"
	"sync"
	"time"

	bolt "go.etcd.io/bbolt"
	berrors "go.etcd.io/bbolt/errors"
)

// DefaultPath is where a store lies unless told otherwise.
const DefaultPath = "ulpine.store"

// Version is the version of the layout that this package reads and writes.
const Version = 1

// The buckets at the root of the file.
var (
	bucketMeta    = []byte("ulpine")
	bucketRuns    = []byte("runs")
	bucketParts   = []byte("parts")
	bucketMarks   = []byte("marks")
	bucketStudies = []byte("studies")
	bucketIndex   = []byte("index")
	bucketData    = []byte("data")

	keyVersion = []byte("version")
)

// Options say how a store is opened. The zero value opens it for writing,
// creates it if there is none, and waits one second for another process to let
// go. Reading only, a store that another process holds is read from a copy of its
// last committed state.
type Options struct {
	ReadOnly bool
	Timeout  time.Duration
}

// Store is an open store. Its methods may be called from any goroutine.
type Store struct {
	path    string
	db      *bolt.DB
	options Options
	session session
	copied  bool // a copy of a store that another process holds

	mu     sync.RWMutex // guards closed against sending on queue
	closed bool
	queue  chan *operation
	done   chan struct{} // closed when the writer has gone
}

// Open opens the store at path. It errs with ErrHeld, ErrMissing, ErrNotStore,
// ErrVersion or ErrDamaged; see each.
func Open(path string, o Options) (*Store, error) {
	if o.Timeout == 0 {
		o.Timeout = time.Second
	}
	err := checkFile(path)
	if errors.Is(err, ErrMissing) && !o.ReadOnly {
		err = create(path)
	}
	if err != nil {
		return nil, err
	}
	db, err := openBolt(path, o)
	copied := o.ReadOnly && errors.Is(err, ErrHeld)
	if copied {
		db, err = openCopy(path, o)
	}
	if err != nil {
		return nil, err
	}
	s := &Store{path: path, db: db, options: o, session: newSession(), copied: copied}
	if err := s.checkVersion(); err != nil {
		return nil, errors.Join(err, db.Close())
	}
	if !o.ReadOnly {
		s.startWriter()
	}
	return s, nil
}

// Path is the path that the store was opened with.
func (s *Store) Path() string { return s.path }

// Close commits what is still queued and lets go of the file. Further calls
// return nil.
func (s *Store) Close() error {
	s.mu.Lock()
	if s.closed {
		s.mu.Unlock()
		return nil
	}
	s.closed = true
	if s.queue != nil {
		close(s.queue)
	}
	s.mu.Unlock()
	if s.queue != nil {
		<-s.done
	}
	return s.db.Close()
}

// openBolt opens the file with bbolt. A panic there leaves bbolt's file open and
// locked, so the file is remembered and closed.
func openBolt(path string, o Options) (db *bolt.DB, err error) {
	var file *os.File
	err = guard(path, func() (err error) {
		db, err = bolt.Open(path, 0o644, &bolt.Options{
			Timeout:      o.Timeout,
			ReadOnly:     o.ReadOnly,
			FreelistType: bolt.FreelistMapType,
			NoStatistics: true,
			OpenFile: func(name string, flag int, mode os.FileMode) (*os.File, error) {
				// never create: between the check and here the file may have gone
				f, err := os.OpenFile(name, flag&^os.O_CREATE, mode)
				file = f
				return f, err
			},
		})
		return err
	})
	switch {
	case err == nil:
		return db, nil
	case errors.Is(err, berrors.ErrTimeout):
		return nil, fmt.Errorf("%w %s (a run in progress, perhaps): wait for it to end, or name a different file with --store", ErrHeld, path)
	case errors.Is(err, ErrDamaged) && file != nil:
		unlock(file)
		file.Close()
	case errors.Is(err, fs.ErrPermission) && !o.ReadOnly:
		return nil, fmt.Errorf("store %s may not be written: %w", path, err)
	}
	if errors.Is(err, ErrDamaged) {
		return nil, err
	}
	return nil, fmt.Errorf("open store %s: %w", path, err)
}

// create makes an empty store under a name of its own and links it to path in
// one step, so that no process ever meets a store half made. If another process
// was faster, its store is used.
func create(path string) error {
	dir := filepath.Dir(path)
	f, err := os.CreateTemp(dir, ".ulpine-new-*")
	if err != nil {
		return fmt.Errorf("create store %s: %w", path, err)
	}
	temporary := f.Name()
	defer os.Remove(temporary)
	if err := errors.Join(f.Chmod(0o644), f.Close(), initialise(temporary)); err != nil {
		return fmt.Errorf("create store %s: %w", path, err)
	}
	err = os.Link(temporary, path)
	if err != nil && !errors.Is(err, fs.ErrExist) {
		err = os.Rename(temporary, path) // a file system without hard links
	}
	if err != nil && !errors.Is(err, fs.ErrExist) {
		return fmt.Errorf("create store %s: %w", path, err)
	}
	return nil
}

// initialise writes the buckets and the version into an empty file.
func initialise(path string) error {
	db, err := bolt.Open(path, 0o644, &bolt.Options{Timeout: time.Second, FreelistType: bolt.FreelistMapType})
	if err != nil {
		return err
	}
	err = db.Update(func(tx *bolt.Tx) error {
		for _, name := range [][]byte{bucketMeta, bucketRuns, bucketParts, bucketMarks, bucketStudies, bucketIndex, bucketData} {
			if _, err := tx.CreateBucket(name); err != nil {
				return err
			}
		}
		raw, err := encode(Version)
		if err != nil {
			return err
		}
		return tx.Bucket(bucketMeta).Put(keyVersion, raw)
	})
	return errors.Join(err, db.Close())
}

// checkVersion errs unless the file is a store of this version.
func (s *Store) checkVersion() error {
	return s.view(func(tx *bolt.Tx) error {
		meta := tx.Bucket(bucketMeta)
		if meta == nil || meta.Get(keyVersion) == nil {
			return fmt.Errorf("%w: %s is a bbolt file of another program; name a different one with --store", ErrNotStore, s.path)
		}
		var version int
		if err := decode(meta.Get(keyVersion), &version); err != nil {
			return fmt.Errorf("%w: %s: version: %w", ErrDamaged, s.path, err)
		}
		if version != Version {
			return fmt.Errorf("%w: %s has version %d, this program reads version %d; use the program that wrote it, or name a different file with --store", ErrVersion, s.path, version, Version)
		}
		for _, name := range [][]byte{bucketRuns, bucketParts, bucketMarks, bucketStudies, bucketIndex, bucketData} {
			if tx.Bucket(name) == nil {
				return fmt.Errorf("%w: %s lacks its part %q; restore it from a copy", ErrDamaged, s.path, name)
			}
		}
		return nil
	})
}

// view runs f in a reading transaction.
func (s *Store) view(f func(tx *bolt.Tx) error) error {
	err := guard(s.path, func() error { return s.db.View(f) })
	if errors.Is(err, berrors.ErrDatabaseNotOpen) {
		return fmt.Errorf("%w: %s", ErrClosed, s.path)
	}
	return err
}

// guard turns a panic of bbolt, or a fault on a page that is not there, into
// ErrDamaged.
func guard(path string, f func() error) (err error) {
	defer debug.SetPanicOnFault(debug.SetPanicOnFault(true))
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("%w: %s: %v; restore it from a copy", ErrDamaged, path, r)
		}
	}()
	return f()
}
