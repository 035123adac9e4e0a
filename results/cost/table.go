package cost

import (
	"fmt"
	"io"
	"strings"
	"unicode"
	"unicode/utf8"
)

// lineWidth is the width that sentences are broken to.
const lineWidth = 100

// Table prints a result for a terminal: the answer sentence, a table of memory,
// one of costs for a step and an inference under each reuse model, and what they
// rest on. Detail adds, for each arm, traffic by class and phase, figures layer
// by layer, and what was extrapolated. It returns the writer's error.
func Table(w io.Writer, r *Result, detail bool) error {
	p := &printer{w: w}
	p.wrap("", r.Answer)
	bills := append([]*Bill{&r.Reference}, pointers(r.Arms)...)
	p.memory(r, bills)
	p.costs(r, bills, Once)
	if allFits(bills) {
		p.head(fmt.Sprintf("In blocks through a cache of %s: the same, no product needs a tensor twice", bytesOf(8*r.Machine.Cache)))
	} else {
		p.costs(r, bills, Tiled)
	}
	p.line("")
	p.line("~ extrapolated: the table lacks a row for some of it")
	if detail {
		for _, b := range bills {
			p.detail(b)
		}
	}
	p.list("Cautions", r.Cautions)
	p.list("Warnings", r.Warnings)
	p.list("Assumptions", r.Assumptions)
	return p.err
}

func pointers(bills []Bill) []*Bill {
	all := make([]*Bill, len(bills))
	for i := range bills {
		all[i] = &bills[i]
	}
	return all
}

// memory: bits a value by class, and what must fit where.
func (p *printer) memory(r *Result, bills []*Bill) {
	p.head("Bits a value in training memory, block scales and metadata included")
	g := grid{append(append([]string{"arm"}, classNames()...), "all")}
	for _, b := range bills {
		row := []string{b.Name}
		for _, c := range Classes() {
			row = append(row, b.Memory.width(c))
		}
		g = append(g, append(row, width(b.Memory.Width)))
	}
	p.grid(g)
	p.head("Memory")
	g = grid{{"", "", "of", "", "of"}, {"arm", "training", "fp32", "endpoint", "fp32"}}
	ref := &r.Reference.Memory
	for _, b := range bills {
		t, e := &b.Memory.Training, &b.Memory.Endpoint
		g = append(g, []string{
			b.Name,
			bytesOf(t.Bits), fraction(ratio(float64(t.Bits), float64(ref.Training.Bits))),
			bytesOf(e.Bits), fraction(ratio(float64(e.Bits), float64(ref.Endpoint.Bits))),
		})
	}
	p.grid(g)
}

func classNames() []string {
	names := make([]string, 0, len(Classes())+1)
	for _, c := range Classes() {
		names = append(names, string(c))
	}
	return names
}

// width is the mean number of bits of a stored value of a class, "-" of none.
func (m *Memory) width(c Class) string {
	var bits, values uint64
	for _, t := range m.Tensors {
		if t.Class == c {
			bits += t.Bits
			values += t.Values
		}
	}
	if values == 0 {
		return "-"
	}
	return width(float64(bits) / float64(values))
}

// costs: a step and an inference under one reuse model.
func (p *printer) costs(r *Result, bills []*Bill, reuse Reuse) {
	how := "each tensor moved once a phase"
	if reuse == Tiled {
		how = "in blocks through a cache of " + bytesOf(8*r.Machine.Cache)
	}
	p.head(fmt.Sprintf("A training step of %s on %s, %s", plural(r.Batch, "example"), r.Machine.Name, how))
	p.activities(bills, func(b *Bill) *Activity { return &b.account(reuse).Step })
	p.head(fmt.Sprintf("An inference of %s on %s, %s", plural(r.InferenceBatch, "example"), r.Machine.Name, how))
	p.activities(bills, func(b *Bill) *Activity { return &b.account(reuse).Inference })
}

// allFits reports whether the two reuse models agree.
func allFits(bills []*Bill) bool {
	for _, b := range bills {
		if b.Once.Step.Total.Bits != b.Tiled.Step.Total.Bits || b.Once.Inference.Total.Bits != b.Tiled.Inference.Total.Bits {
			return false
		}
	}
	return true
}

func (b *Bill) account(reuse Reuse) *Account {
	if reuse == Tiled {
		return &b.Tiled
	}
	return &b.Once
}

func (p *printer) activities(bills []*Bill, of func(*Bill) *Activity) {
	g := grid{
		{"", "", "of", "", "times", "bound", "", "of"},
		{"arm", "moves", "fp32", "time", "as fast", "by", "energy", "fp32"},
	}
	for _, b := range bills {
		g = append(g, append([]string{b.Name}, cells(&of(b).Total)...))
	}
	p.grid(g)
}

// cells are the figures of one row.
func cells(f *Figures) []string {
	return []string{
		bytesOf(f.Bits), fraction(f.Against.Bits),
		mark(f.Time.Extrapolated, scaled(f.Time.Seconds, 1, timeUnits)),
		mark(f.Against.SpeedupExtrapolated, significant(f.Against.Speedup)),
		string(f.Time.Binds),
		mark(f.Energy.Extrapolated, scaled(f.Energy.Total, 1e-12, jouleUnit)),
		mark(f.Against.EnergyExtrapolated, fraction(f.Against.Energy)),
	}
}

func mark(extrapolated bool, s string) string {
	if extrapolated {
		return "~" + s
	}
	return s
}

// detail prints one arm's step, each tensor moved once.
func (p *printer) detail(b *Bill) {
	step := &b.Once.Step
	p.head(b.Name + ": bytes of a step by class and phase")
	g := grid{append([]string{"class"}, phaseNames(step.Phases)...)}
	for _, c := range Classes() {
		row := []string{string(c)}
		for i := range step.Phases {
			row = append(row, bytesOf(step.Phases[i].Traffic.Of(c)))
		}
		g = append(g, append(row, bytesOf(step.Total.Traffic.Of(c))))
	}
	p.grid(g)
	p.head(b.Name + ": a step by layer")
	g = grid{{"layer", "moves", "of fp32", "time", "times as fast", "bound by", "energy", "of fp32"}}
	for i := range step.Layers {
		l := &step.Layers[i]
		g = append(g, append([]string{l.title()}, cells(&l.Total)...))
	}
	p.grid(append(g, append([]string{"all"}, cells(&step.Total)...)))
	p.energy(b)
	p.list(b.Name+": extrapolated", append(append([]string{}, b.Once.TimeLabel.Rules...), b.Once.EnergyLabel.Rules...))
}

// energy prints where a step's and an inference's energy goes.
func (p *printer) energy(b *Bill) {
	p.head(b.Name + ": energy by use")
	g := grid{{"", "multiply", "add", "random bits", "operands", "cache", "memory"}}
	for _, row := range []struct {
		name string
		e    *Energy
	}{{"step", &b.Once.Step.Total.Energy}, {"inference", &b.Once.Inference.Total.Energy}} {
		cells := []string{row.name}
		for _, pj := range []float64{row.e.Multiply, row.e.Add, row.e.Random, row.e.Operands, row.e.Cache, row.e.Memory} {
			cells = append(cells, scaled(pj, 1e-12, jouleUnit))
		}
		g = append(g, cells)
	}
	p.grid(g)
}

func (l *LayerFigures) title() string {
	if l.Layer < 0 {
		return l.Name
	}
	return fmt.Sprintf("%d %s", l.Layer, l.Name)
}

func phaseNames(phases []PhaseFigures) []string {
	names := make([]string, 0, len(phases)+1)
	for i := range phases {
		names = append(names, string(phases[i].Phase))
	}
	return append(names, "all")
}

// printer writes lines and remembers the first error.
type printer struct {
	w   io.Writer
	err error
}

func (p *printer) line(s string) {
	if p.err == nil {
		_, p.err = fmt.Fprintln(p.w, strings.TrimRight(s, " "))
	}
}

func (p *printer) head(s string) {
	p.line("")
	p.line(clean(s))
}

func (p *printer) list(title string, items []string) {
	if len(items) == 0 {
		return
	}
	p.head(title)
	for _, s := range items {
		p.wrap("- ", s)
	}
}

// wrap writes a sentence in lines of lineWidth; those after the first are
// indented as far as the first one's mark.
func (p *printer) wrap(mark, s string) {
	line := mark
	indent := strings.Repeat(" ", len(mark))
	for i, word := range strings.Fields(clean(s)) {
		if i > 0 && utf8.RuneCountInString(line)+1+utf8.RuneCountInString(word) > lineWidth {
			p.line(line)
			line = indent + word
			continue
		}
		if i > 0 {
			line += " "
		}
		line += word
	}
	p.line(line)
}

// grid is a table's cells, the first column flush left, the others flush right.
type grid [][]string

func (p *printer) grid(g grid) {
	widths := make([]int, len(g[len(g)-1]))
	for _, row := range g {
		for c, s := range row {
			widths[c] = max(widths[c], utf8.RuneCountInString(clean(s)))
		}
	}
	for _, row := range g {
		var b strings.Builder
		for c, s := range row {
			s = clean(s)
			pad := strings.Repeat(" ", widths[c]-utf8.RuneCountInString(s))
			if c == 0 {
				b.WriteString("  " + s + pad)
			} else {
				b.WriteString("  " + pad + s)
			}
		}
		p.line(b.String())
	}
}

// clean keeps control characters of a plan's names off the terminal.
func clean(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsControl(r) || unicode.Is(unicode.Cf, r) {
			return unicode.ReplacementChar
		}
		return r
	}, strings.ToValidUTF8(s, string(unicode.ReplacementChar)))
}
