package plan

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"ulpine/quant"
)

// class says what a setting may hold besides a format and a rounding.
type class uint8

const (
	stored  class = iota // a tensor is stored with it
	inside               // within a sum: products, outer sums
	sums                 // the sum itself: takes order, outer, through
	general              // everything: sums and stored points alike
)

// exactWord is what a product is set to when it is not rounded.
const exactWord = "exact"

// value is what a setting says.
type value struct {
	point quant.Point
	exact bool // a product that is not rounded

	states   []quant.Point // a point for each state tensor; nil: the one point for all
	channels []quant.Point // of the input; nil: the one point for all

	// Sums only.
	order   quant.Order
	through bool         // every addition first rounds to binary32
	outer   *quant.Point // nil: as the sum
	outerAt *node        // where outer is written
}

// pointKeys are what the table of any point may hold.
var pointKeys = []string{"format", "rounding", "random_bits", "variant", "share", "register", "overflow", "subnormals", "bias", "top", "width", "range", "bits"}

// sumKeys are what the table of a sum may hold besides.
var sumKeys = []string{"order", "outer", "through"}

// readValue reads a setting: a format's word or a table. ok is false when an
// error was recorded.
func (r *reader) readValue(n *node, c class, fs formats) (v value, ok bool) {
	before := len(r.errs)
	word, isWord := n.value.(string)
	switch {
	case isWord && word == exactWord:
		r.fail(n.errorf("write a format, or "+exactWord+" at a product point", "only a product can be exact"))
	case isWord:
		f, err := fs.find(n, word)
		if err != nil {
			r.fail(err)
		}
		v.point.Format = f
	case n.table != nil:
		v = r.readTable(n, c, fs)
	default:
		r.wrongType(n, "a format or a table", n.lastKey()+` = "bf16" or { format = "bf16", rounding = "stochastic" }`)
	}
	return v, len(r.errs) == before
}

// lastKey is the last name of the node's dotted key.
func (n *node) lastKey() string { return n.key[strings.LastIndexByte(n.key, '.')+1:] }

// readTable reads a setting written as a table.
func (r *reader) readTable(n *node, c class, fs formats) (v value) {
	keys := pointKeys
	if c == sums || c == general {
		keys = append(slices.Clone(pointKeys), sumKeys...)
	}
	for _, k := range sumKeys {
		if sub := n.table[k]; sub != nil && !slices.Contains(keys, k) {
			r.fail(sub.errorf("write it in accumulate or at a sum", "%s belongs to a sum, this is none", k))
			keys = append(slices.Clone(keys), k)
		}
	}
	if sub := n.table["product"]; sub != nil && (c == sums || c == general) {
		r.fail(sub.errorf(`write forward.product = "exact" and so on`, "a product is a point of its own and is not set here"))
		keys = append(slices.Clone(keys), "product")
	}
	r.known(n, keys...)
	v.point = r.readPoint(n, c, fs)
	if text := r.text(n, "order", ""); text != "" {
		order, err := quant.ParseOrder(text)
		if err != nil {
			r.fail(orderError(n.table["order"], text, err))
		}
		v.order = order
	}
	if at := n.table["through"]; at != nil {
		word := strings.ToLower(r.text(n, "through", ""))
		if v.through = word == "binary32" || word == "fp32"; !v.through && at.value != nil {
			r.fail(at.errorf(`write through = "binary32" or leave it out`, "%q is no adder that is modelled", word))
		}
	}
	if at := n.table["outer"]; at != nil {
		if outer, ok := r.readValue(at, inside, fs); ok {
			v.outer, v.outerAt = &outer.point, at
		}
	}
	if v.through && v.order.Kind == quant.Wide {
		r.fail(n.table["through"].errorf("leave through out", "a wide sum has one rounding and no adder to pass through"))
	}
	return v
}

// orderError tells what is wrong with an order.
func orderError(n *node, text string, err error) *PlanError {
	words := []string{"sequential", "pairwise", "wide", "compensated", "chunk(64)", "lanes(8)", "aligned(8,24)"}
	name, _, _ := strings.Cut(text, "(")
	names := []string{"sequential", "pairwise", "wide", "compensated", "chunk", "lanes", "aligned"}
	e := n.errorf("write one of "+strings.Join(words, ", "), "%v", err)
	if best, ok := nearest(name, names); ok && best != name {
		e.Reason, e.Remedy = fmt.Sprintf("unknown order %q", text), suggest(name, names)
	}
	e.Err = err
	return e
}

// readPoint reads the format, the rounding and the overflow policy of a table.
func (r *reader) readPoint(n *node, c class, fs formats) (p quant.Point) {
	before := len(r.errs)
	p.Format = r.readFormat(n, fs)
	p.Rounding = r.readRounding(n, c)
	p.Overflow = r.overflow(n)
	if len(r.errs) > before {
		return p
	}
	check := p.Check
	if SharesScales(p.Format) {
		check = p.CheckOperand // whether the point can have it is for applyTarget to say
	}
	if err := check(); err != nil {
		at := n
		if n.table["overflow"] != nil {
			at = n.table["overflow"]
		}
		r.fail(fault(at, err))
	}
	return p
}

// readFormat reads a table's format with its options, or returns nil.
func (r *reader) readFormat(n *node, fs formats) quant.Format {
	if n.table["range"] != nil {
		return r.readRange(n)
	}
	before := len(r.errs)
	word := r.text(n, "format", "")
	if at := n.table["bits"]; at != nil {
		r.fail(at.errorf("write range = [-40, 85], bits = 12, or a format", "bits without a range"))
	}
	if n.table["format"] == nil {
		r.fail(n.errorf(`write format = "bf16"; what a table leaves out is not taken from elsewhere`, "format is missing"))
	}
	options := r.formatOptions(n)
	if len(r.errs) > before {
		return nil
	}
	f, unknown := fs.find(n.table["format"], word)
	if unknown != nil {
		r.fail(unknown)
		return nil
	}
	if len(options) > 0 {
		changed, err := withOptions(f.String(), options)
		if err != nil {
			r.fail(fault(n, err))
			return nil
		}
		f = changed
	}
	return r.checkWidth(n, f)
}

// roundingWords and variantWords are quant's words, in its order.
var (
	roundingWords = []string{"nearest-even", "nearest-away", "toward-zero", "up", "down", "to-odd", "stochastic"}
	variantWords  = []string{"truncated", "centred", "centred-even", "equal"}
)

// readRounding reads rounding, random_bits and variant.
func (r *reader) readRounding(n *node, c class) (round quant.Rounding) {
	word := r.word(n, "rounding", roundingWords[0], roundingWords...)
	round.Mode, _ = quant.ParseMode(word)
	if round.Mode != quant.Stochastic {
		for _, k := range []string{"random_bits", "variant", "share", "register"} {
			if at := n.table[k]; at != nil {
				r.fail(at.errorf(`write rounding = "stochastic" or leave `+k+" out", "%s without stochastic rounding", k))
			}
		}
		return round
	}
	round.Bits = quant.DefaultRandomBits
	if at := n.table["random_bits"]; at != nil {
		bits := r.whole(n, "random_bits", quant.DefaultRandomBits, 1, 32)
		if c != stored && bits > 16 {
			r.fail(at.errorf("write 1 to 16, or set stored points by storage", "%d random bits: inside sums at most 16 are drawn", bits))
		}
		round.Bits = uint8(bits)
	}
	round.Source.Share = uint16(r.whole(n, "share", 0, 2, math.MaxUint16))
	round.Source.Register = uint8(r.whole(n, "register", 0, 4, 16))
	round.Variant, _ = quant.ParseVariant(r.word(n, "variant", variantWords[0], variantWords...))
	return round
}

// readStates reads a point for each state tensor, in the order of the optimizer's
// formula.
func (r *reader) readStates(n *node, fs formats) (v value, ok bool) {
	before := len(r.errs)
	for _, e := range n.list {
		one, _ := r.readValue(e, stored, fs)
		v.states = append(v.states, one.point)
	}
	if len(n.list) == 0 {
		r.fail(n.errorf(`write update.state = ["bf16", "fp32"] or one format for all`, "no format"))
		return v, false
	}
	v.point = v.states[0]
	return v, len(r.errs) == before
}

// spell writes a setting as a plan would, short: "bf16 stochastic r=16".
func (v value) spell() string {
	if v.states != nil {
		words := make([]string, len(v.states))
		for i, p := range v.states {
			words[i] = value{point: p}.spell()
		}
		return "[" + strings.Join(words, ", ") + "]"
	}
	if v.channels != nil {
		var words []string
		names, points := channelGroups(v.channels)
		for i, p := range points {
			words = append(words, "channel "+names[i]+" "+value{point: p}.spell())
		}
		return strings.Join(words, ", ")
	}
	if v.exact {
		return exactWord
	}
	words := []string{shortName(v.point.Format)}
	if v.point.Rounding.Mode != quant.NearestEven {
		words = append(words, describeRounding(v.point.Rounding))
	}
	if v.point.Overflow != quant.FormatDefault {
		words = append(words, "overflow "+v.point.Overflow.String())
	}
	if v.order.Kind != quant.Sequential {
		words = append(words, v.order.String())
	}
	if v.outer != nil {
		words = append(words, "outer "+value{point: *v.outer}.spell())
	}
	if v.through {
		words = append(words, "through binary32")
	}
	return strings.Join(words, " ")
}

// shortName is the trade's short word for a format where it has one.
func shortName(f quant.Format) string {
	short := strings.NewReplacer("bfloat16", "bf16", "binary16", "fp16", "binary32", "fp32", "binary64", "fp64")
	return short.Replace(f.String())
}

// describeRounding is "nearest-even" or "stochastic r=16 truncated".
func describeRounding(r quant.Rounding) string {
	if r.Mode != quant.Stochastic {
		return r.Mode.String()
	}
	text := "stochastic r=" + strconv.Itoa(int(r.Bits)) + " " + r.Variant.String()
	if r.Source.Share > 1 {
		text += fmt.Sprintf(" share=%d", r.Source.Share)
	}
	if r.Source.Register > 0 {
		text += fmt.Sprintf(" register=%d", r.Source.Register)
	}
	return text
}
