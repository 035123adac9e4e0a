package quant

import (
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"sync"
	"testing"
	"time"
)

// benchMode is an arithmetic that is measured.
type benchMode struct {
	name      string
	acc       string
	operands  string  // their format; empty: fp16
	deviation float64 // of the operands; 0: a quarter, which keeps sums in range
}

// benchModes carry the names that the table of DEVELOPERS.md uses; binary16
// throughout unless the name says otherwise.
var benchModes = []benchMode{
	{name: "baseline", acc: "product fp32; sum fp32"},
	{name: "baseline-pairwise", acc: "product fp32; sum fp32; pairwise"},
	{name: "fma-chain", acc: "product exact; sum fp32"},
	{name: "rounded-product-and-sum", acc: "product fp16; sum fp16"},
	{name: "rounded-product-and-sum-bf16", acc: "product bf16; sum bf16", operands: "bf16"},
	{name: "rounded-product-binary32-sum", acc: "product fp16; sum fp32"},
	{name: "binary32-product-rounded-sum", acc: "product fp32; sum fp16", operands: "fp32"},
	{name: "fused-sum", acc: "product exact; sum fp16"},
	{name: "rounded-sum-through-binary32", acc: "product exact; sum fp16; through binary32"},
	{name: "stochastic-sum", acc: "product fp16; sum fp16 stochastic"},
	{name: "stochastic-sum-through-binary32", acc: "product fp16; sum fp16 stochastic; through binary32"},
	{name: "stochastic-product-and-sum", acc: "product fp16 stochastic; sum fp16 stochastic"},
	{name: "exact-product-stochastic-sum", acc: "product exact; sum fp16 stochastic"},
	{name: "exact-product-stochastic-sum-through-binary32", acc: "product exact; sum fp16 stochastic; through binary32"},
	{name: "exact-product-stochastic-sum-bf16", acc: "product exact; sum bf16 stochastic", operands: "bf16"},
	{name: "exact-product-stochastic-sum-through-binary32-bf16", acc: "product exact; sum bf16 stochastic; through binary32", operands: "bf16"},
	{name: "chunk64-binary32-outside", acc: "product fp16; sum fp16; outer fp32; chunk(64)"},
	{name: "pairwise", acc: "product fp16; sum fp16; pairwise"},
	{name: "lanes8", acc: "product fp16; sum fp16; lanes(8)"},
	{name: "wide", acc: "product exact; sum fp16; wide"},
	{name: "toward-zero", acc: "product fp16 toward-zero; sum fp16 toward-zero"},
	{name: "flush", acc: "product E5M10(subnormals=flush); sum E5M10(subnormals=flush)"},
	{name: "saturating-E4M3", acc: "product E4M3; sum E4M3", operands: "E4M3"},
	// Sums of 512 terms leave the format in every tile, as in a run that diverges.
	{name: "overflow-redo", acc: "product fp16; sum fp16", deviation: 64},
}

// benchModes64 are those of the controls, whose tensors are float64.
var benchModes64 = []benchMode{
	{name: "control-binary64", acc: "product fp64; sum fp64"},
	{name: "control-binary64-fused", acc: "product exact; sum fp64"},
}

// benchShape is a product of matrices, I x J x K.
type benchShape struct {
	name    string
	i, j, k int
}

// benchShapes are squares, and the linear layers of a LeNet-size network on 64 images
// of 28x28: its convolutions of 5x5 (1 to 8 channels, 8 to 16), forward and, of the
// first, the weight gradient; its dense layer of 256 to 120.
var benchShapes = []benchShape{
	{"512x512x512", 512, 512, 512},
	{"256x256x256", 256, 256, 256},
	{"lenet-conv1-8x36864x25", 8, 64 * 24 * 24, 25},
	{"lenet-conv2-16x4096x200", 16, 64 * 8 * 8, 200},
	{"lenet-conv1-weights-8x25x36864", 8, 25, 64 * 24 * 24},
	{"dense-120x64x256", 120, 64, 256},
}

// BenchmarkMatMul measures products of matrices, packing included, in GF: 2 I J K over
// time, alone and with a helper.
func BenchmarkMatMul(b *testing.B) {
	for _, s := range benchShapes {
		for _, mode := range benchModes {
			benchmarkWorkers(b, s.name+"/"+mode.name, func(b *testing.B, t *Team) { benchmarkProduct[float32](b, mode, s, t) })
		}
		for _, mode := range benchModes64 {
			benchmarkWorkers(b, s.name+"/"+mode.name, func(b *testing.B, t *Team) { benchmarkProduct[float64](b, mode, s, t) })
		}
	}
}

// benchmarkWorkers runs a benchmark alone and with one helper, given two processors.
func benchmarkWorkers(b *testing.B, name string, f func(*testing.B, *Team)) {
	b.Run(name+"/workers=1", func(b *testing.B) { f(b, nil) })
	b.Run(name+"/workers=2", func(b *testing.B) {
		if runtime.GOMAXPROCS(0) < 2 {
			b.Skip("one processor")
		}
		team, stop := NewTeam(1), make(chan struct{})
		var done sync.WaitGroup
		done.Go(func() { team.Help(stop) })
		for team.Idle() < 1 {
			runtime.Gosched()
		}
		f(b, team)
		close(stop)
		done.Wait()
	})
}

func benchmarkProduct[T Element](b *testing.B, mode benchMode, s benchShape, team *Team) {
	acc, err := ParseAccumulate(mode.acc)
	if err != nil {
		b.Fatal(err)
	}
	m, err := NewMultiplier[T](acc)
	if err != nil {
		b.Fatal(err)
	}
	m.Share(team)
	r := rand.New(rand.NewPCG(1, 2))
	p := Product[T]{
		I: s.i, J: s.j, K: s.k, C: make([]T, s.i*s.j),
		A: Matrix[T]{benchOperand[T](b, r, mode, s.i*s.k), s.k, 1},
		B: Matrix[T]{benchOperand[T](b, r, mode, s.k*s.j), s.j, 1},
	}
	m.Mul(p, nil, nil) // memory grows with the first product of a shape
	b.ReportAllocs()
	wall, cpu := fastest(b, func() { m.Mul(p, nil, nil) })
	operations := 2 * float64(s.i) * float64(s.j) * float64(s.k)
	b.ReportMetric(operations*float64(b.N)/float64(b.Elapsed().Nanoseconds()), "GF")
	b.ReportMetric(operations/wall, "GF-best")
	b.ReportMetric(operations/cpu, "GF-cpu") // of all processors together
}

// fastest repeats work and returns the nanoseconds of the fastest pass, by the clock
// and by the processor's time, which holds on a busy machine. Passes are timed in
// groups long enough for the coarser clock.
func fastest(b *testing.B, work func()) (wall, cpu float64) {
	const span = time.Millisecond
	start := time.Now()
	work()
	group := int(span/max(time.Since(start), 1)) + 1
	wall, cpu = math.Inf(1), math.Inf(1)
	done := 0
	var t0 time.Time
	var c0 time.Duration
	for b.Loop() {
		if done%group == 0 {
			t0, c0 = time.Now(), cpuTime()
		}
		work()
		if done++; done%group == 0 {
			wall = min(wall, float64(time.Since(t0))/float64(group))
			cpu = min(cpu, float64(cpuTime()-c0)/float64(group))
		}
	}
	return wall, cpu
}

// benchOperand draws normal numbers of a mode's format.
func benchOperand[T Element](b *testing.B, r *rand.Rand, mode benchMode, n int) []T {
	p := Point{Format: Binary16}
	deviation := mode.deviation
	if deviation == 0 {
		deviation = 0.25
	}
	if mode.operands != "" {
		var err error
		if p, err = ParsePoint(mode.operands); err != nil {
			b.Fatal(err)
		}
	}
	x := make([]T, n)
	for i := range x {
		x[i] = T(r.NormFloat64() * deviation)
	}
	RoundSlice(x, x, &p, Draws{}, 0, nil)
	return x
}

// benchSlices are numbers of elements of binary32: in a second-level cache, and far
// more than any cache holds.
var benchSlices = []struct {
	name string
	n    int
}{{"cache-64Ki", 1 << 16}, {"memory-16Mi", 1 << 24}}

// benchRoundings are measured element by element, benchShared with the search for
// their scales, in the cache only: memory is not what bounds them.
var (
	benchRoundings = []string{"fp16", "bf16", "E4M3", "fp32", "fp16 toward-zero", "fp16 stochastic", "bf16 stochastic(32)"}
	benchShared    = []string{"MXFP8(E4M3)", "MXFP4", "INT8"}
)

// BenchmarkRound measures rounding of slices beside copy() of the same slices, by
// turns: GB/s counts bytes of the source, of-copy is the share of copy's speed, by
// the median times of both.
func BenchmarkRound(b *testing.B) {
	for _, s := range benchSlices {
		for _, text := range benchRoundings {
			b.Run(s.name+"/"+text, func(b *testing.B) { benchmarkRounding(b, text, s.n) })
		}
	}
	for _, text := range benchShared {
		b.Run(benchSlices[0].name+"/"+text, func(b *testing.B) { benchmarkRounding(b, text, benchSlices[0].n) })
	}
}

func benchmarkRounding(b *testing.B, text string, n int) {
	p, err := ParsePoint(text)
	if f, e := ParseFormat(text); e == nil {
		p, err = Point{Format: f}, nil // one with shared scales is no point by itself
	}
	if err != nil {
		b.Fatal(err)
	}
	src, dst := make([]float32, n), make([]float32, n)
	r := rand.New(rand.NewPCG(1, 2))
	for i := range src {
		src[i] = float32(r.Float64()*4 - 2)
	}
	round := func() { RoundSlice(dst, src, &p, Draws{}, 0, nil) }
	if _, shared := p.Format.(Blocked); shared {
		// As an activation of 256 values an example.
		round = func() { RoundTensor(dst, src, Shape{n / 256, 256, 1}, &p, Draws{}, 0, nil) }
	}
	round()
	var ours, copies []time.Duration
	for b.Loop() {
		t0 := time.Now()
		round()
		t1 := time.Now()
		copy(dst, src)
		ours, copies = append(ours, t1.Sub(t0)), append(copies, time.Since(t1))
	}
	slices.Sort(ours)
	slices.Sort(copies)
	mine, its := ours[len(ours)/2], copies[len(copies)/2]
	b.ReportMetric(float64(4*n)/float64(mine.Nanoseconds()), "GB/s")
	b.ReportMetric(float64(its)/float64(mine), "of-copy")
}
