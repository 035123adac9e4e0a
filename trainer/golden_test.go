package trainer

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"math"
	"testing"

	"ulpine/quant"
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
		if got := bitsOf(out); got != c.want {
			t.Errorf("%s: digest %s, want %s", c.name, got, c.want)
		}
	}
}

// bitsOf is a digest of losses, epochs and final parameters.
func bitsOf(out Outcome) string {
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
	return fmt.Sprintf("%x", h.Sum(nil)[:8])
}

// TestZooBitsStayWhatTheyWere pins every kind of layer and the longest optimizer
// formula. The digests were recorded when the layers were written, from paths that
// other tests hold to exact reals and to finite differences; they tell machines
// and later changes apart.
func TestZooBitsStayWhatTheyWere(t *testing.T) {
	want := []string{"30552ae8292375e2", "e8f3b17d8fccd382", "bea1af98833202db", "16ce41af49178b39"}
	for i := range zoo {
		job := zooJob(t, i, rough(t))
		job.Training.Optimizer = Optimizer{Kind: "adamw", WeightDecay: 0.1, ClipNorm: 0.5, Compensated: true}
		job.Training.LearningRate = Schedule{Start: 0.02, Cosine: true, WarmUp: 2}
		for k := range job.Arm.Layers {
			l := &job.Arm.Layers[k]
			l.States = []quant.Point{l.States[0], l.States[0], l.States[0]}
		}
		if got := bitsOf(mustRun(t, job)); got != want[i] {
			t.Errorf("%s: digest %s, want %s", zoo[i].name, got, want[i])
		}
	}
}
