package datasets

import (
	"encoding/hex"
	"math"
	"slices"
	"strings"
	"testing"

	"ulpine/quant"
	"ulpine/quant/random"
)

func loadInvented(t *testing.T, name string, values map[string]any, seed uint64) *Data {
	t.Helper()
	s, err := New(name, Options{Values: values})
	if err != nil {
		t.Fatal(err)
	}
	d, err := s.Load(seed)
	if err != nil {
		t.Fatal(err)
	}
	f, err := s.Facts()
	if err != nil || f.Train != d.Train.Len() || !slices.Equal(f.TargetNames, d.TargetNames) || !slices.Equal(f.Shape, d.Shape) || len(f.ClassNames) != 0 {
		t.Errorf("facts %+v, %v of data %+v", f, err, d.facts())
	}
	if !strings.Contains(d.Description, "invented") {
		t.Errorf("%q does not say that it is invented", d.Description)
	}
	return d
}

var inventedNames = []string{"noisy-regression", "teacher", "window-energy", "sensor-drift"}

// goldenInvented are hashes of 8 training and 4 test examples; recorded from this
// code, whose other tests say that it is right.
var goldenInvented = map[string]string{
	"noisy-regression": "1f01f87368977325abc12b5272f7b7d41b1845145d58c0a77bcf795b0bd3e4bd",
	"teacher":          "831a4bf236ddf59c0bc4817e37be90653b74c28e6f3225a28f2e8d8b2c6bc045",
	"sensor-drift":     "e2f416732face8a6f3e69a9eb071d15645599783bd5bef9b200aafd0eadbeeb9",
	"window-energy":    "4c6c75196790f25f96b6037f0ebfdfbcce69d845cd5e540cb11dbbd3288f300e",
}

// TestInventedGolden pins every bit, and that example i changes with the seed and
// never with the sizes of the sets.
func TestInventedGolden(t *testing.T) {
	for _, name := range inventedNames {
		small := loadInvented(t, name, map[string]any{"train": 8, "test": 4}, 100)
		if got := hex.EncodeToString(small.Hash[:]); got != goldenInvented[name] {
			t.Errorf("%s: hash %s, want %s", name, got, goldenInvented[name])
		}
		large := loadInvented(t, name, map[string]any{"train": 20, "validation": 3, "test": 9}, 100)
		a, b := small.Test.Inputs.Float32s(), large.Test.Inputs.Float32s()
		if !slices.Equal(a, b[:len(a)]) || !slices.Equal(small.Test.Targets.Float32s(), large.Test.Targets.Float32s()[:4]) {
			t.Errorf("%s: examples change with the sizes of the sets", name)
		}
		if slices.Equal(a, small.Train.Inputs.Float32s()[:len(a)]) {
			t.Errorf("%s: training and test examples are the same", name)
		}
		if other := loadInvented(t, name, map[string]any{"train": 8, "test": 4}, 101); other.Hash == small.Hash {
			t.Errorf("%s: another seed, the same data", name)
		}
	}
}

func TestInventedErrors(t *testing.T) {
	for _, c := range []struct {
		name, key string
		value     any
	}{
		{"noisy-regression", "features", 0},
		{"noisy-regression", "noise_percent", -1},
		{"teacher", "width", 5000},
		{"teacher", "outputs", "two"},
		{"window-energy", "features", 3},
		{"sensor-drift", "variant", "worn"},
		{"sensor-drift", "drift_percent", -1},
	} {
		_, err := New(c.name, Options{Values: map[string]any{c.key: c.value}})
		wantOptionError(t, err, c.key)
	}
	s, err := New("window-energy", Options{Values: map[string]any{"train": 1_000_000}})
	if err != nil {
		t.Fatal(err)
	}
	_, err = s.Facts()
	wantOptionError(t, err, "train")
}

// TestNoiseFloor: the weights that drew the targets leave an RMSE of the floor
// that the description states; without noise, none but the rounding of targets.
func TestNoiseFloor(t *testing.T) {
	const n = 4000
	for _, c := range []struct {
		percent int
		sigma   float64
	}{{0, 0}, {25, 0.25}} {
		d := loadInvented(t, "noisy-regression", map[string]any{"train": n, "test": 0, "noise_percent": c.percent}, 7)
		quiet := loadInvented(t, "noisy-regression", map[string]any{"train": n, "test": 0, "noise_percent": 0}, 7)
		var sum float64
		for i, y := range d.Train.Targets.Float32s() {
			e := float64(y) - float64(quiet.Train.Targets.Float32s()[i])
			sum += float64(e * e)
		}
		// The RMSE of n normal errors has the relative standard error 1/sqrt(2n) = 1.1 %.
		if rmse := math.Sqrt(sum / n); math.Abs(rmse-c.sigma) > 0.05*c.sigma {
			t.Errorf("noise %d %%: RMSE %v", c.percent, rmse)
		}
	}
	// And the noise-free targets are linear in the inputs: 16 of them and one
	// difference decide. x -> y is fitted on the first 16 examples and asked of the rest.
	d := loadInvented(t, "noisy-regression", map[string]any{"train": 40, "test": 0, "noise_percent": 0, "features": 4}, 7)
	w := solve(d.Train.Inputs.Float32s(), d.Train.Targets.Float32s(), 4)
	for i, y := range d.Train.Targets.Float32s() {
		var got float64
		for j := range w {
			got += w[j] * float64(d.Train.Inputs.Float32s()[4*i+j])
		}
		if math.Abs(got-float64(y)) > 1e-4 {
			t.Errorf("example %d: %v, want %v", i, got, y)
		}
	}
}

// solve fits n weights to the first n rows by elimination with pivots.
func solve(x, y []float32, n int) []float64 {
	a := make([][]float64, n)
	for i := range a {
		for j := range n {
			a[i] = append(a[i], float64(x[n*i+j]))
		}
		a[i] = append(a[i], float64(y[i]))
	}
	for k := range n {
		p := k
		for i := k; i < n; i++ {
			if math.Abs(a[i][k]) > math.Abs(a[p][k]) {
				p = i
			}
		}
		a[k], a[p] = a[p], a[k]
		for i := range n {
			if i == k {
				continue
			}
			f := a[i][k] / a[k][k]
			for j := range a[i] {
				a[i][j] -= f * a[k][j]
			}
		}
	}
	w := make([]float64, n)
	for i := range w {
		w[i] = a[i][n] / a[i][i]
	}
	return w
}

// TestTeacher: targets have the second moment that the gains promise.
func TestTeacher(t *testing.T) {
	d := loadInvented(t, "teacher", map[string]any{"train": 500, "test": 0, "outputs": 3, "width": 64}, 3)
	if !slices.Equal(d.Train.Targets.Shape(), []int{500, 3}) || len(d.TargetNames) != 3 {
		t.Fatalf("targets of shape %v, names %q", d.Train.Targets.Shape(), d.TargetNames)
	}
	var sum float64
	for _, y := range d.Train.Targets.Float32s() {
		sum += float64(y) * float64(y)
	}
	// E y^2 over teachers is gain^2 width E h^2 = 2 E h^2, with h = relu of variance 2: 2.
	if m := sum / 1500; m < 0.7 || m > 6 {
		t.Errorf("mean square %v", m)
	}
}

// TestDrift: both variants are the same plant, the drifted one seen through gains and
// offsets that the test draws a second time; a linear map gives the targets of either.
func TestDrift(t *testing.T) {
	const n, sensors = 3000, 4
	options := func(variant string) map[string]any {
		return map[string]any{"train": n, "test": 0, "sensors": sensors, "hidden": 4, "noise_percent": 0, "drift_percent": 30, "variant": variant}
	}
	fresh, drifted := loadInvented(t, "sensor-drift", options("fresh"), 7), loadInvented(t, "sensor-drift", options("drifted"), 7)
	d := random.Draws{Seed: pumpKey(1, 7), Phase: 3, Site: 6}
	var moment [2][sensors][2]float64 // of each variant and sensor: mean, mean square
	for v, data := range []*Data{fresh, drifted} {
		for i, x := range data.Train.Inputs.Float32s() {
			moment[v][i%sensors][0] += float64(x) / n
			moment[v][i%sensors][1] += float64(x) * float64(x) / n
		}
	}
	for j := range sensors {
		gain, offset := 1+0.3*d.Normal(uint64(2*j)), 0.3*d.Normal(uint64(2*j+1))
		a, b := moment[0][j], moment[1][j]
		spread, wantMean := math.Sqrt(a[1]-a[0]*a[0]), gain*a[0]+offset
		got := math.Sqrt(b[1]-b[0]*b[0]) / spread
		// Both sides are of 3,000 examples: 5 standard errors of mean and deviation.
		if math.Abs(b[0]-wantMean) > 5*spread*math.Sqrt(2.0/n)*math.Abs(gain) || math.Abs(got/math.Abs(gain)-1) > 5/math.Sqrt(n) {
			t.Errorf("sensor %d: mean %v, want %v; gain %v, want %v", j, b[0], wantMean, got, gain)
		}
	}
	w := solve(fresh.Train.Inputs.Float32s(), fresh.Train.Targets.Float32s(), sensors)
	undone := drifted.Train.Inputs.Float32s()
	for i, y := range drifted.Train.Targets.Float32s()[:100] {
		var got float64
		for j := range w {
			gain, offset := 1+0.3*d.Normal(uint64(2*j)), 0.3*d.Normal(uint64(2*j+1))
			got += w[j] * (float64(undone[sensors*i+j]) - offset) / gain
		}
		if math.Abs(got-float64(y)) > 1e-3 {
			t.Fatalf("example %d: %v, want %v", i, got, y)
		}
	}
	if slices.Equal(fresh.Train.Targets.Float32s(), drifted.Train.Targets.Float32s()) {
		t.Error("both variants have the same examples")
	}
}

// TestEnergyRetention sums the squares of a window sequentially in 16-bit formats:
// what is left of the exact sum is the reason for the task. Bands are wide of the
// values measured here: see the log.
func TestEnergyRetention(t *testing.T) {
	d := loadInvented(t, "window-energy", map[string]any{"train": 8, "test": 0}, 100)
	x, y := d.Train.Inputs.Float32s(), d.Train.Targets.Float32s()
	for _, c := range []struct {
		format    string
		chunk     int
		low, high float64
	}{
		{"bf16", energySamples, 0.45, 0.7},
		{"fp16", energySamples, 0.9, 0.97},
		{"bf16", 64, 0.985, 1.005},
		{"fp16", 64, 0.998, 1.002},
		{"fp32", energySamples, 0.99999, 1.00001},
	} {
		format, err := quant.ParseFormat(c.format)
		if err != nil {
			t.Fatal(err)
		}
		var mean float64
		for n := range y {
			mean += retained(x[n*energySamples:][:energySamples], &quant.Point{Format: format}, c.chunk) / float64(energySamples) / float64(y[n]) / float64(len(y))
		}
		t.Logf("%s, chunks of %d: %.4f of the mean square", c.format, c.chunk, mean)
		if mean < c.low || mean > c.high {
			t.Errorf("%s, chunks of %d: %v of the sum is left, want %v to %v", c.format, c.chunk, mean, c.low, c.high)
		}
	}
}

// TestSteadyEnergy: of noise of one level all along, standard normal, the sequential
// sum of 4,096 squares keeps half in bfloat16 and 0.93 in binary16; chunks of 64 keep
// all. An earlier prototype of this project had 0.50, 0.93 and 1.000.
func TestSteadyEnergy(t *testing.T) {
	const windows = 16
	for _, c := range []struct {
		format    string
		chunk     int
		low, high float64
	}{
		{"bf16", energySamples, 0.47, 0.53},
		{"fp16", energySamples, 0.91, 0.95},
		{"bf16", 64, 0.995, 1.005},
		{"fp16", 64, 0.9995, 1.0005},
	} {
		format, err := quant.ParseFormat(c.format)
		if err != nil {
			t.Fatal(err)
		}
		var mean float64
		for n := range windows {
			x, exact := make([]float32, energySamples), 0.0
			for i, z := range normals(random.Draws{Seed: 11, Step: uint32(n)}, drawInput, energySamples) {
				x[i] = float32(z * z)
				exact += float64(x[i])
			}
			mean += retained(x, &quant.Point{Format: format}, c.chunk) / exact / windows
		}
		t.Logf("%s, chunks of %d: %.4f of the sum", c.format, c.chunk, mean)
		if mean < c.low || mean > c.high {
			t.Errorf("%s, chunks of %d: %v of the sum is left, want %v to %v", c.format, c.chunk, mean, c.low, c.high)
		}
	}
}

// retained sums chunks at a point, each from zero, and the chunks' sums in binary64.
func retained(x []float32, p *quant.Point, chunk int) float64 {
	var sum float64
	for ; len(x) > 0; x = x[chunk:] {
		acc := []float32{0}
		for _, v := range x[:chunk] {
			quant.AddSlice(acc, acc, []float32{v}, p, quant.Draws{}, nil)
		}
		sum += float64(acc[0])
	}
	return sum
}

// TestTargetsOfOtherOutputs: the hash tells [2, 2] targets from [4, 1].
func TestTargetsOfOtherOutputs(t *testing.T) {
	hash := func(n, outputs int) [32]byte {
		d := Data{Train: newTargetSet([]int{4 / n}, []float32{1, 2, 3, 4}, outputs, []float32{5, 6, 7, 8})}
		d.seal()
		return d.Hash
	}
	if hash(2, 2) == hash(4, 1) {
		t.Error("one hash for two shapes of targets")
	}
	d := Data{Train: newTargetSet([]int{1}, []float32{1}, 1, []float32{2})}
	d.seal()
	e := Data{Train: newTargetSet([]int{1}, []float32{1}, 1, []float32{3})}
	if e.seal(); d.Hash == e.Hash {
		t.Error("targets are not in the hash")
	}
}
