package results

import (
	"math"
	"math/big"
	"testing"
)

// TestExactRateTable holds ExactRate to rows for n = 10 of published tables of
// exact 95 % limits, such as Geigy's Documenta (from memory, four decimals).
func TestExactRateTable(t *testing.T) {
	for k, want := range [][2]float64{
		{0, 0.3085}, {0.0025, 0.4450}, {0.0252, 0.5561}, {0.0667, 0.6525}, {0.1216, 0.7376}, {0.1871, 0.8129},
	} {
		low, high := ExactRate(uint64(k), 10, 0.95)
		if math.Abs(low-want[0]) > 5.1e-5 || math.Abs(high-want[1]) > 5.1e-5 {
			t.Errorf("%d of 10: %.4f to %.4f, want %v", k, low, high, want)
		}
	}
}

// exactTail is P(X >= k) in 300-bit arithmetic, term by term.
func exactTail(k, n uint64, p float64) float64 {
	rate := new(big.Float).SetPrec(300).SetFloat64(p)
	rest := new(big.Float).SetPrec(300).Sub(big.NewFloat(1), rate)
	sum := new(big.Float).SetPrec(300)
	for i := k; i <= n; i++ {
		term := new(big.Float).SetPrec(300).SetInt(new(big.Int).Binomial(int64(n), int64(i)))
		for range i {
			term.Mul(term, rate)
		}
		for range n - i {
			term.Mul(term, rest)
		}
		sum.Add(sum, term)
	}
	f, _ := sum.Float64()
	return f
}

// TestExactRateDefinition: the tails at both ends are what they should be.
func TestExactRateDefinition(t *testing.T) {
	for _, c := range []struct{ k, n uint64 }{{1, 1}, {0, 1}, {1, 10}, {9, 10}, {34, 40}, {1, 400}, {340, 400}, {0, 400}, {400, 400}} {
		for _, confidence := range []float64{0.9, 0.95, 0.999} {
			tail := (1 - confidence) / 2
			low, high := ExactRate(c.k, c.n, confidence)
			if c.k > 0 && math.Abs(exactTail(c.k, c.n, low)/tail-1) > 1e-8 || c.k == 0 && low != 0 {
				t.Errorf("%d of %d at %v: lower end %v has tail %v", c.k, c.n, confidence, low, exactTail(c.k, c.n, low))
			}
			if c.k < c.n && math.Abs((1-exactTail(c.k+1, c.n, high))/tail-1) > 1e-8 || c.k == c.n && high != 1 {
				t.Errorf("%d of %d at %v: upper end %v", c.k, c.n, confidence, high)
			}
		}
	}
	// closed form: none of n leaves out (1-p)^n
	if _, high := ExactRate(0, 1_000_000, 0.95); math.Abs(high/-math.Expm1(math.Log(0.025)/1e6)-1) > 1e-9 {
		t.Errorf("none of a million: %v", high)
	}
}

func TestExactRateOfNothing(t *testing.T) {
	for _, c := range []struct {
		k, n       uint64
		confidence float64
	}{{0, 0, 0.95}, {3, 2, 0.95}, {1, 2, 0}, {1, 2, 1}, {1, 2, math.NaN()}} {
		if low, high := ExactRate(c.k, c.n, c.confidence); !math.IsNaN(low) || !math.IsNaN(high) {
			t.Errorf("%+v: %v to %v", c, low, high)
		}
	}
}
