package datasets

import (
	"errors"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// wantOptionError insists on one *OptionError of a key with reason and remedy.
func wantOptionError(t *testing.T, err error, key string) {
	t.Helper()
	var o *OptionError
	switch {
	case !errors.As(err, &o):
		t.Errorf("error %v, want one of key %s", err, key)
	case o.Key != key:
		t.Errorf("error of key %q (%v), want %q", o.Key, err, key)
	case o.Reason == "" || o.Remedy == "" || strings.Contains(err.Error(), "\n"):
		t.Errorf("error %q lacks reason or remedy, or has several lines", err)
	}
}

func TestNewReadsOptions(t *testing.T) {
	s, err := New("pump-vibration", Options{Values: map[string]any{
		"train": int64(20), "test": 30, "data_seed": int64(9), "variant": "remounted",
	}})
	if err != nil {
		t.Fatal(err)
	}
	want := &PumpVibration{Train: 20, Validation: 500, Test: 30, DataSeed: 9, Variant: Remounted, Scale: Standardise}
	if diff := cmp.Diff(want, s); diff != "" {
		t.Error(diff)
	}
}

func TestNewErrors(t *testing.T) {
	for _, c := range []struct {
		name, key string
		values    map[string]any
	}{
		{"pump", "data", nil},
		{"pump-vibration", "train", map[string]any{"train": int64(0)}},
		{"pump-vibration", "train", map[string]any{"train": "many"}},
		{"pump-vibration", "train", map[string]any{"train": 3.5}},
		{"pump-vibration", "test", map[string]any{"test": int64(1) << 40}},
		{"pump-vibration", "data_seed", map[string]any{"data_seed": int64(-1)}},
		{"pump-vibration", "variant", map[string]any{"variant": "Remounted"}},
		{"pump-vibration", "variant", map[string]any{"variant": int64(1)}},
		{"pump-vibration", "trian", map[string]any{"trian": int64(5)}},
	} {
		_, err := New(c.name, Options{Values: c.values})
		wantOptionError(t, err, c.key)
	}
}

// TestAllFaultsAtOnce: several faults are told together, each with its key.
func TestAllFaultsAtOnce(t *testing.T) {
	_, err := New("pump-vibration", Options{Values: map[string]any{"train": "x", "test": int64(-1), "nonsense": true}})
	joined, ok := err.(interface{ Unwrap() []error })
	if !ok {
		t.Fatalf("error %v is not joined", err)
	}
	var keys []string
	for _, e := range joined.Unwrap() {
		var o *OptionError
		if errors.As(e, &o) {
			keys = append(keys, o.Key)
		}
	}
	if diff := cmp.Diff([]string{"train", "test", "nonsense"}, keys); diff != "" {
		t.Error(diff)
	}
}

func TestKeys(t *testing.T) {
	for _, name := range Names() {
		keys, err := Keys(name)
		if err != nil || len(keys) < 3 || Summary(name) == "" {
			t.Errorf("%s: keys %v, summary %q, error %v", name, keys, Summary(name), err)
		}
	}
	if _, err := Keys("nothing"); err == nil {
		t.Error("no error for an unknown name")
	}
}
