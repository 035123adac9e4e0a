package results

import (
	"encoding/binary"
	"fmt"
	"math"
)

// Width is the number of bytes a stored value of the tensor takes: 8 if the
// tensor is wide, else 4.
func (t *Tensor) Width() int {
	if t.Wide {
		return 8
	}
	return 4
}

// Bytes are the values as little-endian binary64 (wide) or binary32 numbers,
// every NaN as the canonical one. Values of a tensor that is not wide must be
// binary32 numbers; Check tells.
func (t *Tensor) Bytes() []byte {
	out := make([]byte, 0, len(t.Values)*t.Width())
	for _, x := range t.Values {
		switch {
		case t.Wide:
			out = appendReal(out, x)
		case x != x:
			out = binary.LittleEndian.AppendUint32(out, nan32)
		default:
			out = binary.LittleEndian.AppendUint32(out, math.Float32bits(float32(x)))
		}
	}
	return out
}

// SetBytes sets the values from what Bytes wrote. It errs when the number of
// bytes does not fit the shape.
func (t *Tensor) SetBytes(raw []byte) error {
	n := t.Len()
	if len(raw) != n*t.Width() {
		return fmt.Errorf("tensor %q of shape %v takes %d bytes, found %d", t.Name, t.Shape, n*t.Width(), len(raw))
	}
	t.Values = make([]float64, n)
	for i := range t.Values {
		if t.Wide {
			t.Values[i] = math.Float64frombits(binary.LittleEndian.Uint64(raw[8*i:]))
		} else {
			t.Values[i] = float64(math.Float32frombits(binary.LittleEndian.Uint32(raw[4*i:])))
		}
	}
	return nil
}

// Len is the number of values that the shape holds.
func (t *Tensor) Len() int {
	n := 1
	for _, d := range t.Shape {
		n *= d
	}
	return n
}

// Check errs when the values do not fill the shape, or when a tensor that is
// not wide holds a value that binary32 cannot, which storing would change.
func (t *Tensor) Check() error {
	if len(t.Values) != t.Len() {
		return fmt.Errorf("tensor %q of shape %v has %d values", t.Name, t.Shape, len(t.Values))
	}
	if t.Wide {
		return nil
	}
	for i, x := range t.Values {
		if x == x && float64(float32(x)) != x {
			return fmt.Errorf("tensor %q is stored in binary32, but its value %d, %v, is no binary32 number", t.Name, i, x)
		}
	}
	return nil
}

// RealBytes are numbers as little-endian binary64, every NaN as the canonical one.
func RealBytes(xs []float64) []byte {
	out := make([]byte, 0, 8*len(xs))
	for _, x := range xs {
		out = appendReal(out, x)
	}
	return out
}

// Reals is the inverse of RealBytes.
func Reals(raw []byte) ([]float64, error) {
	if len(raw)%8 != 0 {
		return nil, fmt.Errorf("%d bytes are no whole number of binary64 numbers", len(raw))
	}
	xs := make([]float64, len(raw)/8)
	for i := range xs {
		xs[i] = math.Float64frombits(binary.LittleEndian.Uint64(raw[8*i:]))
	}
	return xs, nil
}

func appendReal(out []byte, x float64) []byte {
	if x != x {
		return binary.LittleEndian.AppendUint64(out, nan64)
	}
	return binary.LittleEndian.AppendUint64(out, math.Float64bits(x))
}
