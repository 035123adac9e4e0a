package npy

import (
	"bytes"
	"errors"
	"math"
	"strings"
	"testing"

	"codeberg.org/sbinet/npyio/npy"
	"github.com/google/go-cmp/cmp"
)

var samples = []Array{
	{Shape: []int{2, 3}, Values: []float64{1, -0.5, 0.25, 3, math.Inf(1), 7}},
	{Shape: []int{2, 1, 2, 2}, Wide: true, Values: []float64{0.1, 1, 2, 3, 4, 5, 6, 1e-310}},
	{Shape: []int{3}, Values: []float64{1, 2, 3}},
	{Shape: nil, Wide: true, Values: []float64{42}},
	{Shape: []int{0, 5}, Values: []float64{}},
}

func TestRoundTrip(t *testing.T) {
	for _, a := range samples {
		var b bytes.Buffer
		if err := Write(&b, &a); err != nil {
			t.Fatal(err)
		}
		if start := b.Len() - len(a.Values)*map[bool]int{false: 4, true: 8}[a.Wide]; start%64 != 0 {
			t.Errorf("shape %v: data starts at byte %d", a.Shape, start)
		}
		back, err := Read(&b)
		if err != nil {
			t.Fatalf("shape %v: %v", a.Shape, err)
		}
		if diff := cmp.Diff(a, *back); diff != "" {
			t.Errorf("shape %v (-want +got):\n%s", a.Shape, diff)
		}
	}
}

// TestOtherReader has an independent library read what Write wrote.
func TestOtherReader(t *testing.T) {
	var b bytes.Buffer
	if err := Write(&b, &samples[0]); err != nil {
		t.Fatal(err)
	}
	r, err := npy.NewReader(&b)
	if err != nil {
		t.Fatal(err)
	}
	var got []float32
	if err := r.Read(&got); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff([]float32{1, -0.5, 0.25, 3, float32(math.Inf(1)), 7}, got); diff != "" {
		t.Error(diff)
	}
	if diff := cmp.Diff([]int{2, 3}, r.Header.Descr.Shape); diff != "" {
		t.Error(diff)
	}
}

func TestDamaged(t *testing.T) {
	var b bytes.Buffer
	if err := Write(&b, &samples[0]); err != nil {
		t.Fatal(err)
	}
	whole := b.String()
	cases := []struct {
		name, text string
		want       error
	}{
		{"empty", "", ErrFormat},
		{"other magic", "PK\x03\x04aaaaaaaaa", ErrFormat},
		{"truncated", whole[:len(whole)-1], ErrTruncated},
		{"trailing", whole + "x", ErrTrailing},
		{"integers", strings.Replace(whole, "<f4", "<i4", 1), ErrType},
		{"big-endian", strings.Replace(whole, "<f4", ">f4", 1), ErrType},
		{"fortran", strings.Replace(whole, "False,", "True, ", 1), ErrOrder},
		{"huge", strings.Replace(whole, "(2, 3)", "(9999999999999, 9999999)", 1), ErrFormat},
		{"negative", strings.Replace(whole, "(2, 3)", "(-2, 3)", 1), ErrFormat},
		{"no shape", strings.Replace(whole, "'shape'", "'shade'", 1), ErrFormat},
		{"version", whole[:6] + "\x09" + whole[7:], ErrFormat},
	}
	for _, c := range cases {
		if _, err := Read(strings.NewReader(c.text)); !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", c.name, err, c.want)
		}
	}
}

func TestNPZ(t *testing.T) {
	var in []Named
	for i := range samples {
		in = append(in, Named{string(rune('a' + i)), &samples[i]})
	}
	var b, again bytes.Buffer
	if err := WriteNPZ(&b, in); err != nil {
		t.Fatal(err)
	}
	if err := WriteNPZ(&again, in); err != nil || !bytes.Equal(b.Bytes(), again.Bytes()) {
		t.Error("the same arrays gave different bytes", err)
	}
	out, err := ReadNPZ(bytes.NewReader(b.Bytes()), int64(b.Len()))
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(in, out); diff != "" {
		t.Error(diff)
	}
	if _, err := ReadNPZ(bytes.NewReader(b.Bytes()[:40]), 40); err == nil {
		t.Error("a damaged archive was read")
	}
}

func FuzzRead(f *testing.F) {
	for _, a := range samples {
		var b bytes.Buffer
		if err := Write(&b, &a); err != nil {
			f.Fatal(err)
		}
		f.Add(b.Bytes())
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		a, err := Read(bytes.NewReader(raw))
		if err != nil {
			return
		}
		if n, _ := Len(a.Shape); n != len(a.Values) {
			t.Errorf("shape %v with %d values", a.Shape, len(a.Values))
		}
	})
}
