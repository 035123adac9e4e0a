package datasets

import (
	"bufio"
	"bytes"
	"compress/flate"
	"compress/gzip"
	"errors"
	"io"
	"io/fs"
	"os"
)

// A stretch of deflate codes at most 258 bytes with two bits, so gzip data grow by
// at most 1032 (RFC 1951; the figure is zlib's own).
const gzipRatio = 1032

// input is a file being read, decompressed where it begins with gzip's magic
// number, whatever its name.
type input struct {
	name   string
	file   io.Closer
	reader io.Reader
	zipped bool
	offset int64 // bytes of content read so far
	// most is the length of the content: exact for a plain file, an upper bound
	// for a compressed one.
	most int64
}

// openInput opens a regular file; key is the option that names it, for errors.
func openInput(key, name string) (*input, error) {
	fail := func(reason string, err error) (*input, error) {
		var path *fs.PathError
		if errors.As(err, &path) {
			err = path.Err // the path itself stands in front already
		}
		return nil, &FileError{File: name, Offset: -1, Reason: reason, Err: err, Remedy: "check the path given as " + key}
	}
	info, err := os.Stat(name)
	if err != nil {
		return fail("the file cannot be found", err)
	}
	if !info.Mode().IsRegular() {
		return fail("it is no regular file", nil)
	}
	file, err := os.Open(name)
	if err != nil {
		return fail("the file cannot be opened", err)
	}
	in, err := newInput(name, file, info.Size())
	if err != nil {
		file.Close()
		return nil, err
	}
	in.file = file
	return in, nil
}

// newInput reads size bytes of raw.
func newInput(name string, raw io.Reader, size int64) (*input, error) {
	buffered := bufio.NewReaderSize(raw, 1<<16)
	in := &input{name: name, reader: buffered, most: size}
	if magic, _ := buffered.Peek(2); !bytes.Equal(magic, []byte{0x1F, 0x8B}) {
		return in, nil
	}
	unzipped, err := gzip.NewReader(buffered)
	if err != nil {
		return nil, in.damaged(err)
	}
	in.reader, in.zipped = unzipped, true
	in.most = min(size, 1<<50) * gzipRatio
	return in, nil
}

func (in *input) close() {
	if in.file != nil {
		in.file.Close()
	}
}

// Read implements io.Reader, counting, with errors that name the file.
func (in *input) Read(p []byte) (int, error) {
	n, err := in.reader.Read(p)
	in.offset += int64(n)
	if err != nil && err != io.EOF {
		err = in.damaged(err)
	}
	return n, err
}

// damaged wraps what gzip or the system reported.
func (in *input) damaged(err error) error {
	e := &FileError{File: in.name, Offset: in.offset, Err: err, Reason: "the file cannot be read", Remedy: "check the disk, then fetch the file again"}
	var corrupt flate.CorruptInputError
	switch {
	case errors.Is(err, io.ErrUnexpectedEOF):
		e.Reason = "the gzip data end too early"
	case errors.Is(err, gzip.ErrChecksum), errors.As(err, &corrupt):
		e.Reason = "the gzip data are damaged"
	case errors.Is(err, gzip.ErrHeader):
		e.Reason = "the gzip data are damaged or followed by something else"
	}
	return e
}
