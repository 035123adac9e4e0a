package draw

import (
	"math"
	"strconv"
	"strings"
)

// Scale maps values to pixels.
type Scale interface {
	// At is the pixel of a value; NaN where the scale cannot show it.
	At(v float64) float64
	// Ticks are about n values to mark, ascending.
	Ticks(n int) []float64
}

// Linear maps Lo..Hi to P0..P1.
type Linear struct{ Lo, Hi, P0, P1 float64 }

// At implements Scale.
func (s Linear) At(v float64) float64 {
	if s.Hi == s.Lo {
		return (s.P0 + s.P1) / 2
	}
	return s.P0 + (v-s.Lo)/(s.Hi-s.Lo)*(s.P1-s.P0)
}

// Ticks implements Scale: multiples of 1, 2 or 5 times a power of ten.
func (s Linear) Ticks(n int) []float64 { return niceTicks(s.Lo, s.Hi, n) }

// niceTicks are about n round values in lo..hi.
func niceTicks(lo, hi float64, n int) []float64 {
	if !(hi > lo) || n < 1 || math.IsInf(hi-lo, 0) {
		return []float64{lo}
	}
	step := niceStep((hi - lo) / float64(n))
	var out []float64
	for i := math.Ceil(lo/step - 1e-9); i*step <= hi+step*1e-9; i++ {
		out = append(out, i*step+0) // +0: no tick of minus zero
	}
	return out
}

// niceStep is the least of 1, 2, 5 times a power of ten that is at least v.
func niceStep(v float64) float64 {
	p := math.Pow(10, math.Floor(math.Log10(v)))
	for _, m := range []float64{1, 2, 5} {
		if v <= m*p*(1+1e-9) {
			return m * p
		}
	}
	return 10 * p
}

// Log maps Lo..Hi, both positive, to P0..P1 logarithmically.
type Log struct{ Lo, Hi, P0, P1 float64 }

// At implements Scale; values that are not positive have no place.
func (s Log) At(v float64) float64 {
	if !(v > 0) {
		return math.NaN()
	}
	return Linear{math.Log10(s.Lo), math.Log10(s.Hi), s.P0, s.P1}.At(math.Log10(v))
}

// Ticks implements Scale: powers of ten, with 3, with 2 and 5, or with more
// digits between them while there is room; evenly spaced round values where
// little more than one of those shows.
func (s Log) Ticks(n int) []float64 {
	if !(s.Lo > 0) || !(s.Hi > s.Lo) {
		return []float64{s.Lo}
	}
	var best []float64
	for _, digits := range [][]float64{{1}, {1, 3}, {1, 2, 5}, {1, 1.5, 2, 3, 5, 7}} {
		t := s.digitTicks(digits)
		if len(t) > n && len(best) > 0 {
			break
		}
		best = t
	}
	if len(best) < 3 {
		best = niceTicks(s.Lo, s.Hi, max(n-1, 2))
	}
	return thin(best, n)
}

// digitTicks are the digits times powers of ten in range; they are read from
// decimals, so that they print as such.
func (s Log) digitTicks(digits []float64) []float64 {
	var out []float64
	first, last := int(math.Floor(math.Log10(s.Lo))), int(math.Ceil(math.Log10(s.Hi)))
	for e := first; e <= last; e++ {
		for _, d := range digits {
			v, _ := strconv.ParseFloat(strconv.FormatFloat(d, 'f', -1, 64)+"e"+strconv.Itoa(e), 64)
			if v >= s.Lo*(1-1e-12) && v <= s.Hi*(1+1e-12) {
				out = append(out, v)
			}
		}
	}
	return out
}

// thin leaves every k-th tick, so that at most n+1 remain.
func thin(t []float64, n int) []float64 {
	if len(t) <= n+1 || n < 1 {
		return t
	}
	k := (len(t) + n) / (n + 1)
	var out []float64
	for i := 0; i < len(t); i += k {
		out = append(out, t[i])
	}
	return out
}

// SymLog is linear within +-Linear and logarithmic outside, where Decade is the
// length of a power of ten in lengths of the linear half: far values stay on the
// same rail without pressing the near ones together.
type SymLog struct{ Lo, Hi, Linear, Decade, P0, P1 float64 }

// fold is a value on the rail in lengths of the linear half.
func (s SymLog) fold(v float64) float64 {
	a := math.Abs(v) / s.Linear
	if a > 1 {
		a = 1 + s.Decade*math.Log10(a)
	}
	return math.Copysign(a, v)
}

// At implements Scale.
func (s SymLog) At(v float64) float64 {
	return Linear{s.fold(s.Lo), s.fold(s.Hi), s.P0, s.P1}.At(s.fold(v))
}

// Ticks implements Scale: round values in the linear part, 1 and 3 times powers
// of ten outside.
func (s SymLog) Ticks(n int) []float64 {
	inner := niceTicks(math.Max(s.Lo, -s.Linear), math.Min(s.Hi, s.Linear), max(n/2, 2))
	outer := func(hi float64) []float64 {
		if hi <= s.Linear {
			return nil
		}
		t := Log{s.Linear * 1.3, hi, 0, 1}
		d := t.digitTicks([]float64{1, 3})
		if len(d) > n {
			d = t.digitTicks([]float64{1})
		}
		return d
	}
	var out []float64
	neg := outer(-s.Lo)
	for i := len(neg) - 1; i >= 0; i-- {
		out = append(out, -neg[i])
	}
	out = append(out, inner...)
	return append(out, outer(s.Hi)...)
}

// TickLabels spells ticks with as many decimals as tell them apart; a minus
// sign is a real one.
func TickLabels(ticks []float64) []string {
	out := make([]string, len(ticks))
	for i, v := range ticks {
		out[i] = TickLabel(v)
	}
	return out
}

// TickLabel spells one tick: up to six significant digits, powers of ten beyond
// 10^6 and below 10^-4.
func TickLabel(v float64) string {
	s := strconv.FormatFloat(v, 'g', 6, 64)
	a := math.Abs(v)
	if a != 0 && (a >= 1e6 || a < 1e-4) {
		s = strconv.FormatFloat(v, 'e', -1, 64)
		s = strings.Replace(strings.Replace(s, "e+0", "e", 1), "e-0", "e-", 1)
		s = strings.Replace(s, "e+", "e", 1)
	}
	return strings.ReplaceAll(s, "-", "−")
}
