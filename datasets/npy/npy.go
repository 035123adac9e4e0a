// Package npy reads and writes arrays of binary32 and binary64 numbers of any
// rank in the NPY format, versions 1 to 3, and several of them in an NPZ archive.
//
// The format is NumPy's published one (NumPy Enhancement Proposal 1, "A simple
// file format for NumPy arrays"). The package is our own because a reader here
// must survive any damaged file without a panic and without trusting a header's
// sizes, and must keep the shape of arrays of more than two axes.
package npy

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
)

// Array is a row-major array. Wide arrays hold binary64 numbers, others binary32.
type Array struct {
	Shape  []int
	Wide   bool
	Values []float64 // every binary32 number is one of binary64
}

// Errors that callers may tell apart with errors.Is.
var (
	ErrFormat    = errors.New("not an NPY file")
	ErrType      = errors.New("element type is not supported")
	ErrOrder     = errors.New("columns are stored first (fortran_order)")
	ErrTruncated = errors.New("file ends before its data")
	ErrTrailing  = errors.New("bytes follow the data")
)

const (
	magic     = "\x93NUMPY"
	maxHeader = 1 << 16 // bytes; real headers of plain arrays are about a hundred
	maxRank   = 32      // NumPy's own limit
)

// Len is the number of values of a shape; false if it does not fit an int.
func Len(shape []int) (int, bool) {
	n := 1
	for _, d := range shape {
		if d < 0 || d > 0 && n > math.MaxInt/8/d {
			return 0, false
		}
		n *= d
	}
	return n, true
}

// Read reads one array. The data is read as it comes, so a header that promises
// more than the file holds costs no memory.
func Read(r io.Reader) (*Array, error) {
	head, err := readHeader(r)
	if err != nil {
		return nil, err
	}
	a, n, err := parseHeader(head)
	if err != nil {
		return nil, err
	}
	width := 4
	if a.Wide {
		width = 8
	}
	raw, err := io.ReadAll(io.LimitReader(r, int64(n)*int64(width)+1))
	switch {
	case err != nil:
		return nil, err
	case len(raw) < n*width:
		return nil, fmt.Errorf("%w: shape %v takes %d bytes, found %d", ErrTruncated, a.Shape, n*width, len(raw))
	case len(raw) > n*width:
		return nil, fmt.Errorf("%w of shape %v", ErrTrailing, a.Shape)
	}
	a.Values = make([]float64, n)
	for i := range a.Values {
		if a.Wide {
			a.Values[i] = math.Float64frombits(binary.LittleEndian.Uint64(raw[8*i:]))
		} else {
			a.Values[i] = float64(math.Float32frombits(binary.LittleEndian.Uint32(raw[4*i:])))
		}
	}
	return a, nil
}

// readHeader returns the dictionary text.
func readHeader(r io.Reader) (string, error) {
	var start [8]byte
	if _, err := io.ReadFull(r, start[:]); err != nil {
		return "", fmt.Errorf("%w: it is shorter than a header", ErrFormat)
	}
	if string(start[:6]) != magic {
		return "", fmt.Errorf("%w: it starts with % x, not % x", ErrFormat, start[:6], magic)
	}
	var size uint32
	switch start[6] {
	case 1:
		var n uint16
		if err := binary.Read(r, binary.LittleEndian, &n); err != nil {
			return "", fmt.Errorf("%w: header length", ErrTruncated)
		}
		size = uint32(n)
	case 2, 3:
		if err := binary.Read(r, binary.LittleEndian, &size); err != nil {
			return "", fmt.Errorf("%w: header length", ErrTruncated)
		}
	default:
		return "", fmt.Errorf("%w: version %d is not known", ErrFormat, start[6])
	}
	if size > maxHeader {
		return "", fmt.Errorf("%w: a header of %d bytes", ErrFormat, size)
	}
	head := make([]byte, size)
	if _, err := io.ReadFull(r, head); err != nil {
		return "", fmt.Errorf("%w: header", ErrTruncated)
	}
	return string(head), nil
}

// parseHeader reads "{'descr': '<f4', 'fortran_order': False, 'shape': (2, 3), }"
// with its keys in any order.
func parseHeader(head string) (*Array, int, error) {
	a := &Array{}
	switch word := entry(head, "descr"); word {
	case "'<f4'", `"<f4"`:
	case "'<f8'", `"<f8"`:
		a.Wide = true
	case "":
		return nil, 0, fmt.Errorf("%w: its header has no descr", ErrFormat)
	default:
		return nil, 0, fmt.Errorf("%w: %s; save the array as float32 or float64, little-endian", ErrType, word)
	}
	shape := entry(head, "shape")
	if len(shape) < 2 || shape[0] != '(' {
		return nil, 0, fmt.Errorf("%w: its header has no shape", ErrFormat)
	}
	for field := range strings.SplitSeq(strings.Trim(shape, "()"), ",") {
		field = strings.TrimSpace(field)
		if field == "" {
			continue
		}
		d, err := strconv.Atoi(field)
		if err != nil || d < 0 || len(a.Shape) == maxRank {
			return nil, 0, fmt.Errorf("%w: shape %s", ErrFormat, shape)
		}
		a.Shape = append(a.Shape, d)
	}
	switch word := entry(head, "fortran_order"); {
	case word == "False":
	case word == "True" && len(a.Shape) < 2:
	case word == "True":
		return nil, 0, fmt.Errorf("%w; save it in C order", ErrOrder)
	default:
		return nil, 0, fmt.Errorf("%w: its header has no fortran_order", ErrFormat)
	}
	n, ok := Len(a.Shape)
	if !ok {
		return nil, 0, fmt.Errorf("%w: shape %v is larger than memory", ErrFormat, a.Shape)
	}
	return a, n, nil
}

// entry returns the text of a key's value: up to the comma that ends it, or the
// parenthesis that closes it.
func entry(head, key string) string {
	i := strings.Index(head, "'"+key+"'")
	if i < 0 {
		return ""
	}
	rest := strings.TrimLeft(head[i+len(key)+2:], ": ")
	end := strings.IndexAny(rest, ",}")
	if strings.HasPrefix(rest, "(") {
		end = strings.IndexByte(rest, ')') + 1
	}
	if end <= 0 {
		return ""
	}
	return strings.TrimSpace(rest[:end])
}

// Write writes the array, version 1.0, its data starting at a multiple of 64
// bytes as the format asks. It panics if the values do not fill the shape.
func Write(w io.Writer, a *Array) error {
	n, ok := Len(a.Shape)
	if !ok || n != len(a.Values) {
		panic(fmt.Sprintf("npy: %d values for shape %v", len(a.Values), a.Shape))
	}
	kind := "<f4"
	if a.Wide {
		kind = "<f8"
	}
	var shape strings.Builder
	for _, d := range a.Shape {
		fmt.Fprintf(&shape, "%d, ", d)
	}
	dims := strings.TrimSuffix(shape.String(), " ")
	if len(a.Shape) > 1 {
		dims = strings.TrimSuffix(dims, ",")
	}
	head := fmt.Sprintf("{'descr': '%s', 'fortran_order': False, 'shape': (%s), }", kind, dims)
	pad := 63 - (len(magic)+4+len(head))%64
	head += strings.Repeat(" ", pad) + "\n"
	var b bytes.Buffer
	b.WriteString(magic)
	b.Write([]byte{1, 0})
	b.Write(binary.LittleEndian.AppendUint16(nil, uint16(len(head))))
	b.WriteString(head)
	for _, x := range a.Values {
		if a.Wide {
			b.Write(binary.LittleEndian.AppendUint64(b.AvailableBuffer(), math.Float64bits(x)))
		} else {
			b.Write(binary.LittleEndian.AppendUint32(b.AvailableBuffer(), math.Float32bits(float32(x))))
		}
	}
	_, err := w.Write(b.Bytes())
	return err
}
