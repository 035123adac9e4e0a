package results

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"math"
	"slices"
	"testing"
	"time"
)

func epochOf(trainLoss, train, validationLoss, validation, testLoss, test float64, ties uint64, scale float64, skipped uint64) Epoch {
	return Epoch{
		TrainLoss: trainLoss, TrainMetric: train, ValidationLoss: validationLoss, ValidationMetric: validation,
		TestLoss: testLoss, TestMetric: test, Ties: ties, LossScale: scale, Skipped: skipped,
	}
}

// sample is a run with every field of the digest away from zero.
func sample() Run {
	return Run{
		Arm: "bf16-nearest", Replicate: 103, State: Stored,
		Steps: []float64{2.5, 1.25, math.NaN()},
		Epochs: []Epoch{
			epochOf(2, 0.25, 1.5, 0.5, 1.75, 0.375, 3, 1024, 1),
			epochOf(1, 0.5, math.NaN(), math.NaN(), 1.25, 0.625, 4, 512, 2),
		},
		Counters: []PointCounts{
			{Layer: 2, Name: "dense 16", Point: "forward.sum", Counts: Counts{1, 2, 3, 4}},
			{Layer: 0, Name: "conv1d", Point: "update.master"}, // nothing happened
			{Layer: -1, Name: "loss", Point: "loss.gradient", Counts: Counts{Underflow: 7}},
			{Layer: 2, Name: "dense 16", Point: "forward.activation", Counts: Counts{NaN: 9}},
		},
		Final: []Tensor{
			{Name: "2.weight", Shape: []int{2, 2}, Values: []float64{1, -0.5, math.Copysign(0, -1), math.NaN()}},
			{Name: "2.bias", Shape: []int{2}, Wide: true, Values: []float64{0.1, math.Inf(1)}},
		},
	}
}

// TestDigestLayout writes the documented bytes a second time, with
// encoding/binary instead of the digester.
func TestDigestLayout(t *testing.T) {
	var b bytes.Buffer
	put := func(values ...any) {
		for _, v := range values {
			if err := binary.Write(&b, binary.LittleEndian, v); err != nil {
				t.Fatal(err)
			}
		}
	}
	n := uint64(0x7ff8000000000000)
	b.WriteString("ulpine digest 1\n")
	put(uint64(3), 2.5, 1.25, n)
	put(uint64(2))
	put(2.0, 0.25, 1.5, 0.5, 1.75, 0.375, uint64(3), 1024.0, uint64(1))
	put(1.0, 0.5, n, n, 1.25, 0.625, uint64(4), 512.0, uint64(2))
	put(uint64(3))
	put(int64(-1), uint64(13), []byte("loss.gradient"), uint64(0), uint64(7), uint64(0), uint64(0))
	put(int64(2), uint64(18), []byte("forward.activation"), uint64(0), uint64(0), uint64(0), uint64(9))
	put(int64(2), uint64(11), []byte("forward.sum"), uint64(1), uint64(2), uint64(3), uint64(4))
	put(uint64(2))
	put(uint64(2), uint64(2), uint64(2), uint64(4), uint64(4), float32(1), float32(-0.5), uint32(1<<31), uint32(0x7fc00000))
	put(uint64(1), uint64(2), uint64(8), uint64(2), 0.1, math.Inf(1))

	r := sample()
	if got, want := DigestOf(&r), Hash(sha256.Sum256(b.Bytes())); got != want {
		t.Errorf("digest %v, the documented layout gives %v", got, want)
	}
}

// TestDigestSees checks that what is in the digest changes it and what is not does not.
func TestDigestSees(t *testing.T) {
	base := sample()
	want := DigestOf(&base)
	outside := map[string]func(*Run){
		"arm":            func(r *Run) { r.Arm = "other" },
		"replicate":      func(r *Run) { r.Replicate++ },
		"key":            func(r *Run) { r.Key[0]++ },
		"code version":   func(r *Run) { r.CodeVersion = "v2" },
		"host":           func(r *Run) { r.Host = "elsewhere" },
		"start":          func(r *Run) { r.Started = time.Now() },
		"wall time":      func(r *Run) { r.Wall = time.Hour },
		"initial":        func(r *Run) { r.Initial = r.Final },
		"data":           func(r *Run) { r.Data[0]++ },
		"layer name":     func(r *Run) { r.Counters[0].Name = "dense out=16" },
		"tensor name":    func(r *Run) { r.Final[0].Name = "w" },
		"NaN payload":    func(r *Run) { r.Steps[2] = math.Float64frombits(0xfff8000000000123) },
		"further RMSE":   func(r *Run) { r.Epochs[1].TrainRMSE, r.Epochs[1].ValidationRMSE = 1, 2 },
		"by class":       func(r *Run) { r.Epochs[1].Test = &ClassScores{Examples: []uint64{1}} },
		"silent counter": func(r *Run) { r.Counters = append(r.Counters, PointCounts{Layer: 9, Point: "forward.sum"}) },
		"counter order":  func(r *Run) { slices.Reverse(r.Counters) },
	}
	inside := map[string]func(*Run){
		"a step":        func(r *Run) { r.Steps[1] = math.Nextafter(r.Steps[1], 2) },
		"step count":    func(r *Run) { r.Steps = r.Steps[:2] },
		"train loss":    func(r *Run) { r.Epochs[0].TrainLoss++ },
		"train metric":  func(r *Run) { r.Epochs[0].TrainMetric++ },
		"valid loss":    func(r *Run) { r.Epochs[0].ValidationLoss++ },
		"valid metric":  func(r *Run) { r.Epochs[0].ValidationMetric++ },
		"test loss":     func(r *Run) { r.Epochs[1].TestLoss++ },
		"test metric":   func(r *Run) { r.Epochs[1].TestMetric++ },
		"ties":          func(r *Run) { r.Epochs[1].Ties++ },
		"loss scale":    func(r *Run) { r.Epochs[1].LossScale++ },
		"skipped":       func(r *Run) { r.Epochs[1].Skipped++ },
		"RMSE":          func(r *Run) { r.Epochs[1].TestRMSE = 0.5 },
		"overflow":      func(r *Run) { r.Counters[0].Counts.Overflow++ },
		"underflow":     func(r *Run) { r.Counters[0].Counts.Underflow++ },
		"saturated":     func(r *Run) { r.Counters[0].Counts.Saturated++ },
		"NaN":           func(r *Run) { r.Counters[0].Counts.NaN++ },
		"layer":         func(r *Run) { r.Counters[0].Layer++ },
		"point":         func(r *Run) { r.Counters[0].Point = "forward.outer" },
		"a weight":      func(r *Run) { r.Final[1].Values[0] = math.Nextafter(0.1, 1) },
		"sign of zero":  func(r *Run) { r.Final[0].Values[2] = 0 },
		"shape":         func(r *Run) { r.Final[0].Shape = []int{4} },
		"width":         func(r *Run) { r.Final[0].Wide = true },
		"tensor order":  func(r *Run) { slices.Reverse(r.Final) },
		"tensor number": func(r *Run) { r.Final = r.Final[:1] },
	}
	for name, change := range outside {
		r := sample()
		if change(&r); DigestOf(&r) != want {
			t.Errorf("%s changed the digest", name)
		}
	}
	for name, change := range inside {
		r := sample()
		if change(&r); DigestOf(&r) == want {
			t.Errorf("%s did not change the digest", name)
		}
	}
	if DigestOf(&base) != want || base.Counters[0].Layer != 2 {
		t.Error("taking the digest altered the run")
	}
}

func TestStoreDigest(t *testing.T) {
	a, b := Pair{Hash{1}, Hash{9}}, Pair{Hash{2}, Hash{8}}
	pairs := []Pair{b, a}
	got := StoreDigest(pairs)
	var bytes []byte
	for _, h := range []Hash{a.Key, a.Digest, b.Key, b.Digest} {
		bytes = append(bytes, h[:]...)
	}
	if want := Hash(sha256.Sum256(bytes)); got != want {
		t.Errorf("store digest %v, want %v", got, want)
	}
	if pairs[0] != b {
		t.Error("the argument was sorted")
	}
	if got == StoreDigest([]Pair{a}) {
		t.Error("a missing run does not show")
	}
	if StoreDigest(nil).String() != "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855" {
		// FIPS 180-4 test vector: SHA-256 of the empty string
		t.Error("no runs: not the SHA-256 of nothing")
	}
}

func TestHashText(t *testing.T) {
	h := Hash(sha256.Sum256([]byte("abc")))
	text, _ := h.MarshalText()
	var back Hash
	if err := back.UnmarshalText(text); err != nil || back != h {
		t.Errorf("%s read back as %v, %v", text, back, err)
	}
	if back.UnmarshalText([]byte("12")) == nil || back.UnmarshalText(bytes.Repeat([]byte("g"), 64)) == nil {
		t.Error("a short or non-hexadecimal text was accepted")
	}
	if h.Short() != string(text[:12]) || h.IsZero() || !(Hash{}).IsZero() {
		t.Error("Short or IsZero is wrong")
	}
}
