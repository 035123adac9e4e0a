package report

import (
	"fmt"
	"io"
	"math"
	"strings"

	"github.com/mattn/go-runewidth"

	"ulpine/results"
)

// Terminal colours: weight and one hue; the meaning is in marks and words.
const (
	bold  = "\x1b[1m"
	dim   = "\x1b[2m"
	reset = "\x1b[0m"
)

// leastWidth is the narrowest terminal the table is laid out for.
const leastWidth = 60

// Table writes the verdicts for a terminal of a width in characters: the answer
// sentence, what was fixed beforehand, one line an arm, and each interval on
// one margin rail drawn as text. With colour, weight sets off what matters; the
// words are the same without.
func Table(w io.Writer, s *results.Study, width int, color bool) error {
	t := &terminal{v: newView(s), width: max(width, leastWidth), color: color}
	t.answer()
	t.verdicts("", s.Comparisons)
	if len(s.Contrasts) > 0 {
		t.verdicts("Contrasts", s.Contrasts)
	}
	t.doubts()
	_, err := io.WriteString(w, t.b.String())
	return err
}

// terminal collects the lines of a table.
type terminal struct {
	v     *view
	b     strings.Builder
	width int
	color bool
}

// line ends a line; blanks at its end are left out, so that tables can be compared.
func (t *terminal) line(s string) { t.b.WriteString(strings.TrimRight(s, " ") + "\n") }

// paint sets off words when colour is wanted; blanks at their end stay outside.
func (t *terminal) paint(code, s string) string {
	words := strings.TrimRight(s, " ")
	if !t.color || words == "" {
		return s
	}
	return code + words + reset + s[len(words):]
}

// answer writes the sentence and what was fixed.
func (t *terminal) answer() {
	for _, l := range wrapText(t.v.answer(), t.width) {
		t.line(t.paint(bold, l))
	}
	for _, a := range t.v.alarms() {
		for _, l := range wrapText("! "+a.Head+" "+a.Text, t.width) {
			t.line(t.paint(bold, l))
		}
	}
	t.line("")
	m := t.v.words.scale(t.v.Margin)
	fixedWords := "no record of when the margin was fixed"
	if !t.v.MarginFixed.IsZero() {
		fixedWords = "margin " + t.v.fixedWords()
	}
	facts := fmt.Sprintf("%s, margin %s%s, %s intervals of paired differences; %s",
		plain(t.v.Metric), fixed(m, marginDigits(m)), t.v.words.unit(), percentage(t.v.Confidence), fixedWords)
	for _, fact := range append([]string{facts}, t.v.procedure()...) {
		for _, l := range wrapText(fact, t.width) {
			t.line(t.paint(dim, l))
		}
	}
}

// procedure says when pairs were looked at and how arms were tuned, where they were:
// a line of each, and one for each pair of values that was chosen.
func (v *view) procedure() (lines []string) {
	if v.Looks != "" {
		lines = append(lines, "looks "+plain(v.Looks))
	}
	if t := v.Tuning; t != nil {
		lines = append(lines, plain("tuning: "+v.Claim.Tuning))
		for _, l := range t.Chosen(v.name) {
			lines = append(lines, plain("- "+l))
		}
	}
	return lines
}

// row is one comparison in text.
type row struct {
	c                                 *results.Comparison
	mark, name, verdict, diff, interv string
	n, bits                           string
}

// rows spells comparisons.
func (t *terminal) rows(cs []results.Comparison) []row {
	out := make([]row, len(cs))
	for i := range cs {
		c := &cs[i]
		r := row{
			c: c, mark: verdictMark(c.Verdict.Kind), name: t.v.pairName(c), verdict: verdictWords(c.Verdict),
			diff: t.v.words.diff(c.Mean), interv: t.v.words.interval(c.Low, c.High), n: fmt.Sprint(c.N), bits: missing,
		}
		for _, a := range t.v.arms {
			if a.Slug == c.Arm {
				r.bits = bits(a.Bits)
			}
		}
		out[i] = r
	}
	return out
}

// verdicts writes the comparisons with their rail: a line each where the
// terminal is wide enough, else two.
func (t *terminal) verdicts(title string, cs []results.Comparison) {
	t.line("")
	if title != "" {
		t.line(t.paint(bold, title))
	}
	if len(cs) == 0 {
		t.line("No arm has been compared with the baseline.")
		return
	}
	rows := t.rows(cs)
	cols := []textColumn{
		{head: "verdict", cell: func(r row) string { return r.verdict }},
		{head: diffHead(t.v.words.unit()), right: true, cell: func(r row) string { return r.diff }},
		{head: "interval", right: true, cell: func(r row) string { return r.interv }},
		{head: "n", right: true, cell: func(r row) string { return r.n }},
		{head: "bits", right: true, cell: func(r row) string { return r.bits }},
	}
	used := 2 // characters: the mark and a blank
	for i := range cols {
		cols[i].measure(rows)
		used += cols[i].wide + 2
	}
	names := longestName(rows)
	if spare := t.width - used - names - 2; spare >= railLeast {
		tr := newTextRail(t.v, cs, min(spare, 60))
		t.beside(rows, cols, names, tr)
		t.legend(tr)
		t.examples(rows)
		return
	}
	used -= cols[0].wide + 2 // the verdict stands in the line above
	tr := newTextRail(t.v, cs, min(t.width-used-2, 60))
	t.stacked(rows, cols[1:], tr)
	t.legend(tr)
	t.examples(rows)
}

// examples writes the intervals over replicates and test examples both, where all
// replicates share their examples: there the table's intervals are about those alone.
func (t *terminal) examples(rows []row) {
	var words []string
	for _, r := range rows {
		if i := r.c.Items; i != nil && i.Crossed && !math.IsNaN(i.Low) {
			words = append(words, r.name+" "+t.v.words.interval(i.Low, i.High))
		}
	}
	if len(words) == 0 {
		return
	}
	for _, l := range wrapText("all replicates share their test examples; over other examples too (two-way bootstrap): "+strings.Join(words, "; "), t.width) {
		t.line(t.paint(dim, l))
	}
}

// diffHead heads the column of differences; a long unit is told above the table only.
func diffHead(unit string) string {
	if runewidth.StringWidth(unit) > 8 {
		unit = ""
	}
	return strings.TrimSpace("diff" + unit)
}

// railLeast is the shortest rail worth drawing, in characters.
const railLeast = 30

// longestName is the room that the arms' names need.
func longestName(rows []row) int {
	n := 3
	for _, r := range rows {
		n = max(n, runewidth.StringWidth(r.name))
	}
	return n
}

// legend explains the rail.
func (t *terminal) legend(tr *textRail) {
	for _, l := range wrapText(tr.legend(), t.width) {
		t.line(t.paint(dim, l))
	}
}

// textColumn is a column of the table.
type textColumn struct {
	head  string
	right bool
	cell  func(row) string
	wide  int
}

// measure makes the column as wide as its widest cell, in columns of the
// terminal: some characters take two, some none.
func (c *textColumn) measure(rows []row) {
	c.wide = runewidth.StringWidth(c.head)
	for _, r := range rows {
		c.wide = max(c.wide, runewidth.StringWidth(c.cell(r)))
	}
}

// pad fills s to the column's width.
func (c *textColumn) pad(s string) string {
	if c.right {
		return runewidth.FillLeft(s, c.wide)
	}
	return runewidth.FillRight(s, c.wide)
}

// beside writes one line an arm, the rail at its end.
func (t *terminal) beside(rows []row, cols []textColumn, names int, tr *textRail) {
	head := "  " + runewidth.FillRight("arm", names)
	for i := range cols {
		head += "  " + cols[i].pad(cols[i].head)
	}
	t.line(t.paint(dim, head+"  "+tr.head()))
	for _, r := range rows {
		l := r.mark + " " + t.paint(bold, cut(r.name, names))
		for i := range cols {
			l += "  " + cols[i].pad(cols[i].cell(r))
		}
		t.line(l + "  " + tr.draw(r.c))
	}
}

// stacked writes two lines an arm: its verdict, and under it numbers and rail.
func (t *terminal) stacked(rows []row, cols []textColumn, tr *textRail) {
	head := ""
	for i := range cols {
		head += "  " + cols[i].pad(cols[i].head)
	}
	t.line(t.paint(dim, head+"  "+tr.head()))
	for _, r := range rows {
		room := t.width - 4 - runewidth.StringWidth(r.verdict)
		t.line(r.mark + " " + t.paint(bold, strings.TrimRight(cut(r.name, room), " ")) + ": " + r.verdict)
		l := ""
		for i := range cols {
			l += "  " + cols[i].pad(cols[i].cell(r))
		}
		t.line(l + "  " + tr.draw(r.c))
	}
}

// doubts counts the warnings that travel with the result.
func (t *terminal) doubts() {
	n := len(t.v.Warnings)
	for _, c := range append(append([]results.Comparison(nil), t.v.Comparisons...), t.v.Contrasts...) {
		n += len(c.Warnings)
	}
	if n > 0 {
		t.line("")
		t.line(plural(n, "warning") + ":")
		for _, i := range warningSection(t.v).(list).Items {
			for k, l := range wrapText(i, t.width-2) {
				t.line("  "[:2*min(k, 1)] + strings.Repeat("- ", 1-min(k, 1)) + l)
			}
		}
	}
}

// cut shortens or fills s to n characters of the terminal.
func cut(s string, n int) string {
	return runewidth.FillRight(runewidth.Truncate(s, n, "…"), n)
}

// wrapText breaks words into lines of at most width characters.
func wrapText(s string, width int) []string {
	var out []string
	line := ""
	for _, word := range strings.Fields(s) {
		for runewidth.StringWidth(word) > width { // a word longer than the line
			if line != "" {
				out, line = append(out, line), ""
			}
			head := runewidth.Truncate(word, width, "")
			if head == "" {
				break
			}
			out, word = append(out, head), word[len(head):]
		}
		switch {
		case line == "":
			line = word
		case runewidth.StringWidth(line)+1+runewidth.StringWidth(word) <= width:
			line += " " + word
		default:
			out, line = append(out, line), word
		}
	}
	if line != "" {
		out = append(out, line)
	}
	return out
}
