package quant

import (
	"fmt"
	"math"
	"math/bits"
	"regexp"
	"strconv"
	"strings"
)

// The bounds of tables: codes have at most 16 bits, and neighbouring magnitudes are
// near enough for exact decisions on quotients of 128 bits (see gapFraction).
const (
	maxTable      = 1 << 16
	maxTableRatio = 0x1p40
)

// Table is a user's own list of values, a code book: code n is value number n in
// ascending order. A value type, comparable with ==.
//
// To even means an even code. Where zero is no value, it is rounded like any number:
// in the gap around it toward zero means to the nearest. Beyond the first and the
// last value everything is overflow, which saturates or becomes NaN where asked for.
// There is no infinity and no code for NaN.
type Table struct {
	name   string
	values string // eight bytes each, ascending
	limits Limits
}

var tableName = regexp.MustCompile(`^[\pL_][\pL\pN_.-]*$`)

// NewTable returns the format of these values, finite, at least two, strictly
// ascending. name is a plan's word for it, which reports show, or empty. overflow is
// FormatDefault or Saturate, or ToNaN.
func NewTable(name string, values []float64, overflow Overflow) (Table, error) {
	if overflow == FormatDefault {
		overflow = Saturate
	}
	switch {
	case name != "" && !tableName.MatchString(name):
		return Table{}, fmt.Errorf("quant: table %q: a name is a letter and then letters, digits, dots, dashes", name)
	case overflow != Saturate && overflow != ToNaN:
		return Table{}, fmt.Errorf("quant: table %s: overflow %s: a table saturates or gives nan", name, overflow)
	case len(values) < 2 || len(values) > maxTable:
		return Table{}, fmt.Errorf("quant: table %s: %d values: a table has 2 to %d", name, len(values), maxTable)
	}
	packed := make([]byte, 0, 8*len(values))
	for i, v := range values {
		if err := follows(values, i); err != nil {
			return Table{}, fmt.Errorf("quant: table %s: value %d, %v: %w", name, i+1, v, err)
		}
		b := math.Float64bits(v + 0) // -0 is 0
		for shift := 0; shift < 64; shift += 8 {
			packed = append(packed, byte(b>>shift))
		}
	}
	t := Table{name: name, values: string(packed)}
	t.limits = t.figures(overflow)
	return t, nil
}

// follows checks value i against the one before it.
func follows(values []float64, i int) error {
	v := values[i]
	if v-v != 0 {
		return fmt.Errorf("values must be finite")
	}
	if i == 0 {
		return nil
	}
	before := values[i-1]
	lo, hi := min(math.Abs(before), math.Abs(v)), max(math.Abs(before), math.Abs(v))
	switch {
	case !(before < v):
		return fmt.Errorf("values must ascend, none twice")
	case lo > 0 && (before < 0) == (v < 0) && hi/maxTableRatio > lo:
		return fmt.Errorf("more than 2^40 times the size of its neighbour of the same sign")
	}
	return nil
}

// at is value number i.
func (t Table) at(i int) float64 {
	s := t.values[8*i:][:8]
	return math.Float64frombits(uint64(s[0]) | uint64(s[1])<<8 | uint64(s[2])<<16 | uint64(s[3])<<24 |
		uint64(s[4])<<32 | uint64(s[5])<<40 | uint64(s[6])<<48 | uint64(s[7])<<56)
}

// Len is the number of values.
func (t Table) Len() int { return len(t.values) / 8 }

// Name is the plan's word for the table, empty where it has none.
func (t Table) Name() string { return t.name }

// String writes the whole table, "table(-1,0,1)" or "table(name=steps,-1,0,1)", so
// that what is resolved to it depends on its values and ParseFormat reads it back.
func (t Table) String() string {
	var s strings.Builder
	s.WriteString("table(")
	if t.name != "" {
		s.WriteString("name=" + t.name + ",")
	}
	if t.limits.DefaultOverflow != Saturate {
		s.WriteString("overflow=" + t.limits.DefaultOverflow.String() + ",")
	}
	for i := range t.Len() {
		if i > 0 {
			s.WriteByte(',')
		}
		s.WriteString(strconv.FormatFloat(t.at(i), 'g', -1, 64))
	}
	s.WriteByte(')')
	return s.String()
}

// Limits states the format's figures; the least values are those above zero, or zero
// where there are none.
func (t Table) Limits() Limits { return t.limits }

// figures works the limits out.
func (t Table) figures(overflow Overflow) Limits {
	n := t.Len()
	l := Limits{
		Bits: bits.Len(uint(n - 1)), Max: t.at(n - 1), Lowest: t.at(0),
		DefaultOverflow: overflow, OneZero: true, NoZero: true, Binary32: true,
	}
	for i := range n {
		v := t.at(i)
		l.NoZero = l.NoZero && v != 0
		l.Binary32 = l.Binary32 && float64(float32(v)) == v
		if v > 0 && l.MinNormal == 0 {
			l.MinNormal, l.MinSubnormal = v, v
		}
	}
	return l
}

// below returns the number of values below the real x, or at most x where equal is
// true.
func (t Table) below(x Real, equal bool) int {
	lo, hi := 0, t.Len()
	for lo < hi {
		mid := (lo + hi) / 2
		c := Exactly(t.at(mid)).Compare(x)
		if c < 0 || c == 0 && equal {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return lo
}

// Bracket implements Format. The neighbours are those of x itself; the one nearer
// to zero, or beyond it, is called Toward.
func (t Table) Bracket(x Real) Bracket {
	first := t.below(x, !x.Neg) // the first value away from zero, if x is above it
	n := t.Len()
	outside := Bracket{Toward: math.MaxFloat64, Away: math.Inf(1), Exact: true}
	if x.Neg {
		toward, away := first, first-1
		switch {
		case toward == n: // below zero, but above all values
			outside.Toward = -math.MaxFloat64
			return outside
		case Exactly(t.at(toward)).Compare(x) == 0:
			return Bracket{Toward: -t.at(toward), Away: -t.at(toward), Exact: true, Odd: toward&1 != 0}
		case away < 0:
			return outside
		}
		return between(x, -t.at(toward), -t.at(away), toward&1 != 0)
	}
	toward, away := first-1, first
	switch {
	case toward < 0: // not below zero, but below all values
		outside.Toward = -math.MaxFloat64
		return outside
	case Exactly(t.at(toward)).Compare(x) == 0:
		return Bracket{Toward: t.at(toward), Away: t.at(toward), Exact: true, Odd: toward&1 != 0}
	case away == n:
		return outside
	}
	return between(x, t.at(toward), t.at(away), toward&1 != 0)
}

// Encode returns the number of a value.
func (t Table) Encode(x float64) (uint64, bool) {
	if x-x != 0 {
		return 0, false
	}
	n := t.below(Exactly(x), false)
	return uint64(n), n < t.Len() && t.at(n) == x
}

// Decode returns the value of a code; codes without a value are NaN.
func (t Table) Decode(code uint64) float64 {
	code &= 1<<t.Limits().Bits - 1
	if code >= uint64(t.Len()) {
		return nan64
	}
	return t.at(int(code))
}

// parseTable reads "table(-1,0,1)", with name= and overflow= before or behind.
func parseTable(word string) (Format, bool, error) {
	head, o, err := nameAndOptions(word)
	if !strings.EqualFold(head, "table") {
		return nil, false, nil
	}
	var overflow Overflow
	if err == nil {
		overflow, err = o.overflow()
	}
	name, _ := o.take("name")
	var values []float64
	for err == nil {
		text, more := o.take("")
		if !more {
			err = o.rest("a table has name, overflow and its values")
			break
		}
		var v float64
		if v, err = strconv.ParseFloat(text, 64); err != nil {
			err = fmt.Errorf("%q is not a number", text)
		}
		values = append(values, v)
	}
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	t, err := NewTable(name, values, overflow)
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return t, true, nil
}
