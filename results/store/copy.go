package store

import (
	"errors"
	"fmt"
	"io"
	"os"
	"syscall"

	bolt "go.etcd.io/bbolt"
)

// copyTries bounds how often a copy is begun anew because a commit came between.
const copyTries = 50

// openCopy opens a copy of a store that another process is writing. bbolt never
// overwrites a page that its newest meta page can reach, so a copy during which
// the number of that transaction stayed the same holds its whole state: what a
// commit in progress writes goes to pages that this state does not use. The copy
// is unlinked as soon as it is open.
func openCopy(path string, o Options) (*bolt.DB, error) {
	for range copyTries {
		name, same, err := copyOnce(path)
		if err != nil {
			return nil, err
		}
		if !same {
			os.Remove(name)
			continue
		}
		db, err := openBolt(name, o)
		return db, errors.Join(err, os.Remove(name))
	}
	return nil, fmt.Errorf("%w %s and writes to it without a pause; try again", ErrHeld, path)
}

// copyOnce copies the file. same reports whether the newest transaction was the
// same before and after.
func copyOnce(path string) (name string, same bool, err error) {
	from, err := os.Open(path)
	if err != nil {
		return "", false, fmt.Errorf("store %s: %w", path, err)
	}
	defer from.Close()
	to, err := os.CreateTemp("", "ulpine-copy-*.store")
	if err != nil {
		return "", false, fmt.Errorf("copy store %s: %w", path, err)
	}
	before, err := lastTransaction(from)
	if err == nil {
		_, err = io.Copy(to, from)
	}
	var after uint64
	if err == nil {
		after, err = lastTransaction(from)
	}
	if err = errors.Join(err, to.Close()); err != nil {
		os.Remove(to.Name())
		return "", false, fmt.Errorf("copy store %s: %w", path, err)
	}
	return to.Name(), before == after, nil
}

// lastTransaction is the number of the newest transaction in a file.
func lastTransaction(f *os.File) (uint64, error) {
	info, err := f.Stat()
	if err != nil {
		return 0, err
	}
	meta, _, err := newestMeta(f, info.Size())
	switch {
	case err != nil:
		return 0, err
	case meta == nil:
		return 0, ErrDamaged
	}
	return meta.txid, nil
}

// alive reports whether the process that wrote a mark still runs on this host.
func alive(m mark) bool {
	if host, _ := os.Hostname(); m.Host != host {
		return false
	}
	p, err := os.FindProcess(m.Process)
	if err != nil {
		return false
	}
	err = p.Signal(syscall.Signal(0)) // asks, sends nothing
	return err == nil || errors.Is(err, os.ErrPermission)
}
