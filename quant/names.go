package quant

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
)

// topWords name the layouts of the top exponent in written-out formats.
var topWords = [...]string{TopIEEE: "ieee", TopNaNOnly: "nan", TopFinite: "finite"}

// knownFloats are the formats that a standard names; name is the canonical one,
// also the short word of the trade.
//
// Sources: binary16, binary32, binary64: IEEE 754-2019, table 3.5. bfloat16: the
// upper half of binary32. E4M3 and E5M2: OCP 8-bit Floating Point Specification
// (OFP8) 1.0, tables 1 and 2. E3M2, E2M3 and E2M1: OCP Microscaling Formats (MX)
// 1.0, section 5.3. The OCP types saturate, as the ONNX standard's cast does.
var knownFloats = []struct {
	name, also string
	spec       FloatSpec
}{
	{"binary16", "fp16", FloatSpec{Exponent: 5, Fraction: 10}},
	{"bfloat16", "bf16", FloatSpec{Exponent: 8, Fraction: 7}},
	{"binary32", "fp32", FloatSpec{Exponent: 8, Fraction: 23}},
	{"binary64", "fp64", FloatSpec{Exponent: 11, Fraction: 52}},
	{"E4M3", "", FloatSpec{Exponent: 4, Fraction: 3, Top: TopNaNOnly, Overflow: Saturate}},
	{"E5M2", "", FloatSpec{Exponent: 5, Fraction: 2, Overflow: Saturate}},
	{"E3M2", "", FloatSpec{Exponent: 3, Fraction: 2, Top: TopFinite}},
	{"E2M3", "", FloatSpec{Exponent: 2, Fraction: 3, Top: TopFinite}},
	{"E2M1", "", FloatSpec{Exponent: 2, Fraction: 1, Top: TopFinite}},
}

// The formats that the package itself needs.
var (
	Binary16 = named("binary16")
	BFloat16 = named("bfloat16")
	Binary32 = named("binary32")
	Binary64 = named("binary64")
)

func named(name string) Float {
	for _, k := range knownFloats {
		if k.name == name {
			f := mustLayout(k.spec)
			f.name = name
			return f
		}
	}
	panic("quant: no format is called " + name)
}

// mustLayout lays a format of the table out.
func mustLayout(s FloatSpec) Float {
	f, err := s.layout()
	if err != nil {
		panic(err)
	}
	return f
}

// family is one family of formats as ParseFormat sees it.
type family struct {
	// parse reads a name of the family: ok is false when the name is not one of
	// its names at all, err tells what is wrong with a name that is.
	parse func(name string) (f Format, ok bool, err error)
	// examples are names that an error message may suggest.
	examples []string
}

// families is the table of families: a new family adds one line.
var families []family

// It is filled at start because the elements of blocks have names themselves.
func init() {
	families = []family{
		{parsePowerScale, []string{"E8M0"}},
		{parseDraft, []string{"binary8p3-draft", "binary8p4-draft"}},
		{parseFixed, []string{"Q2.14", "UQ0.8"}},
		{parsePosit, []string{"posit8", "posit16", "posit32"}},
		{parseLogarithmic, []string{"LNS4.3", "LNS5.10"}},
		{parseTable, nil},
		{parseADC, []string{"ADC12(from=-1,to=1)"}},
		{parseInteger, []string{"INT8", "UINT8", "INT4"}},
		{parseBlock, []string{"MXFP8", "MXFP6", "MXFP4", "MXINT8"}},
		{parseFloat, floatNames()},
	}
}

// FormatNames lists the names that ParseFormat knows besides the open families.
func FormatNames() []string {
	var all []string
	for _, f := range families {
		all = append(all, f.examples...)
	}
	return all
}

// ParseFormat returns the format a plan's word names: binary16 or fp16, bfloat16
// or bf16, binary32 or fp32, binary64 or fp64, E4M3 (OCP, largest value 448),
// E5M2 (OCP), E3M2, E2M3, E2M1 (MX elements), or EeMm in the layout of IEEE 754
// for any other split of E exponent and M fraction bits. Options in parentheses
// override what the name stands for: E4M3(top=ieee), E6M9(bias=15),
// E5M10(subnormals=flush). Case does not matter. The error for an unknown name
// lists the nearest known ones.
//
// The other scalar families: E8M0, the scale of MX (a signed float of that split is
// written E8M0(top=ieee)); Q2.14 and UQ0.8, fixed point, with overflow=wrap or nan;
// posit8 and other widths; LNS5.10, logarithmic; binary8p4-draft; table(-1,0,1);
// ADC12(from=-40,to=85), the codes of a converter.
//
// Formats with shared scales, for operands only: INT8(scale=99.9%,zero=fit,per=channel);
// MXFP8(E4M3), MXFP6(E2M3), MXFP4(block=16,rule=up), MXINT8, and
// block(E2M1,block=16,scale=E4M3,rule=nearest,tensor=binary32) for any other.
func ParseFormat(name string) (Format, error) {
	word := strings.TrimSpace(name)
	for _, fam := range families {
		f, ok, err := fam.parse(word)
		if err != nil {
			return nil, err
		}
		if ok {
			return f, nil
		}
	}
	return nil, fmt.Errorf("unknown format %q: nearest known: %s (or EeMm for another split of exponent and fraction bits, Qi.f, positN, LNSi.f, table(VALUE,...))",
		name, strings.Join(nearest(word, FormatNames(), 3), ", "))
}

func floatNames() []string {
	var names []string
	for _, k := range knownFloats {
		names = append(names, k.name)
		if k.also != "" {
			names = append(names, k.also)
		}
	}
	return names
}

// parseFloat reads the names of the family Float.
func parseFloat(word string) (Format, bool, error) {
	base, options, hasOptions := strings.Cut(word, "(")
	spec, ok := baseSpec(strings.TrimSpace(base))
	if !ok {
		return nil, false, nil
	}
	if hasOptions {
		inside, closed := strings.CutSuffix(options, ")")
		if !closed {
			return nil, true, fmt.Errorf("format %q: the options lack their closing parenthesis", word)
		}
		if err := applyOptions(&spec, inside); err != nil {
			return nil, true, fmt.Errorf("format %q: %w", word, err)
		}
	}
	f, err := NewFloat(spec)
	if err != nil {
		return nil, true, fmt.Errorf("format %q: %w", word, err)
	}
	return f, true, nil
}

// baseSpec reads a name without options.
func baseSpec(word string) (FloatSpec, bool) {
	for _, k := range knownFloats {
		if strings.EqualFold(word, k.name) || k.also != "" && strings.EqualFold(word, k.also) {
			return k.spec, true
		}
	}
	e, m, ok := exponentFraction(word)
	if !ok {
		return FloatSpec{}, false
	}
	// A split that has a name is that format: E5M10 is binary16.
	for _, k := range knownFloats {
		if k.spec.Exponent == e && k.spec.Fraction == m {
			return k.spec, true
		}
	}
	return FloatSpec{Exponent: e, Fraction: m}, true
}

// exponentFraction reads "EeMm".
func exponentFraction(word string) (e, m int, ok bool) {
	upper := strings.ToUpper(word)
	digits, found := strings.CutPrefix(upper, "E")
	left, right, cut := strings.Cut(digits, "M")
	if !found || !cut {
		return 0, 0, false
	}
	e, errE := strconv.Atoi(left)
	m, errM := strconv.Atoi(right)
	return e, m, errE == nil && errM == nil && e >= 0 && m >= 0 && left[0] != '+' && right[0] != '+'
}

// applyOptions reads "bias=7,top=ieee,subnormals=flush,overflow=nan" in any order.
func applyOptions(s *FloatSpec, text string) error {
	seen := map[string]bool{}
	overflow := ""
	for part := range strings.SplitSeq(strings.ToLower(text), ",") {
		key, value, _ := strings.Cut(part, "=")
		key, value = strings.TrimSpace(key), strings.TrimSpace(value)
		if seen[key] {
			return fmt.Errorf("option %q is given twice", key)
		}
		seen[key] = true
		if key == "overflow" {
			overflow = value // applied last: a new top exponent resets it
			continue
		}
		if err := applyOption(s, key, value); err != nil {
			return err
		}
	}
	if overflow == "" {
		return nil
	}
	var err error
	s.Overflow, err = ParseOverflow(overflow)
	return err
}

func applyOption(s *FloatSpec, key, value string) error {
	switch key {
	case "bias":
		b, err := strconv.Atoi(value)
		if err != nil {
			return fmt.Errorf("bias %q is not an integer", value)
		}
		s.Bias = &b
	case "top":
		i := slices.Index(topWords[:], value)
		if i < 0 {
			return fmt.Errorf("top %q: one of %s", value, strings.Join(topWords[:], ", "))
		}
		if Top(i) != s.Top {
			s.Top, s.Overflow = Top(i), FormatDefault
		}
	case "subnormals":
		if value != "keep" && value != "flush" {
			return fmt.Errorf("subnormals %q: keep or flush", value)
		}
		s.Flush = value == "flush"
	default:
		return fmt.Errorf("unknown option %q: one of bias, top, subnormals, overflow", key)
	}
	return nil
}

// nearest returns the n candidates with the least edit distance to word, case
// aside, in their own order where the distance is equal.
func nearest(word string, candidates []string, n int) []string {
	word = strings.ToLower(word)
	sorted := slices.Clone(candidates)
	slices.SortStableFunc(sorted, func(a, b string) int {
		return editDistance(word, strings.ToLower(a)) - editDistance(word, strings.ToLower(b))
	})
	return sorted[:min(n, len(sorted))]
}

// editDistance counts the insertions, deletions and replacements of bytes that
// turn a into b (Levenshtein 1966).
func editDistance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			replace := diagonal
			if a[i] != b[j] {
				replace++
			}
			diagonal = row[j+1]
			row[j+1] = min(replace, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}
