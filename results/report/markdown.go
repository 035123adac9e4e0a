package report

import (
	"fmt"
	"io"
	"slices"
	"strings"

	"ulpine/results"
)

// MarkdownName is the file name of the Markdown report in a report's directory.
const MarkdownName = "report.md"

// markdownTable lists what the Markdown report says, in the page's order: a
// heading, and the blocks below it. A section without blocks is left out.
var markdownTable = []struct {
	heading string
	blocks  func(v *view) []block
}{
	{"Verdicts", func(v *view) []block {
		out := []block{tableBlock(v.verdictTable())}
		for _, t := range v.checks(slices.Concat(v.Comparisons, v.Contrasts)) {
			out = append(out, tableBlock(t))
		}
		return out
	}},
	{"The question and what was fixed beforehand", func(v *view) []block { return []block{factBlock(v.claimFacts())} }},
	{"How few bits, point by point", func(v *view) []block {
		d := v.recommendation()
		return append(paragraphs(d.Lead), tableBlock(d.Table))
	}},
	{"Where the arithmetic differs", func(v *view) []block { return v.figureBlocks("step-map") }},
	{"Score against bits, bytes and energy", func(v *view) []block {
		return append(v.figureBlocks("score-against-bits", "score-against-bytes", "score-against-energy"), tableBlock(v.frontTable()))
	}},
	{"Paired differences", func(v *view) []block {
		return append(v.figureBlocks("margin-rail"), tableBlock(v.pairTable(v.Comparisons)), tableBlock(v.itemTable()))
	}},
	{"Contrasts", func(v *view) []block {
		return append(v.figureBlocks("contrast-rail"), tableBlock(v.pairTable(v.Contrasts)))
	}},
	{"Grids", func(v *view) []block {
		out := v.figureBlocks("grids", "grid-bits")
		gs := v.grids()
		for i := range gs {
			out = append(out, tableBlock(v.gridTable(&gs[i])))
		}
		return out
	}},
	{"How each arm was tuned", func(v *view) []block {
		if v.Tuning == nil {
			return nil
		}
		chosen, tried := v.tuningTables()
		return append(paragraphs(v.tuningWords()), tableBlock(chosen), tableBlock(tried))
	}},
	{"Loss curves", func(v *view) []block {
		return append(v.figureBlocks("training-loss", "loss-by-arm"), tableBlock(v.curveTable()))
	}},
	{"Stochastic beside nearest rounding", func(v *view) []block {
		return append(v.figureBlocks("stochastic-beside-nearest"), tableBlock(v.twinTable()))
	}},
	{"What left the range of its format", func(v *view) []block {
		return append(v.figureBlocks("range-map", "range-by-epoch"), tableBlock(v.rangeTable()))
	}},
	{"What arithmetic kept", func(v *view) []block {
		return append(v.figureBlocks("kept-signal", "signal-map", "kept-sums", "kept-updates", "update-bias", "gradient-direction"), tableBlock(v.keptTable()))
	}},
	{"Exponents against the range of formats", func(v *view) []block {
		return append(v.figureBlocks("exponents"), tableBlock(v.histogramTable()))
	}},
	{"Recall by class", func(v *view) []block { return append(v.figureBlocks("recall"), tableBlock(v.classTable())) }},
	{"What it would cost", func(v *view) []block {
		if v.Costs == nil {
			return nil
		}
		out := []block{{text: plain(v.Costs.Answer)}}
		for _, t := range v.costTables() {
			out = append(out, tableBlock(t))
		}
		return append(out, listBlock(v.assumptions()), listBlock(v.costCautions()))
	}},
	{"Warnings", func(v *view) []block { return []block{listBlock(warningSection(v).(list).Items)} }},
	{"Limits", func(v *view) []block { return []block{listBlock(cautionSection(v).(list).Items)} }},
	{"Every run", func(v *view) []block {
		summary, t := v.runTable()
		return []block{{text: summary}, tableBlock(&t)}
	}},
	{"How to rerun", func(v *view) []block {
		if len(v.Rerun) == 0 {
			return nil
		}
		return []block{{code: strings.Join(rerunLines(v), "\n")}}
	}},
	{"Words", func(*view) []block { return []block{factBlock(glossaryFacts())} }},
}

// block is one piece of a section: whichever field is set.
type block struct {
	text   string
	code   string
	items  []string
	facts  []fact
	table  *tabular
	figure string // id
	title  string // of the figure
}

func tableBlock(t *tabular) block    { return block{table: t} }
func listBlock(items []string) block { return block{items: items} }
func factBlock(facts []fact) block   { return block{facts: facts} }
func paragraphs(words []string) (out []block) {
	for _, w := range words {
		out = append(out, block{text: w})
	}
	return out
}

// figureBlocks are the parts of figures that have something to show.
func (v *view) figureBlocks(ids ...string) (out []block) {
	for _, id := range ids {
		for _, f := range drawFigure(v, id, wide) {
			out = append(out, block{figure: f.ID, title: f.Title})
		}
	}
	return out
}

// glossaryFacts is the glossary as pairs.
func glossaryFacts() []fact {
	out := make([]fact, len(glossary))
	for i, e := range glossary {
		out[i] = fact{e.Word, e.Meaning}
	}
	return out
}

// Markdown writes the report as Markdown (CommonMark with tables); figures are
// those of the directory that Write makes.
func Markdown(w io.Writer, s *results.Study) error { return newView(s).markdown(w) }

func (v *view) markdown(w io.Writer) error {
	var b strings.Builder
	fmt.Fprintf(&b, "# %s\n\n", inline(v.heading()))
	for i, s := range v.sentences() {
		if i > 0 {
			b.WriteString(inline(s) + "\n\n")
			continue
		}
		b.WriteString("**" + inline(s) + "**\n\n")
		if facts := v.brief(); len(facts) > 0 {
			k := factBlock(facts)
			k.write(&b)
		}
	}
	for _, a := range v.alarms() {
		fmt.Fprintf(&b, "> **%s** %s\n\n", inline(a.Head), inline(a.Text))
	}
	for _, s := range markdownTable {
		var body strings.Builder
		for _, k := range s.blocks(v) {
			k.write(&body)
		}
		if body.Len() > 0 {
			fmt.Fprintf(&b, "## %s\n\n%s", s.heading, body.String())
		}
	}
	fmt.Fprintf(&b, "Written %s by code version %s; store digest %s.\n", day(v.Written), inline(plain(v.CodeVersion)), inline(plain(v.StoreDigest)))
	if _, err := io.WriteString(w, b.String()); err != nil {
		return fmt.Errorf("report: %s: %w", MarkdownName, err)
	}
	return nil
}

// write writes a block with a blank line after it.
func (k *block) write(b *strings.Builder) {
	switch {
	case k.text != "":
		b.WriteString(inline(k.text) + "\n\n")
	case k.code != "":
		for _, l := range strings.Split(k.code, "\n") {
			b.WriteString("    " + l + "\n")
		}
		b.WriteString("\n")
	case k.figure != "":
		fmt.Fprintf(b, "![%s](figures/%s.svg)\n\n", inline(k.title), k.figure)
	case k.table != nil:
		k.table.markdown(b)
	case len(k.items) > 0:
		for _, i := range k.items {
			b.WriteString("- " + inline(i) + "\n")
		}
		b.WriteString("\n")
	case len(k.facts) > 0:
		for _, f := range k.facts {
			fmt.Fprintf(b, "- **%s**: %s\n", inline(f.Head), inline(f.Text))
		}
		b.WriteString("\n")
	}
}

// markdown writes a table with its caption and notes.
func (t *tabular) markdown(b *strings.Builder) {
	if len(t.Rows) == 0 {
		return
	}
	fmt.Fprintf(b, "*%s*\n\n|", inline(t.Caption))
	for _, c := range t.Columns {
		b.WriteString(" " + inline(c.Name) + " |")
	}
	b.WriteString("\n|")
	for _, c := range t.Columns {
		if c.Number {
			b.WriteString("---:|")
		} else {
			b.WriteString("---|")
		}
	}
	for _, r := range t.Rows {
		b.WriteString("\n|")
		for _, c := range r {
			b.WriteString(" " + inline(c) + " |")
		}
	}
	b.WriteString("\n\n")
	for _, n := range t.Notes {
		b.WriteString(inline(n) + "\n\n")
	}
}

// inline writes words so that Markdown shows them as they are: names come from
// a plan and may hold anything.
func inline(s string) string {
	if s == missing {
		return s
	}
	var b strings.Builder
	for i, r := range plain(s) {
		switch {
		case strings.ContainsRune("\\`*_[]<>|~&$", r), i == 0 && strings.ContainsRune("#+-=", r):
			b.WriteByte('\\')
		}
		b.WriteRune(r)
	}
	return b.String()
}
