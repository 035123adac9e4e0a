package nofusion

import (
	"os"
	"path/filepath"
	"testing"
)

// TestSeesFaults: one source with every fault, one without.
func TestSeesFaults(t *testing.T) {
	const bad = `package p
import "math"
func f(a, b, c float64) float64 { a *= b; return math.Sin(a) + b*c }
`
	faults, products, err := CheckSource("bad.go", []byte(bad))
	if err != nil || len(faults) != 3 || products != 1 {
		t.Errorf("faults %q, products %d, error %v: want three faults, one product", faults, products, err)
	}
	const good = `package p
import "math"
const k = 2 * 3
func f(a, b, c float64) float64 { return math.Sqrt(a) + float64(b*float64(c*a)) }
`
	faults, products, err = CheckSource("good.go", []byte(good))
	if err != nil || len(faults) != 0 || products != 2 {
		t.Errorf("faults %q, products %d, error %v: want none, two products", faults, products, err)
	}
	if _, _, err := CheckSource("broken.go", []byte("package")); err == nil {
		t.Error("no error for a source that does not parse")
	}
}

// TestFused compiles packages of measured values for arm64. That they ask for some
// fused products by name shows that the listing is read.
func TestFused(t *testing.T) {
	faults, asked, err := Fused("ulpine/quant/elementary", "ulpine/quant/random", "ulpine/datasets")
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range faults {
		t.Error(f)
	}
	if asked < 3 {
		t.Errorf("%d fused products asked for by name, want at least the three of package elementary", asked)
	}
}

// TestFusedCanFail compiles one fault.
func TestFusedCanFail(t *testing.T) {
	file := filepath.Join(t.TempDir(), "p.go")
	if err := os.WriteFile(file, []byte("package p\n\nfunc F(a, b, c float64) float64 { return a*b + c }\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	faults, _, err := Fused(file)
	if err != nil || len(faults) != 1 {
		t.Errorf("faults %q, error %v, want one fault", faults, err)
	}
}
