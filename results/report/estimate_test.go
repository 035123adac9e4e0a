package report

import (
	"math"
	"testing"
)

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: %v, want %v", what, got, want)
	}
}

// TestTInterval uses Student's own data: the extra hours of sleep of ten
// patients (Student, Biometrika 6, 1908; the second drug minus the first), whose
// mean is 1.58 and whose 95 % interval is 0.700 to 2.460 (from memory of the
// standard treatment of this example, and by hand with t = 2.262157).
func TestTInterval(t *testing.T) {
	x := []float64{1.2, 2.4, 1.3, 1.3, 0, 1.0, 1.8, 0.8, 4.6, 1.4}
	e := tInterval(x, 0.95)
	near(t, "mean", e.Mean, 1.58, 1e-12)
	near(t, "low", e.Low, 0.7001142, 1e-6)
	near(t, "high", e.High, 2.4598858, 1e-6)
	if e.N != 10 {
		t.Errorf("n = %d", e.N)
	}
	one := tInterval([]float64{math.NaN(), 3, math.Inf(1)}, 0.95)
	if one.N != 1 || one.Mean != 3 || !math.IsNaN(one.Low) || !math.IsNaN(one.High) {
		t.Errorf("one value: %+v", one)
	}
	same := tInterval([]float64{0.1, 0.1, 0.1}, 0.95)
	if same.Mean != 0.1 || same.Low != 0.1 || same.High != 0.1 {
		t.Errorf("equal values: %+v", same)
	}
	if none := tInterval(nil, 0.95); none.N != 0 || !math.IsNaN(none.Mean) {
		t.Errorf("no value: %+v", none)
	}
}

func TestMiddle(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	for _, c := range []struct {
		in          []float64
		lo, mid, hi float64
		n           int
	}{
		{[]float64{3, 1, 2}, 1, 2, 3, 3},
		{[]float64{4, nan, 1, 2, 3}, 1, 2.5, 4, 4},
		{[]float64{5, 4, 3, 2, 1}, 2, 3, 4, 5},
		{[]float64{1, inf, inf}, 1, inf, inf, 3},
		{[]float64{1, 2, inf, inf}, 1, inf, inf, 4},
		{[]float64{1, 2, 3, inf}, 1, 2.5, inf, 4},
		{[]float64{7}, 7, 7, 7, 1},
	} {
		lo, mid, hi, n := middle(c.in)
		if lo != c.lo || mid != c.mid || hi != c.hi || n != c.n {
			t.Errorf("%v: %v %v %v n=%d, want %+v", c.in, lo, mid, hi, n, c)
		}
	}
	if _, mid, _, n := middle([]float64{nan}); n != 0 || !math.IsNaN(mid) {
		t.Error("the middle of nothing")
	}
}
