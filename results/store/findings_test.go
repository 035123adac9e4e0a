package store

import (
	"errors"
	"math"
	"reflect"
	"testing"

	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

// TestFindings: they come back, are not in the digest, and are missed if lost.
func TestFindings(t *testing.T) {
	plain, looked := run(1, false), run(1, false)
	looked.Findings = &results.Findings{
		Points: []results.PointFinding{{
			Epoch: 2, Layer: -1, Name: "input", Point: "input", Values: 9, Zeros: 1, Counts: results.Counts{Saturated: 2},
			Exponents: []results.ExponentCount{{Exponent: -1023, Count: 3}, {Exponent: 4, Count: 5}}, Signal: 0.1, Noise: math.Inf(1),
		}},
		Sums:      []results.SumFinding{{Epoch: 1, Layer: 3, Name: "dense 5", Point: "forward.sum", Count: 4, Terms: 64, Cross: 1.5, Squares: 2}},
		Updates:   []results.UpdateFinding{{Epoch: 1, Layer: 3, Param: "bias", Count: 5, Cross: 1, Squares: 2, Excess: -3, Intended: 4, Unmoved: 2}},
		Gradients: []results.GradientFinding{{Step: 50, Layer: 3, Param: "weight", Cosine: 0.75}},
	}
	s, bare := open(t), open(t)
	put(t, s, looked)
	put(t, bare, plain)
	got, err := s.Get(looked.Key)
	if err != nil {
		t.Fatal(err)
	}
	if !reflect.DeepEqual(got.Findings, looked.Findings) {
		t.Errorf("got %+v\nput %+v", got.Findings, looked.Findings)
	}
	without, err := bare.Get(plain.Key)
	if err != nil || without.Findings != nil || without.Digest != got.Digest {
		t.Errorf("%v; without findings: %+v, digest %v against %v", err, without.Findings, without.Digest, got.Digest)
	}
	err = s.do(&operation{write: func(tx *bolt.Tx) error {
		k := append(part{kind: kindLook}.prefix(looked.Key), 0, 0, 0, 0)
		return tx.Bucket(bucketParts).Delete(k)
	}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Get(looked.Key); !errors.Is(err, ErrDamaged) {
		t.Errorf("findings are lost, and it says %v", err)
	}
}
