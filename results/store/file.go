package store

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/fnv"
	"io"
	"io/fs"
	"os"
)

// The fixed figures of a bbolt meta page (bbolt v1.5.0, internal/common/meta.go
// and page.go), which begins with a page header.
const (
	boltMagic   = 0xED0CDAED
	boltVersion = 2
	pageHeader  = 16
	metaSize    = 64 // the last 8 bytes are the checksum of those before
)

// boltMeta is what the check needs of a meta page. bbolt writes two, at pages 0
// and 1, by turns; the valid one with the higher transaction number counts.
type boltMeta struct {
	pageSize uint32
	pages    uint64 // pages in use, the high water mark
	txid     uint64
}

// checkFile looks at a file before bbolt does: bbolt makes a store of an empty
// file and panics on, or maps memory beyond the end of, one that was cut short.
// It errs with ErrMissing, ErrNotStore or ErrDamaged.
func checkFile(path string) error {
	info, err := os.Stat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return fmt.Errorf("%w: %s", ErrMissing, path)
	case err != nil:
		return fmt.Errorf("store %s: %w", path, err)
	case info.IsDir():
		return fmt.Errorf("%w: %s is a directory; name a file", ErrNotStore, path)
	case !info.Mode().IsRegular():
		return fmt.Errorf("%w: %s is no regular file", ErrNotStore, path)
	case info.Size() == 0:
		return fmt.Errorf("%w: %s is empty (0 bytes); delete it to start a new store there, or restore it from a copy", ErrNotStore, path)
	}
	f, err := os.Open(path)
	if err != nil {
		return fmt.Errorf("store %s: %w", path, err)
	}
	defer f.Close()
	return checkMeta(f, path, info.Size())
}

// checkMeta holds the size of the file against the number of pages that its
// newest valid meta page counts. bbolt grows the file before it writes the meta
// page, so a sound file is never shorter.
func checkMeta(f io.ReaderAt, path string, size int64) error {
	newest, magic, err := newestMeta(f, size)
	switch {
	case err != nil:
		return fmt.Errorf("store %s: %w", path, err)
	case newest == nil && magic:
		return fmt.Errorf("%w: %s has no valid index page in its %d bytes; restore it from a copy", ErrDamaged, path, size)
	case newest == nil:
		return fmt.Errorf("%w: %s is another kind of file; name a different one with --store", ErrNotStore, path)
	}
	if need := int64(newest.pages) * int64(newest.pageSize); size < need {
		return fmt.Errorf("%w: %s was cut short, %d bytes are left of at least %d; restore it from a copy", ErrDamaged, path, size, need)
	}
	return nil
}

// newestMeta reads both meta pages. The page size is only known from a meta
// page, so the second is looked for at every power of two from 1 kB to 16 MB.
// magic reports whether the file begins the way a bbolt file does.
func newestMeta(f io.ReaderAt, size int64) (newest *boltMeta, magic bool, err error) {
	buf := make([]byte, pageHeader+metaSize)
	offsets := []int64{0}
	for at := int64(1 << 10); at <= 1<<24; at <<= 1 {
		offsets = append(offsets, at)
	}
	for _, at := range offsets {
		if at+pageHeader+4 > size {
			break
		}
		n, err := f.ReadAt(buf, at)
		if err != nil && !errors.Is(err, io.EOF) {
			return nil, magic, err
		}
		if at == 0 && binary.NativeEndian.Uint32(buf[pageHeader:]) == boltMagic {
			magic = true
		}
		if n < len(buf) {
			continue
		}
		m := parseMeta(buf[pageHeader:])
		if m == nil || at != 0 && int64(m.pageSize) != at {
			continue
		}
		if newest == nil || m.txid > newest.txid {
			newest = m
		}
	}
	return newest, magic, nil
}

// parseMeta returns nil unless magic, version and checksum (64-bit FNV-1a) hold.
// bbolt writes in the byte order of the machine.
func parseMeta(b []byte) *boltMeta {
	order := binary.NativeEndian
	sum := fnv.New64a()
	sum.Write(b[:metaSize-8])
	if order.Uint32(b) != boltMagic || order.Uint32(b[4:]) != boltVersion ||
		order.Uint64(b[metaSize-8:]) != sum.Sum64() {
		return nil
	}
	// magic, version, page size, flags (4 bytes each); root page, root
	// sequence, freelist, pages in use, transaction (8 bytes each)
	return &boltMeta{
		pageSize: order.Uint32(b[8:]),
		pages:    order.Uint64(b[40:]),
		txid:     order.Uint64(b[48:]),
	}
}
