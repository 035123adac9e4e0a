package datasets

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
)

// idxHeader is the head of an IDX file: two zero bytes, the type of its elements,
// the number of dimensions, then every dimension as a big-endian 32-bit number
// (the format of the MNIST files, described by Y. LeCun, C. Cortes, C. Burges on
// their page; from memory).
type idxHeader struct {
	dims []int // at least one, each at least 1
}

const (
	idxUnsignedByte = 0x08
	idxMaxDims      = 5
)

// idxTypes are the other element types of the format.
var idxTypes = map[byte]string{0x09: "signed bytes", 0x0B: "16-bit integers", 0x0C: "32-bit integers", 0x0D: "binary32 numbers", 0x0E: "binary64 numbers"}

// per is the number of bytes of one example.
func (h idxHeader) per() int { return volume(h.dims[1:]) }

// size is the length of the whole file.
func (h idxHeader) size() int64 {
	return 4 + int64(4*len(h.dims)) + int64(h.dims[0])*int64(h.per())
}

// readIDXHeader reads and checks a header against the length of the file, so that
// nothing is allocated on its word alone.
func readIDXHeader(in *input) (idxHeader, error) {
	var h idxHeader
	magic := make([]byte, 4)
	if err := in.fill(magic, "a header of at least 8 bytes"); err != nil {
		return h, err
	}
	if err := checkIDXMagic(in.name, magic); err != nil {
		return h, err
	}
	product := int64(1)
	for i := range int(magic[3]) {
		var word [4]byte
		if err := in.fill(word[:], fmt.Sprintf("%d dimensions", magic[3])); err != nil {
			return h, err
		}
		n := int64(binary.BigEndian.Uint32(word[:]))
		if n == 0 {
			return h, in.fault(in.offset-4, fmt.Sprintf("dimension %d is 0: the file holds no examples", i+1), "give another file")
		}
		// product stays below 2^31 x 2^32.
		if product *= n; product > maxValues {
			return h, in.fault(in.offset-4, fmt.Sprintf("the header announces more than %d values", maxValues), "the header may be damaged; fetch the file again")
		}
		h.dims = append(h.dims, int(n))
	}
	return h, h.checkLength(in)
}

func checkIDXMagic(name string, magic []byte) error {
	bad := func(reason, remedy string) error {
		return &FileError{File: name, Offset: 0, Reason: reason, Remedy: remedy}
	}
	switch other, known := idxTypes[magic[2]], magic[2] == idxUnsignedByte; {
	case magic[0] != 0 || magic[1] != 0 || !known && other == "":
		return bad(fmt.Sprintf("wrong magic number %08x", magic), "an IDX file begins 0000 08 and the number of dimensions, images 00000803, labels 00000801")
	case !known:
		return bad("the elements are "+other, "only unsigned bytes (type 08) are read; convert the file")
	case magic[3] == 0 || magic[3] > idxMaxDims:
		return bad(fmt.Sprintf("the file has %d dimensions", magic[3]), fmt.Sprintf("1 (labels) to %d are read", idxMaxDims))
	}
	return nil
}

// checkLength compares what the header announces with what the file can hold.
func (h idxHeader) checkLength(in *input) error {
	announced := fmt.Sprintf("the header announces %s, %d bytes in all", times(h.dims), h.size())
	switch {
	case in.zipped && h.size() > in.most:
		return in.fault(0, announced+", more than the compressed file can hold", "the header or the file is damaged; fetch it again")
	case !in.zipped && h.size() > in.most:
		return in.fault(in.most, fmt.Sprintf("%s, but the file ends after %d", announced, in.most), "the file is cut short; fetch it again")
	case !in.zipped && h.size() < in.most:
		return in.fault(h.size(), fmt.Sprintf("%s, but the file goes on for %d more", announced, in.most-h.size()), "the header or the file is damaged; fetch it again")
	}
	return nil
}

// idxFile is what was read of a file: its header, and its content unless only the
// header was asked for.
type idxFile struct {
	idxHeader
	content []byte
}

// openIDX opens the file that the option key names, reads and closes it.
func openIDX(key, path string, read func(*input) (idxFile, error)) (f idxFile, err error) {
	in, err := openInput(key, path)
	if err != nil {
		return f, err
	}
	defer in.close()
	return read(in)
}

// headOnly reads a header.
func headOnly(in *input) (idxFile, error) {
	h, err := readIDXHeader(in)
	return idxFile{idxHeader: h}, err
}

// readIDX reads a whole file.
func readIDX(in *input) (idxFile, error) {
	h, err := readIDXHeader(in)
	if err != nil {
		return idxFile{}, err
	}
	// The buffer grows with what really comes, never ahead by more than a factor.
	var content bytes.Buffer
	length := h.size() - in.offset
	n, err := io.CopyN(&content, in, length)
	switch {
	case errors.Is(err, io.EOF):
		return idxFile{}, in.fault(in.offset, fmt.Sprintf("the data end after %d of %d bytes", n, length), "the file is cut short; fetch it again")
	case err != nil:
		return idxFile{}, err
	}
	// One more byte must not come; asking also verifies gzip's checksum.
	var extra [1]byte
	switch n, err := io.ReadFull(in, extra[:]); {
	case n > 0:
		return idxFile{}, in.fault(h.size(), "the file goes on after the announced data", "the header or the file is damaged; fetch it again")
	case !errors.Is(err, io.EOF):
		return idxFile{}, err
	}
	return idxFile{h, content.Bytes()}, nil
}

// fill reads len(p) bytes.
func (in *input) fill(p []byte, what string) error {
	at := in.offset
	_, err := io.ReadFull(in, p)
	if err == io.EOF || err == io.ErrUnexpectedEOF {
		return in.fault(at, "the file is too short for "+what, "it is cut short or no IDX file; fetch it again")
	}
	return err
}

func (in *input) fault(offset int64, reason, remedy string) error {
	return &FileError{File: in.name, Offset: offset, Reason: reason, Remedy: remedy}
}

// times spells a shape: 60000x28x28.
func times(shape []int) string {
	text := ""
	for i, n := range shape {
		if i > 0 {
			text += "x"
		}
		text += fmt.Sprint(n)
	}
	return text
}
