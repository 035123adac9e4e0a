package quant

import (
	"math"
	"math/big"
	"math/rand/v2"
	"testing"
)

func mustShared(t testing.TB, name string) Blocked {
	t.Helper()
	f, err := ParseFormat(name)
	if err != nil {
		t.Fatal(err)
	}
	return f.(Blocked)
}

// TestBlockExample: one short block in the four kinds of element, codes and scale by
// the floor rule, recomputed with exact rationals outside of this project. 7.9 is
// beyond the largest element in E4M3 and E2M1: the floor rule loses the maximum.
func TestBlockExample(t *testing.T) {
	v := []float64{1, -0.5, 0.3, 7.9, 0.01, -3.1, 0, 2.5}
	for _, c := range []struct {
		name  string
		scale uint64
		codes []uint64
	}{
		{"MXFP8(E4M3)", 0x79, []uint64{0x68, 0xe0, 0x5a, 0x7e, 0x32, 0xf4, 0, 0x72}},
		{"MXFP4", 0x7f, []uint64{2, 9, 1, 7, 0, 0xd, 0, 4}},
		{"MXFP6(E2M3)", 0x7f, []uint64{8, 0x24, 2, 0x1f, 0, 0x34, 0, 0x12}},
		{"MXINT8", 0x81, []uint64{0x10, 0xf8, 5, 0x7e, 0, 0xce, 0, 0x28}},
	} {
		b := mustShared(t, c.name).(Block)
		p := Point{Format: b}
		scale, codes, ok := b.EncodeBlock(v, Scaling{Factor: 1}, &p, nil)
		if !ok || scale != c.scale {
			t.Errorf("%s: scale %x %v, want %x", c.name, scale, ok, c.scale)
		}
		for i := range codes {
			if codes[i] != c.codes[i] {
				t.Errorf("%s: %v has code %x, want %x", c.name, v[i], codes[i], c.codes[i])
			}
		}
	}
}

var _ = []any{math.Pi, big.NewInt, rand.Int}
