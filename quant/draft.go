package quant

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
)

// Draft is a signed small format of the IEEE P3109 draft (interim report 4.0 of
// 2026-06-26), which is not approved and may change: hence the name. A value type,
// comparable with ==.
//
// BinaryKpP has K bits and precision P: K - P exponent bits, P - 1 fraction bits and
// the bias 2^(K-P-1). Magnitudes are numbered as in Float, subnormals included. The
// last one, code 2^(K-1) - 1, is infinity; code 2^(K-1), that of -0 elsewhere, is the
// one NaN; there is one zero. The largest value of Binary8p4 is 224, of Binary8p3
// 49152. Overflow goes to infinity by default.
type Draft struct {
	grid     Float // its magnitudes, without its specials
	width    int
	last     uint64 // number of the largest finite magnitude
	infinity uint64 // code of +infinity
	overflow Overflow
}

// NewDraft returns the format of K = 3 to 8 bits and precision P = 1 to K - 1.
func NewDraft(width, precision int, overflow Overflow) (Draft, error) {
	if width < 3 || width > 8 || precision < 1 || precision >= width {
		return Draft{}, fmt.Errorf("quant: binary%dp%d: the draft's formats here have 3 to 8 bits and a precision of 1 to one less", width, precision)
	}
	if overflow == FormatDefault {
		overflow = ToInfinity
	}
	if err := checkOverflow(overflow, true, false); err != nil {
		return Draft{}, fmt.Errorf("quant: binary%dp%d: %w", width, precision, err)
	}
	bias := 1 << (width - precision - 1)
	grid, err := FloatSpec{Exponent: width - precision, Fraction: precision - 1, Bias: &bias, Top: TopFinite}.layout()
	if err != nil {
		return Draft{}, err
	}
	infinity := uint64(1)<<(width-1) - 1
	return Draft{grid: grid, width: width, last: infinity - 1, infinity: infinity, overflow: overflow}, nil
}

// String returns the canonical name: "binary8p4-draft".
func (d Draft) String() string {
	name := fmt.Sprintf("binary%dp%d-draft", d.width, d.grid.fraction+1)
	if d.overflow != ToInfinity {
		name += "(overflow=" + d.overflow.String() + ")"
	}
	return name
}

// Limits states the format's figures.
func (d Draft) Limits() Limits {
	l := d.grid.Limits()
	l.Max = d.grid.value(d.last)
	l.Lowest = -l.Max
	l.HasInfinity, l.HasNaN, l.OneZero, l.DefaultOverflow = true, true, true, d.overflow
	return l
}

// Bracket implements Format.
func (d Draft) Bracket(x Real) Bracket { return d.grid.Bracket(x) }

// Encode returns the code of a value; that of NaN is 2^(K-1).
func (d Draft) Encode(x float64) (uint64, bool) {
	sign := uint64(1) << (d.width - 1)
	switch {
	case x != x:
		return sign, true
	case x == 0:
		return 0, true
	}
	n, exact := d.infinity, true
	if !math.IsInf(x, 0) {
		n, exact = d.grid.number(math.Abs(x))
		exact = exact && n <= d.last
	}
	if x < 0 {
		n |= sign
	}
	return n, exact
}

// Decode returns the value of a code.
func (d Draft) Decode(code uint64) float64 {
	sign := uint64(1) << (d.width - 1)
	code &= 2*sign - 1
	if code == sign {
		return nan64
	}
	x := d.grid.value(code &^ sign)
	if code&^sign == d.infinity {
		x = math.Inf(1)
	}
	if code >= sign {
		x = -x
	}
	return x
}

var draftName = regexp.MustCompile(`^(?i)binary(\d)p(\d)(se)?(-draft)?$`)

// parseDraft reads "binary8p4-draft", and "binary8p4" and the draft's own
// "Binary8p4se" (signed, with infinities).
func parseDraft(word string) (Format, bool, error) {
	head, o, err := nameAndOptions(word)
	m := draftName.FindStringSubmatch(head)
	if m == nil {
		return nil, false, nil
	}
	var overflow Overflow
	if err == nil {
		overflow, err = o.overflow()
	}
	if err == nil {
		err = o.rest("the draft's formats have overflow")
	}
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	width, _ := strconv.Atoi(m[1])
	precision, _ := strconv.Atoi(m[2])
	d, err := NewDraft(width, precision, overflow)
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return d, true, nil
}
