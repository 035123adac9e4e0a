package quant

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// TestSplittingIsNearestEven holds the sequence of engine.addSplit, and that of
// adding and subtracting a constant, to the integer rounding for every number of
// bits that they serve: all significands of up to 12 bits, others sampled, with
// every distance of the bits below from the value and from the midpoint.
func TestSplittingIsNearestEven(t *testing.T) {
	r := rand.New(rand.NewPCG(61, 62))
	for bits := 2; bits <= 25; bits++ {
		p := Point{Format: mustFormat(t, fmt.Sprintf("E8M%d(overflow=nan)", bits-1))}
		q := newQuick(&p)
		if q.kind != quickNearest && q.kind != quickNative32 {
			t.Fatalf("%v has kind %d", p, q.kind)
		}
		split := q.split()
		count := 1 << (bits - 1)
		for n := range min(count, 2048) {
			x := n
			if count > 2048 {
				x = r.IntN(count)
				if n < 64 {
					x = [2]int{n, count - 1 - n}[n%2] // both ends of the binade
				}
			}
			value := uint64(count+x) << q.drop
			half := uint64(1) << (q.drop - 1)
			for _, base := range []uint64{value, value + half, value + 2*half} {
				for d := range 2 * q.drop {
					low := uint64(1)<<(d/2) - uint64(d>>1&1)
					sig := base + low
					if d%2 == 1 {
						sig = base - low
					}
					if sig>>53 != 0 {
						continue
					}
					if sig >= 1<<52 {
						checkSplit(t, &q, split, math.Float64frombits(sig&fractionMask64|uint64(1023+3)<<52))
					}
				}
				if base < 1<<53 && base >= 1<<52 {
					checkSplit(t, &q, split, math.Float64frombits(base&fractionMask64|uint64(1023-4)<<52))
				}
			}
		}
	}
}

func checkSplit(t *testing.T, q *quick, split, x float64) {
	t.Helper()
	want, _ := q.round(x, 0)
	g := float64(x * split)
	if y := g - (g - x); y != want {
		t.Fatalf("%d fraction bits: splitting %x gives %x, want %x", q.fraction, x, y, want)
	}
	c := math.Float64frombits(max(math.Float64bits(x)&exponentMask64, q.low) + q.lift)
	if y := (x + c) - c; y != want {
		t.Fatalf("%d fraction bits: the constant gives %x for %x, want %x", q.fraction, y, x, want)
	}
}

// TestQuickKinds pins which loop serves which point: a change here is a change of
// speed that no other test would notice.
func TestQuickKinds(t *testing.T) {
	for text, want := range map[string]quickKind{
		"fp16": quickNearest, "bf16": quickNearest, "E4M3": quickNearest, "E2M1": quickNearest, "fp32": quickNative32,
		"fp64": quickNative64, "fp16 stochastic": quickStochastic, "fp16 stochastic(8,centred)": quickStochastic,
		"fp16 stochastic(8,centred-even)": quickGeneral, "fp16 toward-zero": quickDirected, "fp32 up": quickDirected,
		"fp16 nearest-away": quickDirected, "fp16 to-odd": quickGeneral, "E5M10(subnormals=flush)": quickDirected,
		"E9M0": quickGeneral, "fp64 stochastic": quickNone, "E11M40": quickNone, "fp32 stochastic(32)": quickGeneral,
	} {
		p, err := ParsePoint(text)
		if err != nil {
			t.Fatal(err)
		}
		if q := newQuick(&p); q.kind != want {
			t.Errorf("%s: kind %d, want %d", text, q.kind, want)
		}
	}
}
