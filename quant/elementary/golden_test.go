package elementary

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"math"
	"os"
	"strings"
	"testing"
)

// goldenArguments cover every branch of every function.
var goldenArguments = []float64{
	0x1p-60, 0x1.8p-28, 0.01, 0.1, 0.124999, 0.3, 0.6875, 0.99999, 1.00001, 1.375, 2, 2.718281828, 3.14159265358979,
	10, 19.5, 100, 700.25, 709.782712893384, -0.05, -0.7, -1.5, -20.25, -708.5, -740, -745.1, 1e5, 1048575.5, 1048577.25,
	1e15, 1.7e308, 3e-310,
}

// golden writes the bits of every function at every argument, and a hash over a
// sweep of bit patterns.
func golden() string {
	var b strings.Builder
	for _, f := range []struct {
		name string
		f    func(float64) float64
	}{{"exp", Exp}, {"log", Log}, {"sin", Sin}, {"cos", Cos}, {"tanh", Tanh}, {"erf", Erf}, {"erfc", Erfc}, {"sigmoid", Sigmoid}} {
		for _, x := range goldenArguments {
			fmt.Fprintf(&b, "%s %x %016x\n", f.name, x, math.Float64bits(f.f(x)))
		}
		hash := sha256.New()
		var word [8]byte
		for i := range uint64(20000) {
			// Magnitudes from 2^-43 to 2^22, both signs, fractions by a Weyl sequence.
			fraction := i * 0x9E3779B97F4A7C15
			x := math.Float64frombits(i&1<<63 | (980+i%65)<<52 | fraction>>12)
			binary.LittleEndian.PutUint64(word[:], math.Float64bits(f.f(x)))
			hash.Write(word[:])
		}
		fmt.Fprintf(&b, "%s sweep %x\n", f.name, hash.Sum(nil))
	}
	return b.String()
}

// TestGoldenBits fails on a machine whose arithmetic differs in one bit. That the
// values are right is the business of TestErrorBounds.
func TestGoldenBits(t *testing.T) {
	const file = "testdata/golden.txt"
	got := golden()
	if *update {
		if err := os.MkdirAll("testdata", 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(file, []byte(got), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	data, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	want := strings.Split(string(data), "\n")
	lines := strings.Split(got, "\n")
	if len(lines) != len(want) {
		t.Fatalf("%d lines, the golden file has %d", len(lines), len(want))
	}
	for i, line := range lines {
		if line != want[i] {
			t.Errorf("got  %s\nwant %s", line, want[i])
		}
	}
}
