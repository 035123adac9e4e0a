package main

import (
	"fmt"
	"math/big"
	"os"
	"strings"

	"ulpine/quant"
	"ulpine/quant/random"
)

// defaultLength is the number of terms where the user does not say it.
const defaultLength = 1 << 16

// termSource yields the terms of a sum.
type termSource struct {
	word  string
	exact func(k int) quant.Real // term k, counted from 0
	file  []float64              // the values of a file, for which exact is nil
}

// newTermSource reads --terms.
func newTermSource(word string, seed uint64) (termSource, error) {
	s := termSource{word: word}
	switch word {
	case "ones":
		s.exact = func(int) quant.Real { return quant.Exactly(1) }
	case "harmonic":
		s.exact = func(k int) quant.Real { return quant.ExactQuotient(1, float64(k+1)) }
	case "tenth":
		tenth := realOf(big.NewRat(1, 10))
		s.exact = func(int) quant.Real { return tenth }
	case "uniform":
		// A stream apart from the rounding's: terms and random bits that share words
		// make stochastic sums stall.
		d := quant.Draws{Seed: random.Derive(seed, random.Data)}
		s.exact = func(k int) quant.Real { return quant.Exactly(float64(d.Word(uint64(k))) / (1 << 32)) }
	default:
		if _, err := os.Stat(word); err != nil && !strings.HasSuffix(word, ".npy") {
			return s, badInput(fmt.Errorf("--terms %q: one of ones, harmonic, uniform, tenth, or an NPY file", word))
		}
		a, err := readArray(word)
		if err != nil {
			return s, err
		}
		s.file = a.Values
	}
	return s, nil
}

// length settles the number of terms, 0 asking for the default.
func (s *termSource) length(n int) (int, error) {
	switch {
	case s.exact == nil && len(s.file) == 0:
		return 0, fmt.Errorf("%s holds no values", s.word)
	case s.exact == nil && n > len(s.file):
		return 0, fmt.Errorf("--length %d: %s holds %d values", n, s.word, len(s.file))
	case s.exact == nil && n == 0:
		n = len(s.file)
	case n == 0:
		n = defaultLength
	}
	if n < 1 || n > maxTerms {
		return 0, fmt.Errorf("--length %d: 1 to %d terms", n, maxTerms)
	}
	return n, nil
}

// terms returns the first n terms, rounded.
func (s *termSource) terms(n int, p quant.Point) []float64 {
	x := make([]float64, n)
	if s.exact == nil {
		quant.RoundSlice(x, s.file[:n], &p, quant.Draws{}, 0, nil)
		return x
	}
	for k := range x {
		x[k], _ = p.Round(s.exact(k), 0)
	}
	return x
}

// name is the source in words.
func (s *termSource) name() string {
	switch s.word {
	case "harmonic":
		return "harmonic series"
	case "tenth":
		return "0.1 each time"
	case "uniform":
		return "uniform between 0 and 1"
	}
	return s.word
}
