package plan

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"

	"ulpine/quant"
)

// formats are the number formats that words of one plan may name: those the
// package quant knows and the plan's own [format.NAME] tables.
type formats struct{ own map[string]quant.Format }

// splitKeys are the keys of a [format.NAME] table.
var splitKeys = []string{"exponent", "fraction", "bias", "subnormals", "top", "overflow", "width"}

// topWords are the layouts of the top exponent.
var topWords = map[string]quant.Top{
	"ieee": quant.TopIEEE, "nan-only": quant.TopNaNOnly, "nan": quant.TopNaNOnly, "finite": quant.TopFinite,
}

// topOptions are quant's option words for them.
var topOptions = map[quant.Top]string{quant.TopIEEE: "ieee", quant.TopNaNOnly: "nan", quant.TopFinite: "finite"}

// maxBias bounds a bias: beyond it no value would fit binary64.
const maxBias = 1200

// readFormats reads the [format.NAME] tables of a plan.
func (r *reader) readFormats(root *node) formats {
	fs := formats{own: map[string]quant.Format{}}
	all := r.table(root, "format", "[format.NAME] with exponent = 4 and fraction = 3")
	if all == nil {
		return fs
	}
	for _, name := range all.names() {
		n := all.table[name]
		switch _, err := quant.ParseFormat(name); {
		case n.table == nil:
			r.wrongType(n, "a table", "[format."+name+"] with exponent = 4 and fraction = 3")
		case err == nil:
			r.fail(n.errorf("choose another name", "%q names a known format already", name))
		case name != strings.TrimSpace(name) || name == "" || name == exactWord:
			r.fail(n.errorf("choose a name of letters and digits", "%q cannot name a format", name))
		default:
			f := r.readOwn(n, name)
			if f == nil {
				f = quant.Binary32 // a stand-in: who names it has made no mistake
			}
			fs.own[strings.ToLower(name)] = f
		}
	}
	return fs
}

// tableKeys are the keys of a [format.NAME] table that lists its values.
var tableKeys = []string{"values", "overflow", "width"}

// readOwn reads a format of the plan's own: a split written out, or a list of the
// values that there are.
func (r *reader) readOwn(n *node, name string) quant.Format {
	at := n.table["values"]
	if at == nil {
		return r.readSplit(n)
	}
	before := len(r.errs)
	r.known(n, tableKeys...)
	if at.list == nil {
		r.wrongType(at, "an array of numbers", "values = [-1, 0, 1]")
		return nil
	}
	values := make([]float64, len(at.list))
	for i, e := range at.list {
		values[i] = r.numberAt(e, "values", 0)
	}
	overflow := r.overflow(n)
	if len(r.errs) > before {
		return nil
	}
	f, err := quant.NewTable(name, values, overflow)
	if err != nil {
		e := fault(at, err)
		if e.Remedy == "" {
			e.Remedy = "write the values in ascending order, as values = [-1, 0, 1]"
		}
		r.fail(e)
		return nil
	}
	return r.checkWidth(n, f)
}

// readSplit reads a format written out, or returns nil. What the table leaves
// out is laid out as IEEE 754 does it, also where a standard's format of the same
// split (E4M3) is laid out otherwise: a table says all it means.
func (r *reader) readSplit(n *node) quant.Format {
	before := len(r.errs)
	r.known(n, splitKeys...)
	for _, k := range []string{"exponent", "fraction"} {
		if n.table[k] == nil {
			r.fail(n.lacks(k, "write "+k+" = 4", k+" is missing"))
		}
	}
	spec := quant.FloatSpec{
		Exponent: int(r.whole(n, "exponent", 4, 0, 11)),
		Fraction: int(r.whole(n, "fraction", 3, 0, 52)),
		Flush:    !r.flag(n, "subnormals", true),
		Top:      topWords[r.word(n, "top", "ieee", slices.Sorted(maps.Keys(topWords))...)],
		Overflow: r.overflow(n),
	}
	if n.table["bias"] != nil {
		bias := int(r.whole(n, "bias", 0, -maxBias, maxBias))
		spec.Bias = &bias
	}
	if len(r.errs) > before {
		return nil
	}
	f, err := quant.NewFloat(spec)
	if err != nil {
		r.fail(fault(n, err))
		return nil
	}
	return r.checkWidth(n, f)
}

// overflow reads an overflow policy; none written is the format's own.
func (r *reader) overflow(n *node) quant.Overflow {
	policies := map[string]quant.Overflow{"infinity": quant.ToInfinity, "saturate": quant.Saturate, "nan": quant.ToNaN, "wrap": quant.Wrap}
	return policies[r.word(n, "overflow", "", "infinity", "saturate", "nan", "wrap")]
}

// formatOptions reads what a table may say about a format besides its name, as
// quant's options.
func (r *reader) formatOptions(n *node) []string {
	var options []string
	if n.table["bias"] != nil {
		options = append(options, fmt.Sprintf("bias=%d", r.whole(n, "bias", 0, -maxBias, maxBias)))
	}
	if n.table["subnormals"] != nil {
		word := "keep"
		if !r.flag(n, "subnormals", true) {
			word = "flush"
		}
		options = append(options, "subnormals="+word)
	}
	if n.table["top"] != nil {
		word := r.word(n, "top", "ieee", slices.Sorted(maps.Keys(topWords))...)
		options = append(options, "top="+topOptions[topWords[word]])
	}
	return options
}

// checkWidth holds a format to the width that the table states, if it does.
func (r *reader) checkWidth(n *node, f quant.Format) quant.Format {
	at := n.table["width"]
	if at == nil {
		return f
	}
	before := len(r.errs)
	width := r.whole(n, "width", 0, 1, math.MaxInt32)
	if len(r.errs) > before {
		return nil
	}
	if l := f.Limits(); int64(l.Bits) != width {
		sum := fmt.Sprint(l.Bits)
		if l.Exponent > 0 || l.Fraction > 0 {
			sum = fmt.Sprintf("1 + %d + %d = %d", l.Exponent, l.Fraction, l.Bits)
		}
		r.fail(at.errorf(fmt.Sprintf("write width = %d or another format", l.Bits), "%s has %s bits, not %d", f, sum, width))
		return nil
	}
	return f
}

// find returns the format a word names.
func (fs formats) find(n *node, word string) (quant.Format, *PlanError) {
	base, _, _ := strings.Cut(word, "(")
	base = strings.TrimSpace(base)
	if f := fs.own[strings.ToLower(base)]; f != nil && !strings.Contains(word, "(") {
		return f, nil
	}
	f, err := quant.ParseFormat(word)
	if err == nil {
		return f, nil
	}
	if strings.HasPrefix(err.Error(), "unknown format") {
		known := append(quant.FormatNames(), slices.Sorted(maps.Keys(fs.own))...)
		remedy := suggest(word, known)
		if _, near := nearest(word, known); !near {
			remedy += ", or EeMm for another split (E6M9)"
		}
		return nil, n.errorf(remedy, "unknown format %q", word)
	}
	e := fault(n, err)
	if e.Remedy == "" {
		e.Remedy = "write another format, as bf16 or E5M10"
	}
	return nil, e
}

// withOptions lays options over those a format's name holds already and reads
// the result.
func withOptions(name string, options []string) (quant.Format, error) {
	base, inside, _ := strings.Cut(strings.TrimSuffix(name, ")"), "(")
	var all []string
	for old := range strings.SplitSeq(inside, ",") {
		key, _, _ := strings.Cut(old, "=")
		if old != "" && !slices.ContainsFunc(options, func(o string) bool { return strings.HasPrefix(o, key+"=") }) {
			all = append(all, old)
		}
	}
	all = append(all, options...)
	if len(all) == 0 {
		return quant.ParseFormat(base)
	}
	return quant.ParseFormat(base + "(" + strings.Join(all, ",") + ")")
}

// fault makes a PlanError of another package's error, whose message may hold the
// remedy behind a semicolon.
func fault(n *node, err error) *PlanError {
	reason, remedy, _ := strings.Cut(strings.TrimPrefix(err.Error(), "quant: "), "; ")
	reason = strings.ReplaceAll(reason, ": quant: ", ": ") // no package's name helps here
	e := n.errorf(remedy, "%s", reason)
	e.Err = err
	return e
}
