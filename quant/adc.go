package quant

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
)

// maxADC bounds the bits of a converter's code.
const maxADC = 16

// ADC is what an analogue-to-digital converter of so many bits reads over a range: code
// k of 0 to 2^bits - 1 stands for the binary32 number nearest to from + k/2^bits (to -
// from), computed in binary64 with one rounding for the difference and a fused
// multiply-add, from and to being binary32 numbers. The step is the range over 2^bits,
// so that the last code lies one step below to and, in a symmetric range, code
// 2^(bits-1) is zero (W. Kester: Data conversion handbook, 2005, chapter 2, from
// memory). Everything beyond saturates, as a Table's values do. A value type,
// comparable with ==.
type ADC struct {
	Table
	name string
}

// adcName is the name of a converter: ADC12(from=-40,to=85).
var adcName = regexp.MustCompile(`(?i)^adc([0-9]+)$`)

// NewADC returns the format of a converter of bits over a range.
func NewADC(bits int, from, to float64) (ADC, error) {
	lo, hi := float64(float32(from)), float64(float32(to))
	name := fmt.Sprintf("ADC%d(from=%s,to=%s)", bits, decimal32(lo), decimal32(hi))
	switch {
	case bits < 1 || bits > maxADC:
		return ADC{}, fmt.Errorf("quant: %s: %d bits: a converter has 1 to %d", name, bits, maxADC)
	case !(hi-lo > 0) || hi-lo > math.MaxFloat32:
		return ADC{}, fmt.Errorf("quant: %s: from is not below to, or one is not finite in binary32; write the lower end first", name)
	}
	width, codes := hi-lo, 1<<bits
	values := make([]float64, codes)
	for k := range values {
		values[k] = float64(float32(math.FMA(float64(k)/float64(codes), width, lo)))
	}
	t, err := NewTable("", values, Saturate)
	if err != nil {
		return ADC{}, fmt.Errorf("quant: %s: its steps are too narrow for binary32 numbers of that size; use fewer bits or a wider range", name)
	}
	return ADC{t, name}, nil
}

// String is the format's name, which ParseFormat reads back.
func (a ADC) String() string { return a.name }

// decimal32 is the shortest decimal that a binary32 number is nearest to.
func decimal32(x float64) string { return strconv.FormatFloat(x, 'g', -1, 32) }

// parseADC reads "ADC12(from=-40,to=85)".
func parseADC(word string) (Format, bool, error) {
	head, o, err := nameAndOptions(word)
	match := adcName.FindStringSubmatch(head)
	if match == nil {
		return nil, false, nil
	}
	bits, _ := strconv.Atoi(match[1])
	var ends [2]float64
	for i, key := range []string{"from", "to"} {
		text, given := o.take(key)
		if !given && err == nil {
			err = fmt.Errorf("%s is missing: write %s(from=-1,to=1)", key, head)
		}
		if err == nil {
			if ends[i], err = strconv.ParseFloat(text, 64); err != nil {
				err = fmt.Errorf("%s: %q is not a number", key, text)
			}
		}
	}
	if err == nil {
		err = o.rest("a converter has from and to")
	}
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	a, err := NewADC(bits, ends[0], ends[1])
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return a, true, nil
}
