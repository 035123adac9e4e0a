package results

import (
	"cmp"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"hash"
	"math"
	"slices"
)

// digestHeader opens the bytes under every digest, so that a later layout can
// never be mistaken for this one.
const digestHeader = "ulpine digest 1\n"

// The quiet NaNs with an empty payload stand for every NaN: which payload an
// operation leaves behind differs between processors.
const (
	nan32 = 0x7fc00000
	nan64 = 0x7ff8000000000000
)

// DigestOf is the SHA-256 of what came out of a run: its curve, its counters
// and its final weights. Two runs agree bit by bit if and only if their digests
// agree; code version, host, time, and the names of arm, layers and tensors are
// not part of it.
//
// The bytes hashed are, every integer unsigned 64-bit and every number
// little-endian, a NaN always as 0x7ff8000000000000 or 0x7fc00000:
//
//	"ulpine digest 1\n"                                  16 bytes of ASCII
//	curve     number of steps; the loss of each step     binary64
//	          number of epochs; of each epoch
//	            training loss, training metric,
//	            validation loss, validation metric,
//	            test loss, test metric                   binary64
//	            ties                                     integer
//	            loss scale                               binary64
//	            skipped steps                            integer
//	counters  number of rounding points with at least one
//	          event; of each, ordered by layer, then by
//	          the bytes of the point's word,
//	            layer                                    two's complement
//	            length of the word, the word             ASCII ("forward.sum")
//	            overflow, underflow, saturated, NaN      integers
//	weights   number of tensors; of each, in the order of
//	          the network,
//	            number of axes, the length of each       integers
//	            bytes a value, 4 or 8; number of values  integers
//	            the values, row-major                    binary32 or binary64
//
// A point without events is left out, so that it does not matter whether a
// trainer lists it.
func DigestOf(r *Run) Hash {
	w := digester{h: sha256.New()}
	w.text(digestHeader)
	w.curve(r)
	w.counters(r.Counters)
	w.weights(r.Final)
	return Hash(w.h.Sum(nil))
}

// Pair is a run's key with its digest.
type Pair struct{ Key, Digest Hash }

// StoreDigest is the SHA-256 of the pairs ordered by key: for each the 32 bytes
// of the key, then the 32 bytes of the digest. It names everything that a set
// of runs came to. The argument is left as it is.
func StoreDigest(pairs []Pair) Hash {
	sorted := slices.Clone(pairs)
	slices.SortFunc(sorted, func(a, b Pair) int {
		return cmp.Or(slices.Compare(a.Key[:], b.Key[:]), slices.Compare(a.Digest[:], b.Digest[:]))
	})
	h := sha256.New()
	for _, p := range sorted {
		h.Write(p.Key[:])
		h.Write(p.Digest[:])
	}
	return Hash(h.Sum(nil))
}

// String is the hash in lower-case hexadecimal, 64 digits.
func (h Hash) String() string { return hex.EncodeToString(h[:]) }

// Short is the first 12 hexadecimal digits, enough to tell hashes apart in print.
func (h Hash) Short() string { return hex.EncodeToString(h[:6]) }

// IsZero reports whether the hash was never set.
func (h Hash) IsZero() bool { return h == Hash{} }

// MarshalText writes the hash in hexadecimal.
func (h Hash) MarshalText() ([]byte, error) { return []byte(h.String()), nil }

// UnmarshalText reads 64 hexadecimal digits.
func (h *Hash) UnmarshalText(text []byte) error {
	if len(text) != 2*len(h) {
		return fmt.Errorf("a hash has %d hexadecimal digits, not %d", 2*len(h), len(text))
	}
	_, err := hex.Decode(h[:], text)
	return err
}

// digester writes numbers to a hash in the layout of DigestOf.
type digester struct {
	h   hash.Hash
	buf [8]byte
}

func (w *digester) text(s string) { w.h.Write([]byte(s)) }

func (w *digester) count(n uint64) {
	binary.LittleEndian.PutUint64(w.buf[:], n)
	w.h.Write(w.buf[:])
}

func (w *digester) real(x float64) {
	bits := math.Float64bits(x)
	if x != x {
		bits = nan64
	}
	w.count(bits)
}

func (w *digester) curve(r *Run) {
	w.count(uint64(len(r.Steps)))
	for _, loss := range r.Steps {
		w.real(loss)
	}
	w.count(uint64(len(r.Epochs)))
	for i := range r.Epochs {
		e := &r.Epochs[i]
		for _, x := range []float64{
			e.TrainLoss, e.TrainMetric, e.ValidationLoss,
			e.ValidationMetric, e.TestLoss, e.TestMetric,
		} {
			w.real(x)
		}
		w.count(e.Ties)
		w.real(e.LossScale)
		w.count(e.Skipped)
		if e.TestRMSE != 0 {
			w.real(e.TestRMSE)
		}
	}
}

func (w *digester) counters(all []PointCounts) {
	var eventful []PointCounts
	for _, p := range all {
		if p.Counts != (Counts{}) {
			eventful = append(eventful, p)
		}
	}
	slices.SortFunc(eventful, func(a, b PointCounts) int {
		return cmp.Or(cmp.Compare(a.Layer, b.Layer), cmp.Compare(a.Point, b.Point))
	})
	w.count(uint64(len(eventful)))
	for _, p := range eventful {
		w.count(uint64(int64(p.Layer)))
		w.count(uint64(len(p.Point)))
		w.text(p.Point)
		w.count(p.Counts.Overflow)
		w.count(p.Counts.Underflow)
		w.count(p.Counts.Saturated)
		w.count(p.Counts.NaN)
	}
}

func (w *digester) weights(tensors []Tensor) {
	w.count(uint64(len(tensors)))
	for i := range tensors {
		t := &tensors[i]
		w.count(uint64(len(t.Shape)))
		for _, n := range t.Shape {
			w.count(uint64(n))
		}
		w.count(uint64(t.Width()))
		w.count(uint64(len(t.Values)))
		w.h.Write(t.Bytes())
	}
}
