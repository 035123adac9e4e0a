package quant

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
)

// The words of the settings, by their constants.
var (
	modeWords     = []string{"nearest-even", "nearest-away", "toward-zero", "up", "down", "to-odd", "stochastic"}
	variantWords  = []string{"truncated", "centred", "centred-even", "equal"}
	overflowWords = []string{"default", "infinity", "saturate", "nan", "wrap"}
	orderWords    = []string{"sequential", "chunk", "wide", "pairwise", "lanes", "compensated", "aligned"}
)

// word returns entry i of a table of words.
func word(table []string, i uint8, what string) string {
	if int(i) < len(table) {
		return table[i]
	}
	return fmt.Sprintf("%s(%d)", what, i)
}

// lookup returns the index of a word, or an error that names the known ones.
func lookup(table []string, text, what string) (uint8, error) {
	i := slices.Index(table, strings.ToLower(strings.TrimSpace(text)))
	if i < 0 {
		return 0, fmt.Errorf("unknown %s %q: one of %s", what, text, strings.Join(table, ", "))
	}
	return uint8(i), nil
}

// String returns the mode's word: "nearest-even", ...
func (m Mode) String() string { return word(modeWords, uint8(m), "mode") }

// ParseMode reads a mode's word.
func ParseMode(text string) (Mode, error) {
	i, err := lookup(modeWords, text, "rounding")
	return Mode(i), err
}

// String returns the variant's word: "truncated", "centred", "centred-even", "equal".
func (v Variant) String() string { return word(variantWords, uint8(v), "variant") }

// ParseVariant reads a variant's word.
func ParseVariant(text string) (Variant, error) {
	i, err := lookup(variantWords, text, "variant of stochastic rounding")
	return Variant(i), err
}

// String returns the policy's word: "default", "infinity", "saturate", "nan", "wrap".
func (o Overflow) String() string { return word(overflowWords, uint8(o), "overflow") }

// ParseOverflow reads a policy's word.
func ParseOverflow(text string) (Overflow, error) {
	i, err := lookup(overflowWords, text, "overflow policy")
	return Overflow(i), err
}

// String returns "nearest-even", ..., "stochastic(16)", "stochastic(8, centred)" or,
// with a source of its own, "stochastic(8, centred, share=4, register=12)".
func (r Rounding) String() string {
	if r.Mode != Stochastic {
		return r.Mode.String()
	}
	parts := []string{strconv.Itoa(int(r.bits()))}
	if r.Variant != Truncated {
		parts = append(parts, r.Variant.String())
	}
	if r.Source.Share > 1 {
		parts = append(parts, fmt.Sprintf("share=%d", r.Source.Share))
	}
	if r.Source.Register != 0 {
		parts = append(parts, fmt.Sprintf("register=%d", r.Source.Register))
	}
	return fmt.Sprintf("stochastic(%s)", strings.Join(parts, ", "))
}

// ParseRounding reads what String writes, and "stochastic" for the default
// number of random bits.
func ParseRounding(text string) (Rounding, error) {
	head, arguments, has, err := call(text)
	if err != nil {
		return Rounding{}, fmt.Errorf("rounding %w", err)
	}
	mode, err := ParseMode(head)
	if err != nil {
		return Rounding{}, err
	}
	r := Rounding{Mode: mode}
	if mode != Stochastic {
		if has {
			return Rounding{}, fmt.Errorf("rounding %q: only stochastic takes random bits", text)
		}
		return r, nil
	}
	r.Bits = DefaultRandomBits
	if !has {
		return r, nil
	}
	parts := strings.Split(arguments, ",")
	count, err := strconv.Atoi(strings.TrimSpace(parts[0]))
	if err != nil || count < 1 || count > 32 {
		return Rounding{}, fmt.Errorf("rounding %q: random bits must be 1 to 32", text)
	}
	r.Bits = uint8(count)
	for _, part := range parts[1:] {
		if err := r.parsePart(part); err != nil {
			return Rounding{}, fmt.Errorf("rounding %q: %w", text, err)
		}
	}
	if err := r.Source.check(r.bits()); err != nil {
		return Rounding{}, fmt.Errorf("rounding %q: %w", text, err)
	}
	return r, nil
}

// parsePart reads a variant, "share=n" or "register=n".
func (r *Rounding) parsePart(part string) (err error) {
	key, value, has := strings.Cut(strings.ToLower(strings.TrimSpace(part)), "=")
	if !has {
		r.Variant, err = ParseVariant(key)
		return err
	}
	n, err := strconv.Atoi(value)
	switch {
	case key != "share" && key != "register":
		return fmt.Errorf("unknown option %q: a variant (%s), share=n or register=n", key, strings.Join(variantWords, ", "))
	case err != nil || n < 1 || n > math.MaxUint16:
		return fmt.Errorf("%s %q: want a whole number from 1 to %d", key, value, math.MaxUint16)
	case key == "share" && n > 1:
		r.Source.Share = uint16(n)
	case key == "register":
		r.Source.Register = uint8(min(n, math.MaxUint8))
	}
	return nil
}

// String returns "sequential", "chunk(64)", "wide", "pairwise", "lanes(8)",
// "compensated" or "aligned(4, 24)".
func (o Order) String() string {
	w := word(orderWords, uint8(o.Kind), "order")
	switch o.Kind {
	case Chunk, Lanes:
		return fmt.Sprintf("%s(%d)", w, o.K)
	case Aligned:
		return fmt.Sprintf("%s(%d, %d)", w, o.K, o.W)
	}
	return w
}

// ParseOrder reads what String writes.
func ParseOrder(text string) (Order, error) {
	head, arguments, has, err := call(text)
	if err != nil {
		return Order{}, fmt.Errorf("order %w", err)
	}
	kind, err := lookup(orderWords, head, "summation order")
	if err != nil {
		return Order{}, err
	}
	o := Order{Kind: OrderKind(kind)}
	if !has {
		return o, o.check(false)
	}
	first, second, two := strings.Cut(arguments, ",")
	if o.K, err = strconv.Atoi(strings.TrimSpace(first)); err != nil {
		return Order{}, fmt.Errorf("order %q: %q is not a whole number", text, first)
	}
	if two != (o.Kind == Aligned) {
		return Order{}, fmt.Errorf("order %q: only aligned takes two numbers, the terms of a group and their bits, as in aligned(4, 24)", text)
	}
	if two {
		if o.W, err = strconv.Atoi(strings.TrimSpace(second)); err != nil {
			return Order{}, fmt.Errorf("order %q: %q is not a whole number", text, second)
		}
	}
	return o, o.check(true)
}

// call splits "name(arguments)".
func call(text string) (head, arguments string, has bool, err error) {
	head, arguments, has = strings.Cut(strings.TrimSpace(text), "(")
	if !has {
		return head, "", false, nil
	}
	arguments, closed := strings.CutSuffix(arguments, ")")
	if !closed {
		return "", "", false, fmt.Errorf("%q: a closing parenthesis is missing", text)
	}
	return head, arguments, true, nil
}

// String returns format, rounding and overflow policy, the default one resolved:
// "binary16 nearest-even infinity". ParsePoint reads it.
func (p Point) String() string {
	return fmt.Sprintf("%s %s %s", p.Format, strings.ReplaceAll(p.Rounding.String(), ", ", ","), p.policy())
}

// ParsePoint reads a format, and optionally a rounding and an overflow policy,
// parted by spaces.
func ParsePoint(text string) (Point, error) {
	fields := strings.Fields(text)
	if len(fields) == 0 || len(fields) > 3 {
		return Point{}, fmt.Errorf("point %q: want a format, a rounding and an overflow policy", text)
	}
	var p Point
	var err error
	if p.Format, err = ParseFormat(fields[0]); err != nil {
		return Point{}, err
	}
	if len(fields) > 1 {
		if p.Rounding, err = ParseRounding(fields[1]); err != nil {
			return Point{}, err
		}
	}
	if len(fields) > 2 {
		if p.Overflow, err = ParseOverflow(fields[2]); err != nil {
			return Point{}, err
		}
	}
	return p, p.Check()
}

// String spells the accumulation out, parts separated by semicolons:
// "product exact; sum binary16 nearest-even infinity; chunk(64); outer ...;
// through binary32". ParseAccumulate reads it.
func (a Accumulate) String() string {
	parts := []string{"product exact", "sum " + a.Sum.String(), a.Order.String()}
	if a.Product != nil {
		parts[0] = "product " + a.Product.String()
	}
	if a.Outer != nil {
		parts = append(parts, "outer "+a.Outer.String())
	}
	if a.Through32 {
		parts = append(parts, "through binary32")
	}
	return strings.Join(parts, "; ")
}

// ParseAccumulate reads what Accumulate.String writes, its parts in any order;
// an order that is not given is sequential, a product that is not given exact.
func ParseAccumulate(text string) (Accumulate, error) {
	var a Accumulate
	for part := range strings.SplitSeq(text, ";") {
		if err := a.parsePart(strings.TrimSpace(part)); err != nil {
			return Accumulate{}, fmt.Errorf("accumulation %q: %w", text, err)
		}
	}
	return a, a.Check()
}

func (a *Accumulate) parsePart(part string) error {
	key, rest, _ := strings.Cut(part, " ")
	var err error
	switch key {
	case "product":
		if rest != "exact" {
			a.Product = new(Point)
			*a.Product, err = ParsePoint(rest)
		}
	case "sum":
		a.Sum, err = ParsePoint(rest)
	case "outer":
		a.Outer = new(Point)
		*a.Outer, err = ParsePoint(rest)
	case "through":
		if a.Through32 = rest == "binary32"; !a.Through32 {
			err = fmt.Errorf("through %q: only binary32 is known", rest)
		}
	default:
		a.Order, err = ParseOrder(part)
	}
	return err
}
