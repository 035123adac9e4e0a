package store

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"sync"
	"testing"

	bolt "go.etcd.io/bbolt"

	"ulpine/results"
)

func TestRoundTrip(t *testing.T) {
	s := open(t)
	for n, big := range []bool{false, true} {
		in := run(n, big)
		put(t, s, in)
		got, err := s.Get(in.Key)
		if err != nil {
			t.Fatal(err)
		}
		sameRun(t, got, in)
		curve, err := s.Curve(in.Key)
		if err != nil || len(curve.Steps) != len(in.Steps) || curve.Final != nil || curve.Initial != nil {
			t.Errorf("curve: %d steps, %d tensors, %v", len(curve.Steps), len(curve.Final), err)
		}
	}
	if _, err := s.Get(keyOf(99)); !errors.Is(err, ErrNoRun) {
		t.Errorf("a run that is not there: %v", err)
	}
}

func TestValuesStayBelow64kB(t *testing.T) {
	s := open(t)
	put(t, s, run(1, true))
	largest, pieces := 0, 0
	err := s.view(func(tx *bolt.Tx) error {
		return tx.ForEach(func(_ []byte, b *bolt.Bucket) error {
			return b.ForEach(func(_, v []byte) error {
				largest, pieces = max(largest, len(v)), pieces+1
				return nil
			})
		})
	})
	if err != nil || largest > 64_000 || largest != pieceSize || pieces < 15 {
		t.Errorf("largest value %d bytes, %d values, %v", largest, pieces, err)
	}
}

// TestPieceBoundary puts parts of exactly 0, 1 and 2 pieces and one byte to
// either side.
func TestPieceBoundary(t *testing.T) {
	s := open(t)
	p := part{kind: kindSteps}
	for i, n := range []int{0, 1, pieceSize - 1, pieceSize, pieceSize + 1, 2 * pieceSize, 2*pieceSize + 1} {
		data := make([]byte, n)
		for j := range data {
			data[j] = byte(j * 7)
		}
		err := s.do(&operation{write: func(tx *bolt.Tx) error {
			return putPart(tx.Bucket(bucketParts), keyOf(i), p, data)
		}})
		if err != nil {
			t.Fatal(err)
		}
		err = s.view(func(tx *bolt.Tx) error {
			got, err := getPart(tx.Bucket(bucketParts), keyOf(i), p)
			if err == nil && string(got) != string(data) {
				err = fmt.Errorf("%d bytes read back as %d", n, len(got))
			}
			return err
		})
		if err != nil {
			t.Error(err)
		}
	}
}

func TestPutAgain(t *testing.T) {
	s := open(t)
	failed := &results.Run{Arm: "arm-1", Replicate: 100, Key: keyOf(1), State: results.Failed, Cause: "panic: out of luck"}
	put(t, s, failed)
	got, err := s.Get(failed.Key)
	if err != nil {
		t.Fatal(err)
	}
	sameRun(t, got, failed)
	if !got.Digest.IsZero() {
		t.Error("a failed run has a digest")
	}

	good := run(1, true)
	put(t, s, good, good) // replaces the failed one; the second changes nothing
	small := run(1, false)
	if err := s.Put(small); !errors.Is(err, ErrDigestDiffers) || !strings.Contains(err.Error(), "arm-1/100") {
		t.Errorf("another result under the same key: %v", err)
	}
	if err := s.Put(failed); err == nil || errors.Is(err, ErrDigestDiffers) {
		t.Errorf("a failed run over a stored one: %v", err)
	}
	got, err = s.Get(good.Key)
	if err != nil {
		t.Fatal(err)
	}
	sameRun(t, got, good)
}

func TestPutRefuses(t *testing.T) {
	s := open(t)
	bad := map[string]func(*results.Run){
		"no key":        func(r *results.Run) { r.Key = results.Hash{} },
		"in flight":     func(r *results.Run) { r.State = results.InFlight },
		"narrow tensor": func(r *results.Run) { r.Final[0].Wide = false },
		"short tensor":  func(r *results.Run) { r.Initial[0].Values = r.Initial[0].Values[1:] },
	}
	for name, change := range bad {
		r := run(1, false)
		change(r)
		if err := s.Put(r); err == nil {
			t.Errorf("%s: stored all the same", name)
		}
	}
	if list, err := s.List(Filter{}); len(list) != 0 || err != nil {
		t.Errorf("refused runs left %v, %v", list, err)
	}
}

// TestRefusalSparesTheBatch puts good and bad runs at once, so that they share
// transactions.
func TestRefusalSparesTheBatch(t *testing.T) {
	s := open(t)
	put(t, s, run(0, false))
	var wg sync.WaitGroup
	errs := make([]error, 60)
	for n := range errs {
		wg.Go(func() {
			r := run(n, false)
			if n%3 == 0 {
				r = run(0, false)
				r.Steps[0]++ // another digest under key 0
			}
			errs[n] = s.Put(r)
		})
	}
	wg.Wait()
	for n, err := range errs {
		if want := n%3 == 0; errors.Is(err, ErrDigestDiffers) != want || !want && err != nil {
			t.Errorf("run %d: %v", n, err)
		}
	}
}

func TestPutLater(t *testing.T) {
	s := open(t)
	errs := make(chan error, 100)
	for n := range 100 {
		if err := s.PutLater(run(n, false), func(err error) { errs <- err }); err != nil {
			t.Fatal(err)
		}
	}
	if err := s.Close(); err != nil { // commits what is queued
		t.Fatal(err)
	}
	for range 100 {
		if err := <-errs; err != nil {
			t.Error(err)
		}
	}
	again := openAt(t, s.Path(), Options{ReadOnly: true})
	if list, err := again.List(Filter{}); len(list) != 100 || err != nil {
		t.Errorf("%d of 100 runs, %v", len(list), err)
	}
}

func TestStoreDigest(t *testing.T) {
	s := open(t)
	failed := &results.Run{Arm: "x", Key: keyOf(77), State: results.Failed}
	put(t, s, run(2, false), run(1, false), failed)
	a, b := run(1, false), run(2, false)
	want := results.StoreDigest([]results.Pair{
		{Key: a.Key, Digest: results.DigestOf(a)}, {Key: b.Key, Digest: results.DigestOf(b)},
	})
	if got, err := s.Digest(); got != want || err != nil {
		t.Errorf("store digest %v, want %v, %v", got, want, err)
	}
	want = results.StoreDigest([]results.Pair{{Key: b.Key, Digest: results.DigestOf(b)}})
	if got, err := s.Digest(b.Key, keyOf(88)); got != want || err != nil {
		t.Errorf("digest of one key %v, want %v, %v", got, want, err)
	}
}

func TestMarks(t *testing.T) {
	s := open(t)
	for n := range 3 {
		if err := s.Begin("arm", uint64(n), keyOf(n)); err != nil {
			t.Fatal(err)
		}
	}
	r := run(0, false)
	put(t, s, r)
	if err := s.BreakOff(keyOf(1), keyOf(0), keyOf(9)); err != nil {
		t.Fatal(err)
	}
	states := func(s *Store) string {
		m, err := s.Lookup([]results.Hash{keyOf(0), keyOf(1), keyOf(2), keyOf(9)})
		return fmt.Sprintf("%s, %s, %s, %q %v", m[keyOf(0)].State, m[keyOf(1)].State, m[keyOf(2)].State, m[keyOf(9)].State, err)
	}
	if got := states(s); got != `stored, broken off, in flight, "" <nil>` {
		t.Error(got)
	}
	s.Close()
	again := openAt(t, s.Path(), Options{})
	if got := states(again); got != `stored, broken off, broken off, "" <nil>` {
		t.Errorf("after reopening: %s", got)
	}
	if err := again.Begin("arm", 2, keyOf(2)); err != nil { // starts over
		t.Fatal(err)
	}
	if err := again.BreakOff(); err != nil { // waits for the writer
		t.Fatal(err)
	}
	if got := states(again); got != `stored, broken off, in flight, "" <nil>` {
		t.Errorf("started over: %s", got)
	}
}

func TestReadOnlyAndClosed(t *testing.T) {
	s := open(t)
	put(t, s, run(1, false))
	s.Close()
	if err := s.Close(); err != nil {
		t.Errorf("closing twice: %v", err)
	}
	if _, err := s.Get(keyOf(1)); !errors.Is(err, ErrClosed) {
		t.Errorf("reading a closed store: %v", err)
	}
	if err := s.Put(run(2, false)); !errors.Is(err, ErrClosed) {
		t.Errorf("writing to a closed store: %v", err)
	}
	reader := openAt(t, s.Path(), Options{ReadOnly: true})
	second := openAt(t, s.Path(), Options{ReadOnly: true}) // readers do not exclude each other
	if _, err := second.Get(keyOf(1)); err != nil {
		t.Error(err)
	}
	if err := reader.Put(run(2, false)); !errors.Is(err, ErrReadOnly) {
		t.Errorf("writing to a store open for reading: %v", err)
	}
}

// TestGetChecksTheDigest alters one bit of a stored weight behind the store's back.
func TestGetChecksTheDigest(t *testing.T) {
	s := open(t)
	r := run(1, false)
	put(t, s, r)
	err := s.do(&operation{write: func(tx *bolt.Tx) error {
		b := tx.Bucket(bucketParts)
		k := append(part{kindFinal, 0}.prefix(r.Key), 0, 0, 0, 0)
		v := append([]byte(nil), b.Get(k)...)
		v[0] ^= 1
		return b.Put(k, v)
	}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Get(r.Key); !errors.Is(err, ErrDamaged) {
		t.Errorf("an altered weight: %v", err)
	}
	if _, err := s.Curve(r.Key); err != nil {
		t.Errorf("the curve is untouched: %v", err)
	}
}

func TestMissingPart(t *testing.T) {
	s := open(t)
	r := run(1, true)
	put(t, s, r)
	err := s.do(&operation{write: func(tx *bolt.Tx) error {
		return tx.Bucket(bucketParts).Delete(append(part{kindSteps, 0}.prefix(r.Key), 0, 0, 0, 1))
	}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := s.Get(r.Key); !errors.Is(err, ErrDamaged) {
		t.Errorf("a lost piece: %v", err)
	}
}

func TestNaNInSummary(t *testing.T) {
	s := open(t)
	r := run(1, false)
	r.Epochs[1].TestMetric = math.NaN()
	r.Diverged, r.DivergedStep, r.Stalled = "loss is NaN", 17, true
	put(t, s, r)
	list, err := s.List(Filter{})
	if err != nil || len(list) != 1 {
		t.Fatal(list, err)
	}
	e := list[0]
	if !math.IsNaN(e.Last.TestMetric) || e.Last.Ties != 3 || e.Epochs != 2 || e.Steps != 3 ||
		e.Diverged != r.Diverged || e.DivergedStep != 17 || !e.Stalled || e.Wall != r.Wall || e.CodeVersion != "v0" {
		t.Errorf("%+v", e)
	}
}
