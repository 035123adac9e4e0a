package npy

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"strings"
)

// ErrLarge says that an array has more values than its reader wants.
var ErrLarge = fmt.Errorf("array is too large")

// wholes are the element types of whole numbers that ReadNumbers takes, by descr
// without its quotation marks: |u1 is a byte, <i8 NumPy's default.
var wholes = map[string]struct {
	width int
	value func([]byte) float64
}{
	"|u1": {1, func(b []byte) float64 { return float64(b[0]) }},
	"|i1": {1, func(b []byte) float64 { return float64(int8(b[0])) }},
	"<u2": {2, func(b []byte) float64 { return float64(binary.LittleEndian.Uint16(b)) }},
	"<i2": {2, func(b []byte) float64 { return float64(int16(binary.LittleEndian.Uint16(b))) }},
	"<u4": {4, func(b []byte) float64 { return float64(binary.LittleEndian.Uint32(b)) }},
	"<i4": {4, func(b []byte) float64 { return float64(int32(binary.LittleEndian.Uint32(b))) }},
	"<i8": {8, func(b []byte) float64 { return float64(int64(binary.LittleEndian.Uint64(b))) }},
	"<f4": {4, func(b []byte) float64 { return float64(math.Float32frombits(binary.LittleEndian.Uint32(b))) }},
	"<f8": {8, func(b []byte) float64 { return math.Float64frombits(binary.LittleEndian.Uint64(b)) }},
}

// ReadNumbers reads one array of at most the given number of values as Read does,
// and besides floating-point numbers takes whole ones: signed of 8 to 64 bits and
// unsigned of 8 to 32. Those beyond 2^53 come as the nearest binary64 number.
func ReadNumbers(r io.Reader, most int) (*Array, error) {
	head, err := readHeader(r)
	if err != nil {
		return nil, err
	}
	word := strings.Trim(entry(head, "descr"), `'"`)
	kind, ok := wholes[word]
	if ok && word[1] != 'f' {
		// The shape is read alike whatever the type.
		head = strings.Replace(head, word, "<f8", 1)
	}
	a, n, err := parseHeader(head)
	switch {
	case err != nil:
		return nil, err
	case !ok:
		return nil, fmt.Errorf("%w: %s", ErrType, word)
	case n > most:
		return nil, fmt.Errorf("%w: %d values, at most %d are read", ErrLarge, n, most)
	}
	raw, err := io.ReadAll(io.LimitReader(r, int64(n*kind.width)+1))
	switch {
	case err != nil:
		return nil, err
	case len(raw) < n*kind.width:
		return nil, fmt.Errorf("%w: shape %v takes %d bytes, found %d", ErrTruncated, a.Shape, n*kind.width, len(raw))
	case len(raw) > n*kind.width:
		return nil, fmt.Errorf("%w of shape %v", ErrTrailing, a.Shape)
	}
	a.Values = make([]float64, n)
	for i := range a.Values {
		a.Values[i] = kind.value(raw[i*kind.width:])
	}
	return a, nil
}
