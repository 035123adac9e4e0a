package store

import (
	"errors"
	"math"
	"reflect"
	"testing"

	bolt "go.etcd.io/bbolt"
	"pgregory.net/rapid"

	"ulpine/results"
)

// TestPredictions: they come back, are not in the digest, take about a byte an
// example or less, and are missed if lost.
func TestPredictions(t *testing.T) {
	const examples = 5000
	plain, kept := run(1, false), run(1, false)
	p := &results.Predictions{}
	for i := range examples {
		truth := int32(i * 7 % 5)
		p.Truth, p.Called = append(p.Truth, truth), append(p.Called, truth)
		if i%13 == 0 {
			p.Called[i] = int32(i%6) - 1
		}
	}
	kept.Predictions = p
	s, bare := open(t), open(t)
	put(t, s, kept)
	put(t, bare, plain)
	got, err := s.Get(kept.Key)
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(got.Predictions, p) {
		t.Error("predictions do not come back")
	}
	curve, err := s.Curve(kept.Key)
	if err != nil || !reflect.DeepEqual(curve.Predictions, p) {
		t.Errorf("without tensors: %v", err)
	}
	without, err := bare.Get(plain.Key)
	if err != nil || without.Predictions != nil || without.Digest != got.Digest {
		t.Errorf("%v; digest %v against %v", err, without.Digest, got.Digest)
	}
	raw, err := packPredictions(p)
	if err != nil || len(raw) > examples {
		t.Errorf("%d bytes for %d examples, %v", len(raw), examples, err)
	}
	err = s.do(&operation{write: func(tx *bolt.Tx) error {
		return tx.Bucket(bucketParts).Delete(append(part{kind: kindPredictions}.prefix(kept.Key), 0, 0, 0, 0))
	}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Get(kept.Key); !errors.Is(err, ErrDamaged) {
		t.Errorf("predictions are lost, and it says %v", err)
	}
}

// TestPackPredictions: any classes and any values, NaN and infinities among them.
func TestPackPredictions(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := &results.Predictions{Outputs: rapid.IntRange(0, 3).Draw(t, "outputs")}
		n := rapid.IntRange(0, 40).Draw(t, "examples")
		most := rapid.SampledFrom([]int32{1, 254, 255, 65534, 65535, math.MaxInt32 - 1}).Draw(t, "classes")
		p.Called, p.Truth = []int32{}, []int32{}
		if p.Outputs > 0 {
			p.Called, p.Truth = nil, nil
			p.Values, p.Targets = make([]float32, n*p.Outputs), make([]float32, n*p.Outputs)
		}
		for i := range n * max(p.Outputs, 1) {
			if p.Outputs > 0 {
				p.Values[i] = math.Float32frombits(rapid.Uint32().Draw(t, "value"))
				p.Targets[i] = math.Float32frombits(rapid.Uint32().Draw(t, "target"))
				continue
			}
			p.Truth = append(p.Truth, rapid.Int32Range(0, most).Draw(t, "truth"))
			p.Called = append(p.Called, rapid.Int32Range(-1, most).Draw(t, "called"))
		}
		raw, err := packPredictions(p)
		if err != nil {
			t.Fatal(err)
		}
		got, err := unpackPredictions(raw)
		if err != nil {
			t.Fatal(err)
		}
		same := func(a, b []float32) bool { return string(reals32(nil, a)) == string(reals32(nil, b)) }
		if !reflect.DeepEqual(got.Called, p.Called) || !reflect.DeepEqual(got.Truth, p.Truth) || !same(got.Values, p.Values) || !same(got.Targets, p.Targets) {
			t.Fatalf("put %+v, got %+v", p, got)
		}
	})
}

// TestUnpackRefuses what no run has written.
func TestUnpackRefuses(t *testing.T) {
	if _, err := packPredictions(&results.Predictions{Called: []int32{1}}); err == nil {
		t.Error("a class called without a class")
	}
	for name, record := range map[string]packed{
		"too many":   {Examples: math.MaxInt32 + 1, Width: 1},
		"too large":  {Examples: math.MaxInt32, Width: 4},
		"no width":   {Examples: 1},
		"odd width":  {Examples: 1, Width: 3},
		"cut short":  {Examples: 4, Width: 1, Data: []byte{1}},
		"no bytes":   {Examples: 4, Width: 1},
		"many more":  {Examples: 1, Width: 1, Data: mustPack(t, 3)},
		"other kind": {Examples: 9, Outputs: 1, Data: mustPack(t, 3)},
	} {
		raw, err := encode(record)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := unpackPredictions(raw); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}

// mustPack is the compressed data of n examples.
func mustPack(t *testing.T, n int) []byte {
	raw, err := packPredictions(&results.Predictions{Called: make([]int32, n), Truth: make([]int32, n)})
	if err != nil {
		t.Fatal(err)
	}
	var record packed
	if err := decode(raw, &record); err != nil {
		t.Fatal(err)
	}
	return record.Data
}
