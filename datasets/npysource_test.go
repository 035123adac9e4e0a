package datasets

import (
	"bytes"
	"encoding/binary"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"ulpine/datasets/npy"
)

func npyBytes(t *testing.T, shape []int, values ...float64) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := npy.Write(&b, &npy.Array{Shape: shape, Wide: true, Values: values}); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// wholeBytes is an array as NumPy saves whole numbers.
func wholeBytes(values ...int64) []byte {
	head := "{'descr': '<i8', 'fortran_order': False, 'shape': (" + string(rune('0'+len(values))) + ",), }\n"
	b := append([]byte("\x93NUMPY\x01\x00"), byte(len(head)), 0)
	b = append(b, head...)
	for _, v := range values {
		b = binary.LittleEndian.AppendUint64(b, uint64(v))
	}
	return b
}

func arrayFiles(t *testing.T) map[string][]byte {
	x := npyBytes(t, []int{4, 1, 2}, 1, 2, 3, 4, 5, 6, 7, 8)
	y := npyBytes(t, []int{4, 2}, 0.5, 1, 1.5, 2, 2.5, 3, 3.5, 4)
	var z bytes.Buffer
	named := []npy.Named{
		{Name: "x", Array: &npy.Array{Shape: []int{4, 1, 2}, Wide: true, Values: []float64{1, 2, 3, 4, 5, 6, 7, 8}}},
		{Name: "y", Array: &npy.Array{Shape: []int{4, 2}, Wide: true, Values: []float64{0.5, 1, 1.5, 2, 2.5, 3, 3.5, 4}}},
	}
	if err := npy.WriteNPZ(&z, named); err != nil {
		t.Fatal(err)
	}
	return map[string][]byte{
		"x3.npy": npyBytes(t, []int{4, 2, 2}, 10, 11, 12, 13, 14, 15, 16, 17, 18, 19, 20, 21, 22, 23, 24, 25),
		"x.npy":  x, "y.npy": y, "x.npy.gz": zip(x), "a.npz": z.Bytes(), "k.npy": wholeBytes(0, 2, 1, 0), "few.npy": wholeBytes(0, 1),
		"minus.npy": wholeBytes(0, -1, 1, 0), "nan.npy": npyBytes(t, []int{4}, 1, math.NaN(), 2, 3), "cut.npy": x[:len(x)-3], "same.npy": wholeBytes(0, 0, 0, 0),
	}
}

func loadArrays(t *testing.T, dir string, values map[string]any) (*Data, error) {
	t.Helper()
	s, err := New("npy", Options{Folder: dir, Values: values})
	if err != nil {
		return nil, err
	}
	return s.Load(0)
}

func TestArrays(t *testing.T) {
	dir := writeFiles(t, arrayFiles(t))
	want, err := loadArrays(t, dir, map[string]any{"train_inputs": "x.npy", "train_targets": "y.npy", "validation": 1, "scale": "none"})
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(want.Train.Inputs.Float32s(), []float32{1, 2, 3, 4, 5, 6}) || !slices.Equal(want.Train.Targets.Float32s(), []float32{0.5, 1, 1.5, 2, 2.5, 3}) ||
		!slices.Equal(want.Validation.Targets.Float32s(), []float32{3.5, 4}) || !slices.Equal(want.Shape, []int{1, 2}) || len(want.TargetNames) != 2 || want.Validation.Len() != 1 {
		t.Errorf("%+v", want)
	}
	for _, same := range []map[string]any{
		{"train_inputs": "x.npy.gz", "train_targets": "y.npy", "validation": 1, "scale": "none"},
		{"archive": "a.npz", "train_inputs": "x", "train_targets": "y", "validation": 1, "scale": "none"},
	} {
		if d, err := loadArrays(t, dir, same); err != nil || d.Hash != want.Hash {
			t.Errorf("%v: %v", same, err)
		}
	}
	// Two arrays of two channels each; y has two values where x has one channel of two.
	two, err := loadArrays(t, dir, map[string]any{"train_inputs": []any{"x.npy", "x3.npy"}, "train_labels": "k.npy", "scale": "none"})
	if err != nil || !slices.Equal(two.Shape, []int{3, 2}) || !slices.Equal(two.Train.Inputs.Float32s()[:12], []float32{1, 2, 10, 11, 12, 13, 3, 4, 14, 15, 16, 17}) {
		t.Fatalf("%v, %v", two, err)
	}
	members, err := loadArrays(t, dir, map[string]any{"archive": "a.npz", "train_inputs": []any{"y", "y"}, "train_targets": "y", "scale": "none"})
	if err != nil || !slices.Equal(members.Shape, []int{4}) || !slices.Equal(members.Train.Inputs.Float32s()[:4], []float32{0.5, 1, 0.5, 1}) {
		t.Fatalf("%v, %v", members, err)
	}
	for _, c := range []struct {
		inputs []any
		want   string
	}{
		{[]any{"x.npy", "y.npy"}, `"y.npy" of shape [4 2] does not fit "x.npy" of shape [4 1 2]`},
		{[]any{"k.npy", "k.npy"}, "has no axis along which"},
		{[]any{"x.npy", "gone.npy"}, "gone.npy: the file cannot be found"},
		{[]any{}, "the list is empty"},
		{[]any{"x.npy", 3}, "3 is no text"},
	} {
		if _, err := loadArrays(t, dir, map[string]any{"train_inputs": c.inputs, "train_labels": "k.npy"}); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%v: %v, want %s", c.inputs, err, c.want)
		}
	}
	d, err := loadArrays(t, dir, map[string]any{"train_inputs": "x.npy", "train_labels": "k.npy", "test_inputs": "x.npy", "test_labels": "k.npy", "test": 3})
	if err != nil || !slices.Equal(d.Train.Labels, []int32{0, 2, 1, 0}) || !slices.Equal(d.ClassNames, []string{"0", "1", "2"}) || d.Test.Len() != 3 || len(d.Mean) != 2 || d.Mean[0] != 4 {
		t.Fatalf("%+v, %v", d, err)
	}
}

func TestArrayErrors(t *testing.T) {
	dir := writeFiles(t, arrayFiles(t))
	for _, c := range []struct{ values, want string }{
		{"train_inputs=x.npy", "train_labels: is missing"},
		{"train_inputs=x.npy train_labels=k.npy train_targets=y.npy", "given together"},
		{"train_inputs=x.npy train_labels=k.npy test_inputs=x.npy", "go together"},
		{"train_inputs=x.npy train_labels=few.npy", "train_labels: its shape is [2], but there are 4 inputs"},
		{"train_inputs=x.npy train_labels=minus.npy", "example 1 has the label -1"},
		{"train_inputs=x.npy train_labels=same.npy", "the largest label is 0"},
		{"train_inputs=x.npy train_labels=y.npy", "2 values an example"},
		{"train_inputs=x.npy train_targets=nan.npy", "value 1 is NaN"},
		{"train_inputs=cut.npy train_targets=y.npy", "file ends before its data"},
		{"train_inputs=gone.npy train_targets=y.npy", "cannot be found"},
		{"archive=a.npz train_inputs=z train_targets=y", "it has no array \"z\"; its members: x.npy, y.npy"},
		{"archive=x.npy train_inputs=z train_targets=y", "it is no NPZ archive"},
	} {
		values := map[string]any{}
		for _, pair := range strings.Fields(c.values) {
			k, v, _ := strings.Cut(pair, "=")
			values[k] = v
		}
		if _, err := loadArrays(t, dir, values); err == nil || !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v, want %s", c.values, err, c.want)
		}
	}
}

// FuzzReadNumbers: no file panics or has other values than its shape says.
func FuzzReadNumbers(f *testing.F) {
	f.Add(wholeBytes(1, 2, 3))
	f.Fuzz(func(t *testing.T, raw []byte) {
		a, err := npy.ReadNumbers(bytes.NewReader(raw), 1000)
		if err != nil {
			return
		}
		if n, ok := npy.Len(a.Shape); !ok || n != len(a.Values) || n > 1000 {
			t.Errorf("shape %v with %d values", a.Shape, len(a.Values))
		}
	})
}

func TestTooManyNumbers(t *testing.T) {
	if _, err := npy.ReadNumbers(bytes.NewReader(wholeBytes(1, 2, 3)), 2); !errors.Is(err, npy.ErrLarge) {
		t.Error(err)
	}
}
