package trainer

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"math"
	"testing"
)

// TestBitsStayWhatTheyWere holds losses and final parameters of two arms on a
// network of every kind of layer to digests that quant's scalar reference
// produced. They must be the same on every machine; a deliberate change of any
// bit raises the arithmetic version and changes them here.
func TestBitsStayWhatTheyWere(t *testing.T) {
	cases := []struct {
		name, want string
		arm        func(int) Arm
	}{
		{"baseline", "757a563b233df716", func(n int) Arm { return baseline(t, n) }},
		{"rough", "06b8c73cbde5b6f4", rough(t)},
	}
	for _, c := range cases {
		out := mustRun(t, convJob(t, c.arm))
		h := sha256.New()
		put := func(values []float64) {
			for _, v := range values {
				_ = binary.Write(h, binary.LittleEndian, math.Float64bits(v))
			}
		}
		put(out.Steps)
		for _, e := range out.Epochs {
			put(e.numbers())
		}
		for _, p := range out.Final {
			put(p.Values)
		}
		if got := fmt.Sprintf("%x", h.Sum(nil)[:8]); got != c.want {
			t.Errorf("%s: digest %s, want %s", c.name, got, c.want)
		}
	}
}
