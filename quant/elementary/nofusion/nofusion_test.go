package nofusion

import "testing"

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
