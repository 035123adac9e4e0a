package store

import "errors"

// Errors that callers tell apart with errors.Is. Every error that a method
// returns wraps at most one of them and says which file or run, and the remedy.
var (
	// ErrHeld: another process has the store open.
	ErrHeld = errors.New("another process holds the store")
	// ErrMissing: there is no file of that name (reading only; writing creates it).
	ErrMissing = errors.New("no such store")
	// ErrNotStore: the file is something else: empty, no bbolt file, or a
	// bbolt file of another program.
	ErrNotStore = errors.New("not an ulpine store")
	// ErrVersion: the store's layout is of another version.
	ErrVersion = errors.New("store of another version")
	// ErrDamaged: the file was cut short, or its contents contradict each other.
	ErrDamaged = errors.New("damaged store")
	// ErrReadOnly: writing to a store that was opened for reading.
	ErrReadOnly = errors.New("store is open for reading only")
	// ErrClosed: the store was closed.
	ErrClosed = errors.New("store is closed")
	// ErrNoRun: no run of that key or name.
	ErrNoRun = errors.New("no such run")
	// ErrNoStudy: no study of that identity or name.
	ErrNoStudy = errors.New("no such study")
	// ErrAmbiguous: a name that fits runs of several studies, or several studies.
	ErrAmbiguous = errors.New("ambiguous name")
	// ErrDigestDiffers: a run is stored under this key already and came out
	// differently. The same key must give the same bits: either a bit of the
	// arithmetic changed without a new arithmetic version, or a machine is faulty.
	ErrDigestDiffers = errors.New("the same key gave a different digest")
)
