package npy

import (
	"archive/zip"
	"fmt"
	"io"
	"strings"
)

// Named is an array of an NPZ archive with its name there.
type Named struct {
	Name string
	*Array
}

// WriteNPZ writes the arrays to an uncompressed NPZ archive in the order given.
func WriteNPZ(w io.Writer, arrays []Named) error {
	z := zip.NewWriter(w)
	for _, a := range arrays {
		// No modification time: the same arrays give the same bytes.
		f, err := z.CreateHeader(&zip.FileHeader{Name: a.Name + ".npy", Method: zip.Store})
		if err != nil {
			return err
		}
		if err := Write(f, a.Array); err != nil {
			return err
		}
	}
	return z.Close()
}

// ReadNPZ reads every array of an archive, in the archive's order.
func ReadNPZ(r io.ReaderAt, size int64) ([]Named, error) {
	z, err := zip.NewReader(r, size)
	if err != nil {
		return nil, fmt.Errorf("not an NPZ archive: %w", err)
	}
	var arrays []Named
	for _, f := range z.File {
		name, isArray := strings.CutSuffix(f.Name, ".npy")
		if !isArray {
			return nil, fmt.Errorf("member %q is no NPY file", f.Name)
		}
		in, err := f.Open()
		if err != nil {
			return nil, fmt.Errorf("member %q: %w", f.Name, err)
		}
		a, err := Read(in)
		in.Close()
		if err != nil {
			return nil, fmt.Errorf("member %q: %w", f.Name, err)
		}
		arrays = append(arrays, Named{name, a})
	}
	return arrays, nil
}
